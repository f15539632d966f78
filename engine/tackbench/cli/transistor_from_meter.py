"""The command ``transistor-from-meter``: gain and leakage of your own transistor from the two-reading bench test."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

import click

from tackbench.cli import bench
from tackbench.cli.options import parts_option
from tackbench.cli.output import say
from tackbench.values import format_quantity

if TYPE_CHECKING:
    from tackbench.workbench.transistor_meter import TransistorModel


@click.command("transistor-from-meter")
@bench.name_argument
@click.option("--kind", type=click.Choice(["npn", "pnp"]), required=True, help="Which way round it is.")
@click.option(
    "--material",
    type=click.Choice(["silicon", "germanium"]),
    default="germanium",
    show_default=True,
    help="What it is of.",
)
@click.option("--supply", default="9", show_default=True, metavar="V", help="Volts of the battery.")
@click.option(
    "--collector-ohms", required=True, metavar="R", help="Ohms of the resistor in the collector, for example 2k2."
)
@click.option("--base-ohms", required=True, metavar="R", help="Ohms of the resistor to the base, for example 2M2.")
@click.option(
    "--base-open",
    required=True,
    metavar="V",
    help="Volts across the collector resistor with the base left open: the leakage.",
)
@click.option(
    "--base-fed",
    required=True,
    metavar="V",
    help="Volts across the collector resistor with the base resistor at the battery: leakage and gain.",
)
@bench.like_option("one of the material and kind")
@parts_option
@bench.temperature_option
@bench.output_option
def command(
    name: str,
    kind: str,
    material: str,
    supply: str,
    collector_ohms: str,
    base_ohms: str,
    base_open: str,
    base_fed: str,
    like: str | None,
    temperature: str,
    output: str | None,
) -> None:
    """Make a model of your own transistor, called NAME, from the usual two readings.

    Emitter to one pole of the battery (npn: the negative one), collector through a resistor to the other pole. Read
    the volts across that resistor twice: with the base open, and with a large resistor from the base to the pole
    where the collector resistor ends.
    """
    from tackbench.workbench.part_file import place_for
    from tackbench.workbench.transistor_meter import (
        LIKE,
        BenchTest,
        transistor_entry,
        transistor_from_readings,
    )

    place = place_for(name, output)
    entry = bench.lender(like, LIKE[material, kind], kind)
    test = BenchTest(
        bench.quantity(supply, "V", "--supply"),
        bench.quantity(collector_ohms, "ohm", "--collector-ohms"),
        bench.quantity(base_ohms, "ohm", "--base-ohms"),
        bench.quantity(base_open, "V", "--base-open", ">=0"),
        bench.quantity(base_fed, "V", "--base-fed"),
        bench.celsius(temperature),
    )
    model = transistor_from_readings(test, entry)
    idle, fed = format_quantity(test.leakage_volts, "V"), format_quantity(test.total_volts, "V")
    say(f"{name}: {kind}, {idle} with the base open, {fed} with the base fed")
    bench.print_rows([("gain", model.gain, ""), ("leakage at 25 degrees", model.leakage, "A")])
    bench.finish(place, name, transistor_entry(model, test, entry), _advice(model, entry.name, material))


def _advice(model: TransistorModel, like: str, material: str) -> Iterator[str]:
    yield f"everything but gain and leakage is kept from {like}"
    if model.apparent_gain > 1.05 * model.gain.best:
        yield (
            f"without taking the leakage off it would seem to have a gain of {model.apparent_gain:.0f}, not "
            f"{model.gain.best:.0f}"
        )
    if material == "germanium":
        yield "leakage doubles every 10 kelvin: let the part cool after handling it, for some minutes"
