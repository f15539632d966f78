"""Reading quantities: IEC 60062 letter code, plain SI with or without a unit, or a bare number in base units."""

from __future__ import annotations

import math
import re
from collections.abc import Callable, Mapping
from typing import Any

from tackbench.values.units import OHM, PREFIXES, UNITS, Unit
from tackbench.values.where import Where, shown

_PLAIN = re.compile(
    r"(?P<number>[+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+))(?:[eE](?P<exponent>[+-]?[0-9]+))?\s*(?P<suffix>.*)"
)
_CODE = re.compile(
    r"(?P<sign>[+-]?)(?P<whole>[0-9]*)(?P<mark>[^0-9\s.,+-])(?P<decimals>[0-9]+)\s*(?P<suffix>[^0-9]*)"
)
_LOOKALIKES = str.maketrans(
    {"\u00b5": "u", "\u03bc": "u", "\u2126": OHM, "\u00a0": " ", "\u202f": " ", "\u2009": " ", "\u2212": "-"}
)
_LONGEST = 64

RULES: Mapping[str, tuple[str, Callable[[float], bool]]] = {
    ">0": ("above zero", lambda x: x > 0),
    ">=0": ("zero or above", lambda x: x >= 0),
    "!=0": ("other than zero", lambda x: x != 0),
    "any": ("a finite number", lambda x: True),
}
"""What a quantity may be: words for the error, and the test."""


def parse_quantity(raw: Any, unit: str, rule: str = ">0", where: Where | None = None) -> float:
    """The value of ``raw`` (text or number) in the base unit ``unit`` (a key of ``UNITS``).

    Letter code after IEC 60062 (``4k7`` ``2R2`` ``0u1`` ``p47`` ``M47``), SI prefixes with or without the unit
    (``4.7k`` ``100 nF``), or a number. Raises InputError at ``where`` for text that cannot be read, a unit that
    does not fit, anything not finite, anything that breaks ``rule`` (a key of ``RULES``), and magnitudes beyond
    what the unit can sensibly have.
    """
    where = where or Where()
    kind = UNITS[unit]
    if isinstance(raw, str):
        value = _from_text(raw, kind, where)
    else:
        value = _from_number(raw, kind, where)
    return _judged(value, raw, kind, rule, where)


def _from_number(raw: Any, kind: Unit, where: Where) -> float:
    if isinstance(raw, bool) or not isinstance(raw, int | float):
        found = f"{shown(raw)} is not a value in {kind.name}" if kind.symbol else f"{shown(raw)} is not a number"
        raise where.fault(found, f"write text or a number, for example {kind.example}")
    try:
        return float(raw)
    except OverflowError:
        return math.inf


def _from_text(raw: str, kind: Unit, where: Where) -> float:
    text = raw.translate(_LOOKALIKES).strip()
    value = _read(text, kind) if len(text) <= _LONGEST else None
    if value is None:
        raise _unreadable(raw, text, kind, where)
    return value


def _read(text: str, kind: Unit) -> float | None:
    """The value of cleaned ``text``, or None when it says nothing in this unit."""
    code = _CODE.fullmatch(text)
    if code:
        exponent = _mark_exponent(code["mark"], code["suffix"].strip(), kind)
        if exponent is not None:
            return float(f"{code['sign']}{code['whole'] or '0'}.{code['decimals']}e{exponent}")
    plain = _PLAIN.fullmatch(text)
    if not plain:
        return None
    exponent = _suffix_exponent(plain["suffix"].strip(), kind)
    if exponent is None:
        return None
    return float(f"{plain['number']}e{exponent + int(plain['exponent'] or 0)}")


def _mark_exponent(mark: str, suffix: str, kind: Unit) -> int | None:
    """The power of ten of a letter code's letter, which stands where the decimal point would be."""
    if mark in kind.marks:
        return 0 if not suffix else None
    if mark == "f" or mark not in PREFIXES or mark in kind.refused:
        return None
    unit_exponent = _unit_exponent(suffix, kind)
    return None if suffix and unit_exponent is None else PREFIXES[mark] + (unit_exponent or 0)


def _suffix_exponent(suffix: str, kind: Unit) -> int | None:
    """The power of ten of what follows a number: nothing, a unit, a prefix, or a prefix and a unit."""
    if not suffix:
        return 0
    whole = _unit_exponent(suffix, kind)
    if whole is not None:
        return whole
    prefix, rest = suffix[0], suffix[1:].strip()
    if prefix not in PREFIXES or prefix in kind.refused:
        return None
    if not rest:
        return None if prefix == "f" else PREFIXES[prefix]  # a lone f is more often a slip for F
    unit_exponent = _unit_exponent(rest, kind)
    return None if unit_exponent is None else PREFIXES[prefix] + unit_exponent


def _unit_exponent(text: str, kind: Unit) -> int | None:
    if text in kind.spellings:
        return kind.spellings[text]
    return 0 if text.casefold() in kind.words else None


def _unreadable(raw: str, text: str, kind: Unit, where: Where) -> Exception:
    """The error for text that says nothing in this unit, with the likeliest cause named."""
    expected = f"expected {kind.name}, for example {kind.example}" if kind.symbol else f"for example {kind.example}"
    if "," in text and _read(text.replace(",", "."), kind) is not None:
        return where.fault(f"{shown(raw)} has a decimal comma", "write a point or a letter code")
    if text and len(text) <= _LONGEST:
        if kind.symbol == "F" and any(p in text for p in kind.refused) and _read(text, UNITS["H"]) is not None:
            return where.fault(f"{shown(raw)} would be an absurd capacitor: M is mega", "write u for micro, n or p")
        for other in UNITS.values():
            if (
                other is not kind
                and other.symbol
                and _read(text, other) is not None
                and _read(text, UNITS[""]) is None
            ):
                return where.fault(f"{shown(raw)} is in {other.name}, which does not fit here", expected)
        if (
            kind.symbol in ("F", "H", OHM)
            and text[-1] in "BCDFGJKMN"
            and _read(text[:-1], kind) is not None
            and text[-2:-1] not in ("", " ")
        ):
            return where.fault(
                f"{shown(raw)} looks like a value with a tolerance letter", "give the tolerance under its own key"
            )
    return where.fault(f"{shown(raw)} cannot be read as {kind.name}", expected)


def _judged(value: float, raw: Any, kind: Unit, rule: str, where: Where) -> float:
    what = kind.name if kind.symbol else "a number"
    if not math.isfinite(value):
        raise where.fault(f"{shown(raw)} is not a finite number", f"expected {what}, for example {kind.example}")
    words, allowed = RULES[rule]
    if not allowed(value):
        raise where.fault(f"{shown(raw)} is not allowed", f"expected {what} {words}, for example {kind.example}")
    if value != 0 and not kind.low <= abs(value) <= kind.high:
        raise where.fault(
            f"{shown(raw)} is beyond any real part", f"{what} from {kind.low:g} to {kind.high:g} can be computed with"
        )
    return value + 0.0  # minus zero becomes zero
