"""Reading what is a share of one: control positions and tolerances."""

from __future__ import annotations

import math
import re
from typing import Any

from tackbench.values.where import Where, shown

_POSITION = re.compile(r"(?P<number>[0-9]*\.?[0-9]+|[0-9]+\.)\s*(?:(?P<percent>%)|/\s*(?P<whole>[0-9]*\.?[0-9]+))?")
_PERCENT = re.compile(r"(?:±|\+/-|\+-)?\s*(?P<number>[0-9]*\.?[0-9]+|[0-9]+\.)\s*%")

TOLERANCE_LETTERS = {"B": 0.1, "C": 0.25, "D": 0.5, "F": 1.0, "G": 2.0, "J": 5.0, "K": 10.0, "M": 20.0, "N": 30.0}
"""IEC 60062 letters of symmetric tolerances, in percent (from memory)."""

WIDE_LETTERS = {"Q": 30.0, "T": 50.0, "S": 50.0, "Z": 80.0}
"""IEC 60062 letters of lopsided tolerances (-10/+30, -10/+50, -20/+50, -20/+80): the wider side, in percent."""

PICOFARAD_LETTERS = {"B": 0.1, "C": 0.25, "D": 0.5, "F": 1.0, "G": 2.0}
"""IEC 60062: below 10 pF these letters are picofarads (from memory)."""


def parse_position(raw: Any, where: Where | None = None) -> float:
    """A control position from 0 to 1: a number, ``0.7``, ``70%`` or ``7/10``. Raises InputError at ``where``."""
    where = where or Where()
    value = _position_value(raw)
    if value is None or not 0.0 <= value <= 1.0:
        problem = "cannot be read as a position" if value is None else "is outside 0 to 1"
        raise where.fault(f"{shown(raw)} {problem}", "write 0 to 1, a percentage such as 70%, or 7/10")
    return value + 0.0


def _position_value(raw: Any) -> float | None:
    if isinstance(raw, bool):
        return None
    if isinstance(raw, int | float):
        return float(raw) if math.isfinite(raw) and abs(raw) <= 1e6 else None
    found = _POSITION.fullmatch(raw.strip()) if isinstance(raw, str) and len(raw) <= 64 else None
    if not found:
        return None
    number = float(found["number"])
    if found["percent"]:
        return number / 100.0
    if found["whole"] is None:
        return number
    whole = float(found["whole"])
    return number / whole if whole > 0 else None


def parse_tolerance(raw: Any, where: Where | None = None, farads: float | None = None) -> float:
    """A tolerance as a fraction: ``10%``, ``±5 %``, a number (in percent) or an IEC 60062 letter such as ``K``.

    A lopsided letter gives its wider side. ``farads`` is a capacitor's value: below 10 pF the letters B to G
    are picofarads. Raises InputError at ``where``.
    """
    where = where or Where()
    percent = _tolerance_percent(raw, farads)
    if percent is None or not 0.0 <= percent < 100.0:
        raise where.fault(
            f"{shown(raw)} cannot be read as a tolerance", 'write a percentage such as "10%" or a letter such as "K"'
        )
    return percent / 100.0


def _tolerance_percent(raw: Any, farads: float | None) -> float | None:
    if isinstance(raw, bool):
        return None
    if isinstance(raw, int | float):
        return float(raw) if math.isfinite(raw) and abs(raw) <= 1e6 else None
    if not isinstance(raw, str) or len(raw) > 64:
        return None
    text = raw.strip()
    if farads is not None and farads < 10e-12 and text in PICOFARAD_LETTERS:
        return 100.0 * PICOFARAD_LETTERS[text] * 1e-12 / farads
    if text in TOLERANCE_LETTERS or text in WIDE_LETTERS:
        return TOLERANCE_LETTERS.get(text, WIDE_LETTERS.get(text))
    found = _PERCENT.fullmatch(text)
    return float(found["number"]) if found else None
