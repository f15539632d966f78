"""The command ``mosfet-from-meter``: the threshold of your own MOSFET from one reading."""

from __future__ import annotations

import click

from tackbench.cli import bench
from tackbench.cli.options import parts_option
from tackbench.cli.output import say
from tackbench.errors import InputError

LIKE = {"n-mosfet": "2N7000", "p-mosfet": "BS250"}


@click.command("mosfet-from-meter")
@bench.name_argument
@click.option(
    "--reading",
    required=True,
    metavar="V@I",
    help="Volts from drain to source with the gate tied to the drain: 2.1@1m (volts, amperes), or 2.1@9/6k8 when it "
    "is fed from 9 V through 6.8 kilohm.",
)
@click.option("--kind", type=click.Choice(list(LIKE)), default="n-mosfet", show_default=True, help="Which channel.")
@bench.like_option("2N7000 or BS250")
@parts_option
@bench.output_option
def command(name: str, reading: str, kind: str, like: str | None, output: str | None) -> None:
    """Make a model of your own MOSFET, called NAME, from one reading (without sign).

    The threshold spreads by nearly four to one within a type, and a MOSFET that serves as a diode clips at it.
    """
    from tackbench.workbench.fet_meter import MosfetTest, mosfet_entry, mosfet_from_reading
    from tackbench.workbench.part_file import place_for
    from tackbench.workbench.readings import read_point

    place = place_for(name, output)
    entry = bench.lender(like, LIKE[kind], kind)
    if "@" not in reading:
        raise InputError(
            "the current behind the reading is missing", key=f"--reading {reading!r}", expected="write it too: 2.1@1m"
        )
    point = read_point(reading, None)
    threshold = mosfet_from_reading(MosfetTest(point.volts, point.amperes), entry)
    say(f"{name}: {kind}, {point.words()} with the gate at the drain")
    bench.print_rows([("threshold, without sign", threshold, "V")])
    advice = [f"everything else is kept from {entry.name}"]
    bench.finish(place, name, mosfet_entry(threshold, MosfetTest(point.volts, point.amperes), entry), advice)
