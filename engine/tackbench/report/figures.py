"""The figures that are shown for every variant, once for the terminal's table and the page: name, unit, spelling."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any

NONE = "-"
"""Stands where a number does not exist (a silent file has no loudness)."""


@dataclass(frozen=True)
class Figure:
    """One column: short name and unit for the terminal, a sentence for the page, the value's place and spelling."""

    name: str
    unit: str
    about: str
    key: str
    spell: Callable[[Any], str]

    def text(self, entry: Mapping[str, Any]) -> str:
        """The figure of one file's entry in ``shootout.json``, spelt; a dash where there is none."""
        value = entry.get(self.key)
        return NONE if value is None else self.spell(value)


def three_digits(value: float) -> str:
    """A number with three significant digits and no exponent, down to a thousandth: 17.4, 0.612, 0.004."""
    size = abs(value)
    if size < 0.0005:
        return "0"
    decimals = 0 if size >= 99.95 else 1 if size >= 9.995 else 2 if size >= 0.9995 else 3
    return f"{value:.{decimals}f}"


def signed_decibels(value: float) -> str:
    """A level difference with its sign and one decimal: +8.5, -0.3, 0.0."""
    rounded = round(value, 1)
    return "0.0" if rounded == 0 else f"{rounded:+.1f}"


def one_decimal(value: float) -> str:
    """A number with one decimal."""
    return f"{value:.1f}"


FIGURES = (
    Figure("output", "Vpp", "highest minus lowest output voltage", "output_vpp", three_digits),
    Figure("peak", "V", "largest distance from the output's resting voltage", "peak_volts", three_digits),
    Figure(
        "level",
        "dB",
        "loudness of the stage's output volts against the take's volts, before matching: what matching hides",
        "level_against_bypass_db",
        signed_decibels,
    ),
    Figure(
        "gain", "dB", "gain applied to the volts for equal loudness in the file", "applied_gain_db", signed_decibels
    ),
    Figure("crest", "dB", "crest factor: peak over RMS", "crest_factor_db", one_decimal),
    Figure("DC", "V", "voltage at the output with the take silent (taken off in the file)", "dc_volts", three_digits),
    Figure(
        "pol.",
        "",
        "polarity against the take: + the same way up, inv upside down, ? neither clearly",
        "polarity",
        str,
    ),
    Figure("time", "s", "seconds of work", "seconds", one_decimal),
)
"""The columns in their order."""
