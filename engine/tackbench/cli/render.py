"""The command ``render``: one variant of one take into one file."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import click

from tackbench.cli import options as shared
from tackbench.cli.output import say, tell

LEVELS = ("matched", "as-built", "peak")


@click.command("render")
@shared.take_argument
@click.option(
    "-o",
    "--output",
    "out",
    required=True,
    metavar="OUT",
    help="The file to write: .wav, .flac or .aiff. What its samples mean in volts is recorded beside it in OUT.json.",
)
@shared.stage_option
@shared.with_option
@click.option(
    "--level",
    type=click.Choice(LEVELS),
    default="matched",
    show_default=True,
    help="matched: at the take's loudness, true peak at most -1 dB. as-built: 1.0 is the take's own voltage, "
    "32-bit float in a .wav, DC kept, may go beyond 1.0. peak: true peak at -1 dB.",
)
@shared.quality_option
@shared.overwrite_option
@shared.calibration_options
def command(take: str, out: str, **options: Any) -> None:
    """Render a take through one variant into one file.

    The file is as long as the TAKE, at its rate, and aligned with it to the sample.
    """
    from tackbench.audio import load_take
    from tackbench.cli.progress import compile_kernels, progress_bar
    from tackbench.shootout import prepare_file, read_choices
    from tackbench.stage import load_stage

    calibration = shared.split_calibration(options)
    stage = load_stage(options["stage"])
    variant = stage.variant(read_choices(stage, shared.pairs_from(options["with_"], "--with")))
    recording = load_take(take, calibration)
    job = prepare_file(recording, variant, out, options["level"], options["quality"], options["overwrite"])
    compile_kernels()
    tell(f"{stage.title}, {variant.words()}")
    with progress_bar("rendering") as report:
        result = job.run(report)
    _print(result.data, out)


def _print(data: Mapping[str, Any], out: str) -> None:
    from tackbench.cli.table import paragraph
    from tackbench.report import FIGURES
    from tackbench.shootout import gain_words

    say(f"{out}: {gain_words(data)}")
    for figure in FIGURES:
        say(f"  {figure.name.ljust(7)}{figure.text(data).rjust(8)} {figure.unit.ljust(4)} {figure.about}".rstrip())
    for note in data["notes"]:
        for line in paragraph(note):
            say(line)
