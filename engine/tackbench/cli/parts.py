"""The command ``parts``: what the library knows, where each figure comes from, how far parts of one type differ."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any

import click

from tackbench.cli.options import parts_option
from tackbench.cli.output import say
from tackbench.cli.table import paragraph
from tackbench.errors import InputError, nearest
from tackbench.parts import KEYS, PartEntry, PartsLibrary, known_kinds, load_parts
from tackbench.values import format_quantity

FROM_MEMORY = "From memory in part or whole (see the source): treat those figures as a starting point"


@click.command("parts")
@click.argument("what", required=False, metavar="[KIND|NAME]")
@parts_option
def command(what: str | None) -> None:
    """List the parts library, or show a part with its sources.

    With a kind (diode, opamp, …) its entries are listed; with a type number everything about it is shown: its
    parameters in their units, the low and high bounds of its spread, and the source of the figures.
    """
    library = load_parts()
    for line in _chosen(library, what):
        say(line)


def _chosen(library: PartsLibrary, what: str | None) -> Iterator[str]:
    if what is None:
        for kind in known_kinds():
            yield from _kind(library, kind)
        yield "* figures from memory, in part or whole.  One of them in full: tackbench parts NAME"
        return
    if what.casefold() in known_kinds():
        yield from _kind(library, what.casefold())
        return
    entry = library.by_name.get(what.strip().casefold())
    if entry is None:
        words = [*known_kinds(), *(name for item in library.entries() for name in (item.name, *item.aliases))]
        raise InputError(f"the parts library has no kind and no part {what[:60]!r}", expected=nearest(what, words))
    yield from _entry(entry)


def _kind(library: PartsLibrary, kind: str) -> Iterator[str]:
    entries = library.entries(kind)
    if not entries:
        return
    yield kind
    size = max(len(entry.name) for entry in entries)
    for entry in entries:
        mark = "*" if entry.from_memory else " "
        yield from paragraph(" ".join(entry.about.split()), f"  {entry.name.ljust(size)} {mark} ") or [
            f"  {entry.name.ljust(size)} {mark}".rstrip()
        ]
    yield ""


def _entry(entry: PartEntry) -> Iterator[str]:
    others = f" (also {', '.join(entry.aliases)})" if entry.aliases else ""
    yield f"{entry.name}{others}: {entry.kind}"
    if entry.about:
        yield from paragraph(" ".join(entry.about.split()), "")
    yield ""
    yield from _parameters(entry)
    for bound, about in (("low", entry.low_about), ("high", entry.high_about)):
        if about:
            yield from paragraph(f"{bound}: {' '.join(about.split())}", "  ")
    yield ""
    yield from _provenance(entry)


def _parameters(entry: PartEntry) -> Iterator[str]:
    sets = [entry.parameters, *(bound for bound in (entry.low, entry.high) if bound is not None)]
    heads = ["typical", *(name for name, bound in (("low", entry.low), ("high", entry.high)) if bound is not None)]
    yield f"  {'':24}" + "".join(head.rjust(14) for head in heads)
    for key in KEYS[entry.family]:
        if any(key.name in values for values in sets):
            spelt = [_spelt(values, key.name, key.unit) for values in sets]
            yield f"  {key.name.replace('_', ' '):24}" + "".join(text.rjust(14) for text in spelt)


def _spelt(values: Mapping[str, Any], name: str, unit: str) -> str:
    value = values.get(name)
    if value is None:
        return "-"
    if unit in ("word", "flag"):
        return str(value)
    return f"{value:.3e} A" if name == "saturation_current" else format_quantity(value, unit)


def _provenance(entry: PartEntry) -> Iterator[str]:
    told = {"Source": entry.source, "Conditions": entry.conditions, "Basis": entry.basis}
    for name, text in told.items():
        if text:
            yield from paragraph(f"{name}: {' '.join(text.split())}", "")
    if entry.fit_error_millivolts is not None:
        of = f" over {len(entry.points)} points" if entry.points else ""
        yield f"Fit: {entry.fit_error_millivolts:g} mV rms{of}"
    if entry.from_memory:
        yield FROM_MEMORY
    if entry.own:
        yield f"From your own file {entry.file}"
