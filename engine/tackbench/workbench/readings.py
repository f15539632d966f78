"""Meter readings as typed: volts and amperes of a diode, and how far a handheld meter may be off."""

from __future__ import annotations

from dataclasses import dataclass

from tackbench.values import Where, format_quantity, parse_quantity

VOLTS_SHARE, VOLTS_LEAST = 0.005, 0.002
"""A handheld meter's error in volts: 0.5 % of the reading and 2 mV (from memory)."""

CURRENT_SHARE = 0.02
"""How far the current behind a reading may be off: a meter's test current, a resistor's tolerance (from memory)."""


def volts_error(volts: float) -> float:
    """How far the reading ``volts`` may be off, in volts."""
    return VOLTS_SHARE * abs(volts) + VOLTS_LEAST


@dataclass(frozen=True)
class Reading:
    """One point of a diode's curve: volts across it and amperes through it."""

    volts: float
    amperes: float

    def words(self) -> str:
        return f"{format_quantity(self.volts, 'V')} at {format_quantity(self.amperes, 'A', 3)}"


def read_point(text: str, test_current: float | None, option: str = "--reading") -> Reading:
    """A reading of the volts across the diode: ``0.62@1m`` (at a current), ``0.62@9/10k`` (fed from 9 V through
    10 kilohm), or ``0.62`` alone with the meter's test current. Raises InputError."""
    where = Where(f"{option} {text!r}")
    volts_text, at, behind = text.partition("@")
    volts = parse_quantity(volts_text, "V", ">0", where)
    if not at:
        if test_current is None:
            raise where.fault(
                "a meter's diode test sends its own current, and meters differ",
                "give it with --test-current (its manual says, or a second meter in series shows it; often 0.5 to "
                "1 mA), or write the current behind the reading: 0.62@1m",
            )
        return Reading(volts, test_current)
    if "/" in behind:
        supply, ohms = _feed(behind, where)
        return _sound(volts, (supply - volts) / ohms, where)
    return Reading(volts, parse_quantity(behind, "A", ">0", where))


def read_resistor_point(text: str, option: str = "--across-resistor") -> Reading:
    """A reading of the volts across the resistor in series: ``8.38@9/10k`` (supply and ohms). Raises InputError."""
    where = Where(f"{option} {text!r}")
    volts_text, at, behind = text.partition("@")
    dropped = parse_quantity(volts_text, "V", ">0", where)
    if not at or "/" not in behind:
        raise where.fault("the supply and the resistor are missing", "write VOLTS@SUPPLY/OHMS, as in 8.38@9/10k")
    supply, ohms = _feed(behind, where)
    return _sound(supply - dropped, dropped / ohms, where)


def _feed(text: str, where: Where) -> tuple[float, float]:
    supply, _, ohms = text.partition("/")
    return parse_quantity(supply, "V", ">0", where), parse_quantity(ohms, "ohm", ">0", where)


def _sound(volts: float, amperes: float, where: Where) -> Reading:
    if volts <= 0.0 or amperes <= 0.0:
        raise where.fault("the reading is not below the supply", "a diode and its resistor share the supply's volts")
    return Reading(volts, amperes)
