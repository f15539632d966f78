"""The units that quantities may have: how they are spelt, which prefixes fit, which magnitudes make sense."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from types import MappingProxyType

PREFIXES: Mapping[str, int] = MappingProxyType(
    {"f": -15, "p": -12, "n": -9, "u": -6, "m": -3, "k": 3, "K": 3, "M": 6, "G": 9, "T": 12}
)
"""Power of ten of each prefix; both micro signs have become ``u`` before this table is asked."""

OHM = "\u03a9"
_UP = ("k", "K", "M", "G", "T")


@dataclass(frozen=True)
class Unit:
    """One unit: its plural ``name`` for sentences, the ``symbol`` shown to people, what users may write.

    ``spellings`` maps each accepted spelling to a power of ten; ``marks`` are the letters that may stand for
    the decimal point (IEC 60062); ``refused`` are prefixes that would be a slip with this unit; ``low`` and
    ``high`` bound the magnitude of anything that is not zero; ``shown`` are the prefixes used for display.
    """

    name: str
    symbol: str
    spellings: Mapping[str, int]
    example: str
    low: float
    high: float
    marks: tuple[str, ...] = ()
    refused: tuple[str, ...] = ()
    shown: tuple[str, ...] = ("p", "n", "u", "m", "", "k", "M", "G")
    words: tuple[str, ...] = field(default=())


UNITS: Mapping[str, Unit] = MappingProxyType(
    {
        "ohm": Unit(
            "ohms",
            OHM,
            {OHM: 0, "R": 0},
            "4k7, 4.7k or 4700",
            1e-9,
            1e15,
            ("R", OHM),
            ("f", "p", "n"),
            ("", "k", "M", "G"),
            ("ohm", "ohms"),
        ),
        "F": Unit(
            "farads",
            "F",
            {"F": 0},
            "100n, 100 nF or 0u1",
            1e-21,
            1e4,
            ("F",),
            _UP,
            ("p", "n", "u"),
            ("farad", "farads"),
        ),
        "H": Unit("henries", "H", {"H": 0}, "2H2, 2.2 H or 500m", 1e-12, 1e6, ("H",), words=("henry", "henries")),
        "V": Unit("volts", "V", {"V": 0}, "9, 9V or 4V5", 1e-12, 1e9, ("V",), words=("volt", "volts")),
        "A": Unit(
            "amperes",
            "A",
            {"A": 0},
            "2.5n, 2.5 nA or 2.5e-9",
            1e-60,
            1e4,
            ("A",),
            shown=("f", "p", "n", "u", "m", ""),
            words=("ampere", "amperes", "amp", "amps"),
        ),
        "Hz": Unit("hertz", "Hz", {"Hz": 0}, "3M, 3 MHz or 3e6", 1e-6, 1e13, words=("hertz",)),
        "V/s": Unit(
            "volts per second",
            "V/s",
            {"V/s": 0, "V/ms": 3, "V/us": 6, "V/ns": 9},
            "13 V/us, 13M or 13e6",
            1e-3,
            1e13,
        ),
        "eV": Unit("electronvolts", "eV", {"eV": 0}, "1.11", 1e-3, 20.0, shown=("",)),
        "1/V": Unit("per volt", "/V", {"/V": 0, "1/V": 0}, "0.01", 1e-12, 1e3, shown=("",)),
        "A/V2": Unit(
            "amperes per volt squared",
            "A/V²",
            {"A/V2": 0, "A/V²": 0, "A/V^2": 0},
            "0.1 or 100 mA/V2",
            1e-12,
            1e6,
            shown=("m", ""),
        ),
        "": Unit("a plain number", "", {}, "1.75", 1e-9, 1e12, shown=("",)),
        "celsius": Unit(
            "degrees Celsius",
            "°C",
            {"C": 0, "°C": 0, "degC": 0},
            "25 or 25 °C",
            1e-9,
            1e4,
            refused=tuple(PREFIXES),
            shown=("",),
        ),
    }
)
"""Every unit by the key that ``tackbench.devices.schema`` uses for it, and ``celsius`` for temperatures."""
