"""A circuit as a list of its nodes, each with the parts that meet there: for comparing a stage file with paper."""

from __future__ import annotations

import textwrap
from collections.abc import Iterator, Mapping

from tackbench.circuit import GROUND, PIN_ORDER, Circuit, Part
from tackbench.cli.table import width_of_terminal

_PINS = {"positive_rail": "power +", "negative_rail": "power -"}
_SYMMETRIC = ("resistor", "capacitor", "inductor", "wire")
_POT = {"first": ("end", "wiper"), "second": ("wiper", "other end")}


def node_lines(circuit: Circuit, volts: Mapping[str, float], width: int | None = None) -> Iterator[str]:
    """One entry a node: its name, its volts, what meets there (with the pin's name where it matters); ground last."""
    found = parts_at_nodes(circuit)
    size = min(max(len(name) for name in found), 20)
    for name in (*(name for name in found if name != GROUND), GROUND):
        told = "ground" if name == GROUND else f"{volts[name]:.3f} V"
        head = f"  {name.ljust(size)} {told.rjust(11)}  "
        yield from textwrap.wrap(
            ", ".join(found[name]) or "nothing",
            width or width_of_terminal(),
            initial_indent=head,
            subsequent_indent=" " * len(head),
            break_long_words=False,
            break_on_hyphens=False,
        )


def parts_at_nodes(circuit: Circuit) -> dict[str, list[str]]:
    """Every node and ground, with the jacks, supplies and pins that meet there, in the order of the file."""
    found: dict[str, list[str]] = {name: [] for name in (*circuit.nodes(), GROUND)}
    found[circuit.input_node].append("input")
    found[circuit.output_node].append("output")
    if circuit.supply is not None:
        found[circuit.supply.node].append("supply")
        for name, ratio in circuit.supply.rails:
            found[name].append(f"supply x {ratio:g}")
    for part in circuit.parts:
        for node, words in _pins(part):
            if words not in found[node]:
                found[node].append(words)
    return found


def _pins(part: Part) -> Iterator[tuple[str, str]]:
    """(node, designator with pin) for every pin of a part."""
    if part.section and part.section in _POT:
        names: tuple[str, ...] = _POT[part.section]
    elif part.kind in _SYMMETRIC:
        names = ("", "")
    else:
        names = PIN_ORDER[part.kind]
    for node, pin in zip(part.pins, names, strict=True):
        yield node, f"{part.ref} {_PINS.get(pin, pin)}".rstrip()
