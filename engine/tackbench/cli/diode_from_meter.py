"""The command ``diode-from-meter``: a model of your own diode from a few readings."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

import click

from tackbench.cli import bench
from tackbench.cli.options import parts_option
from tackbench.cli.output import say
from tackbench.errors import InputError

if TYPE_CHECKING:
    from tackbench.workbench.diode_meter import DiodeModel

MATERIALS = ("silicon", "germanium", "schottky", "led")


@click.command("diode-from-meter")
@bench.name_argument
@click.option(
    "--reading",
    "readings",
    multiple=True,
    metavar="V@I",
    help="Volts across the diode at a current: 0.62@1m (volts, amperes), or 0.62@9/10k when it is fed from 9 V "
    "through 10 kilohm, or 0.62 alone with --test-current. May be repeated; two currents a hundred times apart are "
    "worth far more than one.",
)
@click.option(
    "--across-resistor",
    "dropped",
    multiple=True,
    metavar="V@V/R",
    help="Volts across the resistor in series instead, with the supply in volts and the ohms: 8.38@9/10k.",
)
@click.option(
    "--test-current",
    metavar="I",
    help="The current in amperes that your meter's diode test sends. Meters differ: 0.5 to 1 mA is common.",
)
@click.option("--material", type=click.Choice(MATERIALS), default="silicon", show_default=True, help="What it is of.")
@bench.like_option("one of the material")
@parts_option
@bench.temperature_option
@bench.output_option
def command(
    name: str,
    readings: tuple[str, ...],
    dropped: tuple[str, ...],
    test_current: str | None,
    material: str,
    like: str | None,
    temperature: str,
    output: str | None,
) -> None:
    """Make a model of your own diode, called NAME, from a few meter readings.

    One reading gives the saturation current and keeps the material's ideality; two at different currents give the
    ideality too; three or more the series resistance. What so few readings leave open is told as what it does to the
    clip level and to the resting resistance of a pair, and stored as the model's low and high ends.
    """
    from tackbench.workbench.diode_meter import LIKE, diode_entry, diode_from_readings
    from tackbench.workbench.part_file import place_for
    from tackbench.workbench.readings import read_point, read_resistor_point

    place = place_for(name, output)
    entry = bench.lender(like, LIKE[material], "diode")
    if "breakdown_volts" in entry.parameters:
        raise InputError(f"{entry.name} breaks down: readings forward say nothing of that", key="--like")
    current = None if test_current is None else bench.quantity(test_current, "A", "--test-current")
    points = [read_point(text, current) for text in readings] + [read_resistor_point(text) for text in dropped]
    celsius = bench.celsius(temperature)
    model = diode_from_readings(points, entry, celsius)
    say(f"{name}: {len(points)} reading{'s' if len(points) != 1 else ''}, {'; '.join(p.words() for p in points)}")
    _print(model)
    table = diode_entry(model, points, entry, celsius)
    bench.finish(place, name, table, _advice(model, len(points), entry.parameters["material"]))


def _print(model: DiodeModel) -> None:
    bench.print_rows(
        [
            ("saturation current", model.spans["saturation_current"], "A"),
            ("ideality", model.spans["ideality"], ""),
            ("series resistance", model.spans["series_ohms"], "ohm"),
            ("clip level of a pair", model.clip_volts, "V"),
            ("pair at rest", model.rest_ohms, "ohm"),
        ]
    )
    if model.error_millivolts is not None:
        say(f"  the readings are met to {model.error_millivolts:.2g} mV")


def _advice(model: DiodeModel, count: int, material: str) -> Iterator[str]:
    from tackbench.workbench.diode_meter import CLIP_OHMS, CLIP_VOLTS

    yield (
        f"the clip level is that of two such diodes the two ways round, fed from {CLIP_VOLTS:g} V peak through "
        f"{CLIP_OHMS / 1e3:g} kilohm; at rest is the resistance that the pair has for the smallest signals"
    )
    if model.kept:
        yield f"{model.kept}: {'one reading' if count == 1 else 'two readings'} cannot tell"
    if count == 1:
        yield "take a second reading at a hundredth of the current (a larger resistor): it pins the ideality"
    if material == "germanium":
        yield (
            "germanium moves by about -2 mV for every kelvin: let the part cool after handling it, and give "
            "--temperature if the room is not at 25 degrees"
        )
