"""Field-effect transistors from a reading or two: a JFET's drain current and pinch-off, a MOSFET's threshold."""

from __future__ import annotations

import itertools
from collections.abc import Mapping
from dataclasses import dataclass, replace
from math import sqrt
from typing import Any

from tackbench.errors import InputError
from tackbench.parts import PartEntry
from tackbench.values import format_quantity
from tackbench.workbench.diode_meter import Span
from tackbench.workbench.readings import CURRENT_SHARE, volts_error


@dataclass(frozen=True)
class JfetTest:
    """Two readings on ``supply`` volts from drain to ground: the current ``drain_amperes`` with gate and source
    grounded, and ``source_volts`` across ``source_ohms`` between source and ground with the gate grounded. All taken
    without sign."""

    supply: float
    drain_amperes: float
    source_volts: float
    source_ohms: float


@dataclass(frozen=True)
class JfetModel:
    """Drain current with the gate at the source (A), pinch-off (V, without sign), and the transconductance with the
    gate at the source (A/V)."""

    drain_current: Span
    pinch_off: Span
    transconductance: Span


def jfet_from_readings(test: JfetTest, like: PartEntry) -> JfetModel:
    """The square law through both readings; ``like`` lends the channel modulation. Raises InputError."""
    modulation = like.parameters["channel_modulation"]
    tried = [_jfet(test, modulation)]
    for a, b, c in itertools.product((-1.0, 1.0), repeat=3):
        moved = replace(
            test,
            drain_amperes=test.drain_amperes * (1.0 + a * 0.5 * CURRENT_SHARE),
            source_volts=test.source_volts + b * volts_error(test.source_volts),
            source_ohms=test.source_ohms * (1.0 + c * 0.5 * CURRENT_SHARE),
        )
        try:
            tried.append(_jfet(moved, modulation))
        except InputError:
            continue
    currents, pinches = [one[0] for one in tried], [one[1] for one in tried]
    slopes = [2.0 * current / pinch for current, pinch in tried]
    return JfetModel(*(Span(min(x), x[0], max(x)) for x in (currents, pinches, slopes)))


def _jfet(test: JfetTest, modulation: float) -> tuple[float, float]:
    full = test.drain_amperes / (1.0 + modulation * test.supply)
    if test.source_volts >= test.supply:
        raise InputError(
            f"{format_quantity(test.source_volts, 'V')} at the source is not below the supply",
            expected="measure from the source to ground, with the gate grounded",
        )
    amperes = test.source_volts / test.source_ohms / (1.0 + modulation * (test.supply - test.source_volts))
    if amperes >= full:
        raise InputError(
            f"the source resistor's current, {format_quantity(amperes, 'A', 3)}, is not below the "
            f"{format_quantity(full, 'A', 3)} that flow without it",
            expected="the resistor between source and ground must lower the current; take a larger one",
        )
    return full, test.source_volts / (1.0 - sqrt(amperes / full))


def jfet_entry(model: JfetModel, test: JfetTest, like: PartEntry) -> dict[str, Any]:
    """The table of a part file for ``model``."""
    sign = -1.0 if like.polarity == "n" else 1.0

    def at(end: str) -> dict[str, Any]:
        return {
            "drain_current": float(f"{getattr(model.drain_current, end):.4g}"),
            "pinch_off_volts": sign * float(f"{getattr(model.pinch_off, end):.4g}"),
        }

    said = (
        f"{format_quantity(test.drain_amperes, 'A', 4)} with gate at source, {test.source_volts:g} V across "
        f"{test.source_ohms:g} ohm at the source, on {test.supply:g} V"
    )
    return _entry("jfet", like, said, at, ("channel_modulation", "gate_source_capacitance", "gate_drain_capacitance"))


@dataclass(frozen=True)
class MosfetTest:
    """``volts`` across a MOSFET whose gate is tied to its drain, at ``amperes``; without sign."""

    volts: float
    amperes: float


def mosfet_from_reading(test: MosfetTest, like: PartEntry) -> Span:
    """The threshold in volts, without sign: the reading less what the square law of ``like`` adds at its current."""
    transconductance = like.parameters["transconductance"]
    ends = []
    for share, current in itertools.product((0.5, 1.0, 2.0), (1.0 - CURRENT_SHARE, 1.0 + CURRENT_SHARE)):
        over = sqrt(2.0 * current * test.amperes / (share * transconductance))
        ends += [test.volts + sign * volts_error(test.volts) - over for sign in (-1.0, 1.0)]
    best = test.volts - sqrt(2.0 * test.amperes / transconductance)
    if best <= 0.0:
        raise InputError(
            f"{format_quantity(test.volts, 'V')} at {format_quantity(test.amperes, 'A', 3)} leaves no threshold",
            expected="tie the gate to the drain and measure from drain to source, at about 1 mA",
        )
    return Span(min(ends), best, max(ends))


def mosfet_entry(threshold: Span, test: MosfetTest, like: PartEntry) -> dict[str, Any]:
    """The table of a part file for a MOSFET of that threshold."""
    sign = 1.0 if like.polarity == "n" else -1.0

    def at(end: str) -> dict[str, Any]:
        return {"threshold_volts": sign * float(f"{getattr(threshold, end):.4g}")}

    said = f"{test.volts:g} V with gate at drain, at {format_quantity(test.amperes, 'A', 3).replace('µ', 'u')}"
    keys = ("transconductance", "channel_modulation", "gate_source_capacitance", "gate_drain_capacitance")
    return _entry("mosfet", like, said, at, keys)


def _entry(family: str, like: PartEntry, said: str, at: Any, lent: tuple[str, ...]) -> dict[str, Any]:
    memory = ", partly from memory" if like.from_memory else ""
    kept: Mapping[str, Any] = {key: like.parameters[key] for key in lent if key in like.parameters}
    return {
        "family": family,
        "polarity": like.polarity,
        "about": f"Own part, from meter readings; the rest as a {like.name}.",
        "source": f"own readings: {said}; the rest from {like.name}{memory}",
        "conditions": "25 degrees C",
        "basis": "own readings",
        "from_memory": like.from_memory,
        **at("best"),
        **kept,
        "low": {**at("low"), "about": "the low end of what the readings leave open"},
        "high": {**at("high"), "about": "the high end of what the readings leave open"},
    }
