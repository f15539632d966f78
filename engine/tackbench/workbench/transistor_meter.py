"""A bipolar transistor's gain and leakage from the usual two readings across its collector resistor.

The bench test (from memory): emitter to one pole of the supply, collector through a resistor to the other. With the
base open, the volts across the resistor show the leakage; with the base fed through a large resistor, they show
leakage and amplified current together. Their difference over the base current is the gain; taken without subtracting,
a leaky germanium transistor seems to have more gain than it has.
"""

from __future__ import annotations

import itertools
from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from math import exp, log, log1p
from typing import Any

from tackbench.devices.physics import leakage_current_at, saturation_current_at, thermal_volts
from tackbench.errors import InputError
from tackbench.parts import PartEntry
from tackbench.values import format_quantity
from tackbench.workbench.diode_meter import Span
from tackbench.workbench.readings import volts_error

LIKE = {
    ("germanium", "pnp"): "AC128",
    ("germanium", "npn"): "2N1308",
    ("silicon", "npn"): "2N3904",
    ("silicon", "pnp"): "2N3906",
}
"""The entry that lends what the readings cannot tell, by material and kind."""

RESISTOR_SHARE = 0.01
"""How far the two resistors may be off."""


@dataclass(frozen=True)
class BenchTest:
    """The test: ``supply`` volts, collector and base resistors in ohms, the volts across the collector resistor with
    the base open (``leakage_volts``) and fed (``total_volts``), at ``celsius``."""

    supply: float
    collector_ohms: float
    base_ohms: float
    leakage_volts: float
    total_volts: float
    celsius: float = 25.0


@dataclass(frozen=True)
class TransistorModel:
    """Forward gain, leakage current at 25 degrees C in amperes, and the gain that it seems to have when the leakage
    is not subtracted."""

    gain: Span
    leakage: Span
    apparent_gain: float


def transistor_from_readings(test: BenchTest, like: PartEntry) -> TransistorModel:
    """The gain and leakage that make the model of ``like`` give these readings. Raises InputError."""
    _check(test)
    gain, leakage, apparent = _solved(test, like.parameters)
    ends = []
    for a, b, c, d in itertools.product((-1.0, 1.0), repeat=4):
        moved = replace(
            test,
            leakage_volts=max(test.leakage_volts + a * volts_error(test.leakage_volts), 0.0),
            total_volts=test.total_volts + b * volts_error(test.total_volts),
            collector_ohms=test.collector_ohms * (1.0 + c * RESISTOR_SHARE),
            base_ohms=test.base_ohms * (1.0 + d * RESISTOR_SHARE),
        )
        if moved.leakage_volts < moved.total_volts < moved.supply:
            ends.append(_solved(moved, like.parameters))
    gains, leakages = [gain, *(end[0] for end in ends)], [leakage, *(end[1] for end in ends)]
    return TransistorModel(Span(min(gains), gain, max(gains)), Span(min(leakages), leakage, max(leakages)), apparent)


def _check(test: BenchTest) -> None:
    if not 0.0 <= test.leakage_volts < test.total_volts:
        raise InputError(
            f"{format_quantity(test.total_volts, 'V')} with the base fed is not above "
            f"{format_quantity(test.leakage_volts, 'V')} with the base open",
            expected="the first reading is taken with the base open, the second with it fed; check the pins",
        )
    if test.total_volts > test.supply - 0.5:
        raise InputError(
            f"{format_quantity(test.total_volts, 'V')} across the collector resistor leaves the transistor none of "
            f"the {format_quantity(test.supply, 'V')}: it is saturated, and the reading says nothing about its gain",
            expected="take a larger base resistor or a smaller collector resistor",
        )


def _solved(test: BenchTest, parameters: Mapping[str, Any]) -> tuple[float, float, float]:
    """(gain, leakage at 25 degrees C, gain without subtracting) by the transport law with its Early factor."""
    kelvin = test.celsius + 273.15
    thermal = thermal_volts(kelvin)
    saturation = saturation_current_at(
        parameters["saturation_current"],
        1.0,
        parameters["band_gap"],
        parameters["temperature_exponent"],
        kelvin,
    )
    per_early = 1.0 / parameters["early_volts"] if "early_volts" in parameters else 0.0

    def early(base_emitter: float, collector_volts: float) -> float:
        return 1.0 + (collector_volts - base_emitter) * per_early

    idle, total = test.leakage_volts / test.collector_ohms, test.total_volts / test.collector_ohms
    above_idle, above_total = test.supply - test.leakage_volts, test.supply - test.total_volts

    def leak_of(gain: float) -> float:
        """The collector's leakage with the base open: all of it passes the emitter and is amplified."""
        leak = idle / (1.0 + gain)
        for _ in range(20):
            share = early(thermal * log1p(gain * leak / saturation), above_idle)
            leak = max(idle - share * saturation, 0.0) / (1.0 + gain * share)
        return leak

    def excess(gain: float) -> float:
        """Collector current of the model with the base fed, less the reading's."""
        leak, base = leak_of(gain), 0.0
        base_emitter = thermal * log1p(total / saturation)
        for _ in range(20):
            base = (test.supply - base_emitter) / test.base_ohms
            base_emitter = thermal * log1p(gain * (base + leak) / saturation)
        return leak + early(base_emitter, above_total) * (gain * (base + leak) + saturation) - total

    gain = _root(excess)
    backward = saturation / parameters["reverse_gain"]  # the junction's own part of what flows in reverse
    leakage = max(leak_of(gain) - backward, 0.0) / leakage_current_at(1.0, kelvin)
    base = (test.supply - thermal * log1p(total / saturation)) / test.base_ohms
    return gain, leakage, total / base


def _root(function: Callable[[float], float]) -> float:
    """The gain at which a function that rises with it is zero. Raises InputError when no transistor has it."""
    low, high = 0.5, 1e5
    if function(low) > 0.0 or function(high) < 0.0:
        raise InputError(
            "no transistor's gain gives these readings",
            expected="check the supply, the two resistors and which reading is which",
        )
    while high / low > 1.0 + 1e-12:
        middle = exp(0.5 * (log(low) + log(high)))
        low, high = (middle, high) if function(middle) < 0.0 else (low, middle)
    return low


def transistor_entry(model: TransistorModel, test: BenchTest, like: PartEntry) -> dict[str, Any]:
    """The table of a part file for ``model``."""
    lent = {
        key: value
        for key, value in like.parameters.items()
        if key not in ("forward_gain", "leakage_current") and not key.startswith("max_")
    }
    memory = ", partly from memory" if like.from_memory else ""

    def at(end: str) -> dict[str, Any]:
        gain, leakage = getattr(model.gain, end), getattr(model.leakage, end)
        return {"forward_gain": float(f"{gain:.4g}"), "leakage_current": float(f"{leakage:.4g}")}

    return {
        "family": "bipolar",
        "polarity": like.polarity,
        "about": "Own part, from the two-reading bench test.",
        "source": (
            f"own readings at {test.celsius:g} degrees C: {test.leakage_volts:g} V with the base open and "
            f"{test.total_volts:g} V with the base fed through {test.base_ohms:g} ohm, across "
            f"{test.collector_ohms:g} ohm on {test.supply:g} V; the rest from {like.name}{memory}"
        ),
        "conditions": "25 degrees C",
        "basis": "own readings",
        "from_memory": like.from_memory,
        **at("best"),
        **lent,
        "low": {**at("low"), "about": "the low end of what the meter's errors leave open"},
        "high": {**at("high"), "about": "the high end of what the meter's errors leave open"},
    }
