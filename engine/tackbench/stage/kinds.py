"""The kinds of part that a stage file may hold: the kind key, its pins, its value, its further keys."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType


@dataclass(frozen=True)
class Kind:
    """One kind key. ``pin_keys`` are the keys that name its nodes, each with how many nodes it takes (a list when
    more than one); ``shape`` groups kinds whose pins correspond, so that one may replace the other and keep them.
    ``unit`` and ``rule`` govern the value of kinds that have one; the others take a model. ``options`` are the
    further keys. ``netlist`` is the kind in ``tackbench.circuit``.
    """

    key: str
    netlist: str
    pin_keys: tuple[tuple[str, int], ...]
    shape: str
    unit: str = ""
    rule: str = ">0"
    options: tuple[str, ...] = ()
    zero_hint: str = ""

    @property
    def takes_model(self) -> bool:
        """True when the kind key is followed by a model, not by a value."""
        return not self.unit

    @property
    def pin_count(self) -> int:
        return sum(count for _, count in self.pin_keys)

    @property
    def keys(self) -> tuple[str, ...]:
        """Every key that a part of this kind may have."""
        return (self.key, *(name for name, _ in self.pin_keys), *self.options)


_LIMITS = ("rated", "tolerance")
_TWO = (("pins", 2),)
_BIPOLAR = (("collector", 1), ("base", 1), ("emitter", 1))
_FET = (("drain", 1), ("gate", 1), ("source", 1))
_OPAMP = (("plus", 1), ("minus", 1), ("out", 1), ("power", 2))

KINDS: Mapping[str, Kind] = MappingProxyType(
    {
        kind.key: kind
        for kind in (
            Kind("resistor", "resistor", _TWO, "two", "ohm", ">=0", _LIMITS),
            Kind("capacitor", "capacitor", _TWO, "two", "F", ">0", _LIMITS),
            Kind("inductor", "inductor", _TWO, "two", "H", ">0", ("ohms", *_LIMITS)),
            Kind("pot", "pot", (("pins", 3),), "pot", "ohm", ">0", ("taper", "control", "at", *_LIMITS)),
            Kind("volts", "source", _TWO, "two", "V", "any"),
            Kind("diode", "diode", (("anode", 1), ("cathode", 1)), "two", options=("count",)),
            Kind("opamp", "opamp", _OPAMP, "opamp"),
            Kind("npn", "bipolar", _BIPOLAR, "three"),
            Kind("pnp", "bipolar", _BIPOLAR, "three"),
            Kind("n-jfet", "jfet", _FET, "three"),
            Kind("p-jfet", "jfet", _FET, "three"),
            Kind("n-mosfet", "mosfet", _FET, "three"),
            Kind("p-mosfet", "mosfet", _FET, "three"),
        )
    }
)
"""Every kind by its kind key."""
