"""The command ``shootout``: several variants of one take, side by side at equal loudness."""

from __future__ import annotations

from typing import Any

import click

from tackbench.cli import options as shared
from tackbench.cli.output import say, tell


@click.command("shootout")
@shared.take_argument
@shared.stage_option
@click.option(
    "--try",
    "tries",
    multiple=True,
    metavar="KEY=V1,V2,…",
    help="Try these values, each against the reference; keys and values as for --with. May be repeated.",
)
@shared.with_option
@click.option("--grid", is_flag=True, help="Every combination of the tried values, not one change at a time.")
@click.option(
    "-o",
    "--output",
    "folder",
    metavar="FOLDER",
    help="The folder to write; by default named after the take and the stage, in the current directory.",
)
@shared.quality_option
@shared.overwrite_option
@shared.threads_option
@shared.calibration_options
def command(take: str, folder: str | None, **options: Any) -> None:
    """Render a take through several variants at equal loudness.

    With nothing but a TAKE the stage's own questions are tried. The folder holds the bypass (the take), one 24-bit
    WAV for each variant, index.html to listen with, and shootout.json with every figure and part value. The table
    gives the output in volts, what matching hides in dB, the gain applied, crest factor, DC, polarity and seconds.
    """
    run_shootout(take, folder, options)


def run_shootout(take: str, folder: str | None, options: dict[str, Any]) -> None:
    """Check, tell what it will take, work, and print the table; ``options`` are the command's, by name."""
    from tackbench.audio import load_take
    from tackbench.cli.figures import figure_lines
    from tackbench.cli.progress import compile_kernels, progress_bar
    from tackbench.shootout import prepare_shootout
    from tackbench.stage import load_stage

    calibration = shared.split_calibration(options)
    with_, tries = shared.pairs_from(options["with_"], "--with"), shared.lists_from(options["tries"], "--try")
    stage = load_stage(options["stage"])
    job = prepare_shootout(
        load_take(take, calibration),
        stage,
        with_,
        tries,
        options["grid"],
        folder,
        options["quality"],
        options["overwrite"],
        options["threads"],
    )
    compile_kernels()
    needs = job.estimate()
    tell(f"{stage.title}: {job.plan.question}")
    tell(f"{needs.words}, into {job.folder}")
    job.check_room(needs)
    with progress_bar("rendering") as report:
        result = job.run(report)
    for line in figure_lines(result.data):
        say(line)
    say(f"\nListen: {result.page}")
