"""What the commands that make a part from meter readings share: their options, their table, the file they write."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from tackbench.cli.output import say
from tackbench.cli.table import paragraph
from tackbench.values import Where, format_quantity, parse_quantity

if TYPE_CHECKING:
    from tackbench.parts import PartEntry
    from tackbench.workbench.diode_meter import Span

name_argument = click.argument("name", metavar="NAME")

output_option = click.option(
    "-o",
    "--output",
    metavar="FILE",
    help="The part file to write, ending in .toml; by default parts/NAME.toml here, where a stage file in this "
    "folder finds it. A file that is there already is never touched.",
)

temperature_option = click.option(
    "--temperature",
    default="25",
    show_default=True,
    metavar="T",
    help="Degrees Celsius of the part while it was measured. Let it cool after handling it.",
)


def like_option(what: str) -> Any:
    """The option that names the entry which lends what the readings cannot tell."""
    return click.option(
        "--like", metavar="TYPE", help=f"The entry of the parts library that lends the rest; by default {what}."
    )


def quantity(text: str, unit: str, option: str, rule: str = ">0") -> float:
    """An option's value in its base unit; InputError naming the option."""
    return parse_quantity(text, unit, rule, Where(option))


def celsius(text: str) -> float:
    """The temperature of the part; InputError outside what a bench can be."""
    where = Where("--temperature")
    value = parse_quantity(text, "celsius", "any", where)
    if not -20.0 <= value <= 80.0:
        raise where.fault(f"{text!r} is no temperature of a bench", "give degrees Celsius, for example 23")
    return value


def lender(like: str | None, default: str, kind: str) -> PartEntry:
    """The entry that lends the rest: the one named by --like, or the default. Raises InputError."""
    from tackbench.parts import load_parts

    return load_parts().find(like or default, kind, Where("--like"))


Row = tuple[str, "Span", str]
"""What it is, its span, its unit."""


def print_rows(rows: Sequence[Row]) -> None:
    """A small table: how low, best, how high."""
    cells = [
        (name, *(_spelt(value, unit) for value in (span.low, span.best, span.high))) for name, span, unit in rows
    ]
    size = max(len(row[0]) for row in cells)
    say(f"  {''.ljust(size)}  {'low':>11} {'best':>11} {'high':>11}")
    for row in cells:
        say(f"  {row[0].ljust(size)}  {row[1]:>11} {row[2]:>11} {row[3]:>11}")


def _spelt(value: float, unit: str) -> str:
    if unit == "A/V":
        return f"{1e3 * value:.3g} mA/V"
    if unit == "A" and 0 < abs(value) < 1e-12:
        return f"{value:.2e} A"
    return format_quantity(value, unit, 3)


def finish(place: Path, name: str, table: Mapping[str, Any], advice: Iterable[str]) -> None:
    """Write the part file, and say where it is and how to use it."""
    from tackbench.workbench.part_file import PARTS_FOLDER, write_part

    write_part(place, name, table)
    for sentence in advice:
        for line in paragraph(sentence):
            say(line)
    say(f"\nwritten: {place}")
    if place.parent == Path(PARTS_FOLDER):
        how = "a stage file beside the folder parts finds it by itself; any other stage with --parts parts"
    else:
        how = f"use it with --parts {place.parent}"
    say(f"{how}. As a model it is called {name!r}.")
