"""A circuit's parts in words for the terminal: designator, value or model, where from."""

from __future__ import annotations

from collections.abc import Iterator
from itertools import groupby

from tackbench.circuit import Circuit, Part
from tackbench.values import format_quantity

_UNITS = {"resistor": "ohm", "capacitor": "F", "inductor": "H", "source": "V"}
_TYPES = {"opamp": "op-amp", "jfet": "JFET", "mosfet": "MOSFET", "bipolar": "transistor"}


def part_words(circuit: Circuit) -> Iterator[tuple[str, str]]:
    """Each designator with what stands there: ``("R4", "resistor 1 MΩ")``, pots as one part with both halves."""
    for ref, sections in groupby(circuit.parts, key=lambda part: part.ref):
        parts = list(sections)
        yield ref, _pot(parts) if parts[0].section else _one(parts[0])


def _pot(halves: list[Part]) -> str:
    shown = " + ".join(format_quantity(half.value or 0.0, "ohm", 3) for half in halves)
    return f"pot {shown} (end to wiper, wiper to end)"


def _one(part: Part) -> str:
    if part.kind in _UNITS and part.value is not None:
        return f"{part.kind} {format_quantity(part.value, _UNITS[part.kind])}"
    several = f", {part.count} in series" if part.count > 1 else ""
    return f"{_TYPES.get(part.kind, part.kind)} {part.model}{several}".rstrip()
