"""One flat, frozen netlist in SI units: what a variant becomes before any equation is written."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from types import MappingProxyType
from typing import Any

GROUND = "0"

PIN_ORDER: Mapping[str, tuple[str, ...]] = MappingProxyType(
    {
        "resistor": ("a", "b"),
        "capacitor": ("a", "b"),
        "inductor": ("a", "b"),
        "source": ("plus", "minus"),
        "wire": ("a", "b"),
        "diode": ("anode", "cathode"),
        "opamp": ("plus", "minus", "out", "positive_rail", "negative_rail"),
        "bipolar": ("collector", "base", "emitter"),
        "jfet": ("drain", "gate", "source"),
        "mosfet": ("drain", "gate", "source"),
    }
)
"""The order of ``Part.pins`` for each kind; resistors, capacitors and inductors are symmetric."""


@dataclass(frozen=True)
class Part:
    """One component.

    ``ref`` is the reference designator; the two halves of a potentiometer are two resistors with the same
    ``ref`` and the ``section`` "first" (first end to wiper) and "second" (wiper to the other end).
    ``pins`` are node names in the order of ``PIN_ORDER[kind]``. ``value`` is ohms, farads, henries or volts
    (resistor, capacitor, inductor, source), None for the others. ``series_ohms`` is an inductor's winding
    resistance. ``polarity`` is -1 for p-type transistors, otherwise 1. ``count`` is a diode string's length.
    ``model`` is the library name (or "in place"), ``parameters`` the complete parameter set of a device at
    25 degrees C, in the keys and SI units of ``tackbench.devices`` with defaults filled in and absent optional
    keys left out. ``rated_volts`` and ``tolerance`` (a fraction) are None where the file has none.
    """

    ref: str
    kind: str
    pins: tuple[str, ...]
    value: float | None = None
    section: str = ""
    series_ohms: float = 0.0
    polarity: int = 1
    count: int = 1
    model: str = ""
    parameters: Mapping[str, Any] = field(default_factory=lambda: MappingProxyType({}))
    rated_volts: float | None = None
    tolerance: float | None = None

    def pin(self, name: str) -> str:
        """The node that the named pin of ``PIN_ORDER`` is connected to."""
        return self.pins[PIN_ORDER[self.kind].index(name)]


@dataclass(frozen=True)
class Supply:
    """The supply: an ideal source of ``volts`` behind ``ohms`` at ``node``; ``rails`` are (node, ratio) pairs."""

    node: str
    volts: float
    ohms: float = 0.0
    rails: tuple[tuple[str, float], ...] = ()


@dataclass(frozen=True)
class Circuit:
    """A complete circuit. The take drives ``input_node`` through ``input_ohms`` (0 allowed), its source grounded;
    ``output_load_ohms`` stands from ``output_node`` to ground (None: no load). ``temperature`` is in kelvin."""

    title: str
    parts: tuple[Part, ...]
    input_node: str
    input_ohms: float
    output_node: str
    output_load_ohms: float | None
    supply: Supply | None = None
    temperature: float = 298.15

    def nodes(self) -> tuple[str, ...]:
        """Every node name but ground, in order of first appearance."""
        seen: dict[str, None] = {}
        for name in (self.input_node, self.output_node):
            seen.setdefault(name)
        if self.supply is not None:
            seen.setdefault(self.supply.node)
            for name, _ in self.supply.rails:
                seen.setdefault(name)
        for part in self.parts:
            for name in part.pins:
                seen.setdefault(name)
        seen.pop(GROUND, None)
        return tuple(seen)
