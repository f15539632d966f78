"""The command ``jfet-from-meter``: drain current and pinch-off of your own JFET from two readings."""

from __future__ import annotations

import click

from tackbench.cli import bench
from tackbench.cli.options import parts_option
from tackbench.cli.output import say
from tackbench.values import format_quantity

LIKE = {"n-jfet": "2N5457", "p-jfet": "2N5460"}


@click.command("jfet-from-meter")
@bench.name_argument
@click.option("--kind", type=click.Choice(list(LIKE)), default="n-jfet", show_default=True, help="Which channel.")
@click.option("--supply", default="9", show_default=True, metavar="V", help="Volts of the battery.")
@click.option(
    "--drain-current",
    required=True,
    metavar="I",
    help="First reading: amperes from the battery through the drain with gate and source both at ground.",
)
@click.option(
    "--source-volts",
    required=True,
    metavar="V",
    help="Second reading: volts across a resistor between source and ground, the gate still at ground.",
)
@click.option(
    "--source-ohms",
    required=True,
    metavar="R",
    help="Ohms of that resistor: about the one the stage has, or 100k or more to read nearly the pinch-off itself.",
)
@bench.like_option("2N5457 or 2N5460")
@parts_option
@bench.output_option
def command(
    name: str,
    kind: str,
    supply: str,
    drain_current: str,
    source_volts: str,
    source_ohms: str,
    like: str | None,
    output: str | None,
) -> None:
    """Make a model of your own JFET, called NAME, from two readings (all without sign).

    The drain goes to the battery's other pole both times. The two readings give the drain current with the gate at
    the source and the pinch-off voltage, which differ from part to part more than anything else in the drawer.
    """
    from tackbench.workbench.fet_meter import JfetTest, jfet_entry, jfet_from_readings
    from tackbench.workbench.part_file import place_for

    place = place_for(name, output)
    entry = bench.lender(like, LIKE[kind], kind)
    test = JfetTest(
        bench.quantity(supply, "V", "--supply"),
        bench.quantity(drain_current, "A", "--drain-current"),
        bench.quantity(source_volts, "V", "--source-volts"),
        bench.quantity(source_ohms, "ohm", "--source-ohms"),
    )
    model = jfet_from_readings(test, entry)
    current, volts = format_quantity(test.drain_amperes, "A"), format_quantity(test.source_volts, "V")
    say(f"{name}: {kind}, {current} with gate at source, {volts} across {format_quantity(test.source_ohms, 'ohm')}")
    bench.print_rows(
        [
            ("drain current", model.drain_current, "A"),
            ("pinch-off, without sign", model.pinch_off, "V"),
            ("transconductance", model.transconductance, "A/V"),
        ]
    )
    advice = [
        f"everything else is kept from {entry.name}",
        "the transconductance is the one with the gate at the source: a stage that biases itself has less",
    ]
    bench.finish(place, name, jfet_entry(model, test, entry), advice)
