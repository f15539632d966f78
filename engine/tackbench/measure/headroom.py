"""Headroom: how hot the take may be before the output is bent."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tackbench.circuit import Circuit
from tackbench.measure.sine import Sine, measure_sines

LOWEST_VOLTS, HIGHEST_VOLTS = 1e-3, 20.0
"""Peak volts of the take between which the limits are sought."""

_COARSE_POINTS = 24
_FINE_POINTS = 8
_ROUNDS = 2


@dataclass(frozen=True)
class Limit:
    """The take's peak volts and the output's volts peak to peak where a limit is reached; None when it is not."""

    take_volts: float | None
    output_vpp: float | None


@dataclass(frozen=True)
class Headroom:
    """At ``hertz``: where distortion (re fundamental) reaches 1 % and 10 %, where the gain has fallen by 1 dB from
    its small-signal value, and the largest output up to 20 V of take."""

    hertz: float
    one_percent: Limit
    ten_percent: Limit
    one_decibel: Limit
    largest_vpp: float
    small_gain_db: float


def measure_headroom(circuit: Circuit, hertz: float, quality: str = "standard") -> Headroom:
    """Find the limits by sines of rising level: first over the whole range, then twice between the two either side.

    Exact to about half a percent of level. Raises WorkError where the circuit cannot be solved.
    """
    levels = np.geomspace(LOWEST_VOLTS, HIGHEST_VOLTS, _COARSE_POINTS)
    sines = measure_sines(circuit, hertz, list(levels), quality)
    small = sines[0].gain_db

    def over(kind: str, sine: Sine) -> bool:
        if kind == "gain":
            return sine.gain_db < small - 1.0
        return sine.thd_of_fundamental > float(kind)

    def limit(kind: str) -> Limit:
        known = sines
        for _ in range(_ROUNDS + 1):
            crossing = next((k for k, sine in enumerate(known) if over(kind, sine)), None)
            if crossing is None:
                return Limit(None, None)
            if crossing == 0:
                return Limit(known[0].take_volts, known[0].vpp)
            low, high = known[crossing - 1], known[crossing]
            if high.take_volts / low.take_volts < 1.005:
                break
            between = np.geomspace(low.take_volts, high.take_volts, _FINE_POINTS + 2)
            known = measure_sines(circuit, hertz, list(between), quality)
        return _interpolated(kind, low, high, small)

    limits = {kind: limit(kind) for kind in ("0.01", "0.1", "gain")}
    largest = max(sine.vpp for sine in sines)
    return Headroom(sines[0].hertz, limits["0.01"], limits["0.1"], limits["gain"], largest, small)


def _interpolated(kind: str, low: Sine, high: Sine, small: float) -> Limit:
    """Between two neighbouring levels, straight in logarithms."""
    if kind == "gain":
        a, b, goal = low.gain_db, high.gain_db, small - 1.0
    else:
        a, b = (math.log(max(sine.thd_of_fundamental, 1e-12)) for sine in (low, high))
        goal = math.log(float(kind))
    share = 0.0 if a == b else min(1.0, max(0.0, (goal - a) / (b - a)))
    volts = low.take_volts * (high.take_volts / low.take_volts) ** share
    return Limit(float(volts), float(low.vpp + share * (high.vpp - low.vpp)))


def levels_between(lowest: float, highest: float, points: int) -> NDArray[np.float64]:
    """Levels in volts, evenly spaced in decibels."""
    return np.geomspace(lowest, highest, points)
