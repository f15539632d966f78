"""The command ``demo``: the main job on the take that ships, told step by step."""

from __future__ import annotations

from typing import Any

import click

from tackbench.cli import options as shared
from tackbench.cli.output import say


@click.command("demo")
@click.option(
    "-o",
    "--output",
    "folder",
    metavar="FOLDER",
    default="tackbench-demo",
    show_default=True,
    help="The folder to write, made in the current directory.",
)
@shared.quality_option
@shared.overwrite_option
@shared.threads_option
def command(folder: str, **options: Any) -> None:
    """Shootout of the take that ships, told step by step.

    Nothing is needed but this command. It takes some seconds, plus once the time to compile the numerical kernels.
    """
    from tackbench.cli.demo_take import FULL_SCALE_VOLTS, LOUDEST_VOLTS, demo_take
    from tackbench.cli.shootout import run_shootout

    with demo_take() as take:
        say("The argument: germanium or silicon diodes? And 9 V or 24 V, with the diodes and without?")
        say(
            f"1. The take: 12 s of an invented guitar straight into an interface, {LOUDEST_VOLTS:g} V at its loudest."
        )
        say("   That is its calibration; for your own take you give your own.")
        say("2. The stage: two-voice, as a drive. All that can be changed in it: tackbench stages two-voice")
        say("3. The circuit equations of every variant are solved, then all are brought to one loudness.\n")
        run_shootout(str(take), folder, _as_shootout(options, FULL_SCALE_VOLTS))
    say("\n4. Open that page in a browser, turn the volume low, and compare.")
    say("   The column `level` shows what matching took away: loudness that you might have taken for tone.")
    say("5. Your turn: tackbench shootout YOUR-TAKE.wav")


def _as_shootout(options: dict[str, Any], full_scale_volts: float) -> dict[str, Any]:
    """The demo's options as those of the shootout command."""
    nothing = dict.fromkeys(shared.CALIBRATION_KEYS)
    asked = {"stage": shared.DEFAULT_STAGE, "with_": (), "tries": (), "grid": False}
    return {**nothing, **asked, **options, "full_scale_volts": full_scale_volts}
