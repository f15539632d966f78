"""Least squares of Shockley's law with a series resistance, V = n Vt ln(1 + i/IS) + i RS, over points (V, i)."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tackbench.devices.physics import MODEL_TEMPERATURE, thermal_volts

FREE_BY_POINTS = {1: ("saturation_current",), 2: ("saturation_current", "ideality")}
ALL_FREE = ("saturation_current", "ideality", "series_ohms")
_GOLDEN = (np.sqrt(5.0) - 1.0) / 2.0


@dataclass(frozen=True)
class Fit:
    """One derived set: amperes, a bare number, ohms, and the root mean square of what is left, in millivolts."""

    saturation_current: float
    ideality: float
    series_ohms: float
    error_millivolts: float


def fit_points(
    volts: NDArray[np.float64],
    current: NDArray[np.float64],
    held: Mapping[str, Any],
    free: Sequence[str] | None = None,
    kelvin: float = MODEL_TEMPERATURE,
) -> Fit:
    """Least squares in volts over ``free``; the other parameters are taken from ``held``.

    By default one point frees the saturation current alone, two free the ideality as well, more free all three. For a
    given saturation current the voltage is linear in the other two, so the search is over one number, its logarithm.
    What comes out holds at ``kelvin``, the temperature of the points.
    """
    chosen = free or FREE_BY_POINTS.get(len(volts), ALL_FREE)
    thermal = thermal_volts(kelvin)

    def given(log_saturation: float) -> Fit:
        return _linear_part(volts, current, float(np.exp(log_saturation)), chosen, held, thermal)

    return given(_minimum(lambda x: given(x).error_millivolts, np.linspace(np.log(1e-32), np.log(1e-3), 671)))


def _linear_part(
    volts: NDArray[np.float64],
    current: NDArray[np.float64],
    saturation: float,
    free: Sequence[str],
    held: Mapping[str, Any],
    thermal: float,
) -> Fit:
    """The best ideality and series resistance (not below zero) for one saturation current."""
    slopes = {"ideality": thermal * np.log1p(current / saturation), "series_ohms": current}
    found = {key: float(held[key]) for key in slopes if key not in free}
    rest = volts - sum(found[key] * slopes[key] for key in found)
    solved = [key for key in slopes if key in free]
    if solved:
        best, *_ = np.linalg.lstsq(np.column_stack([slopes[key] for key in solved]), rest, rcond=None)
        found |= dict(zip(solved, best.tolist(), strict=True))
    if found["series_ohms"] < 0.0:
        without = [key for key in free if key != "series_ohms"]
        return _linear_part(volts, current, saturation, without, {**held, "series_ohms": 0.0}, thermal)
    rest = volts - sum(found[key] * slopes[key] for key in slopes)
    return Fit(saturation, found["ideality"], found["series_ohms"], float(1e3 * np.sqrt(np.mean(rest**2))))


def _minimum(error: Callable[[float], float], grid: NDArray[np.float64]) -> float:
    """The place of the least error: the best point of the grid, then golden section between its neighbours."""
    best = int(np.argmin([error(x) for x in grid]))
    low, high = float(grid[max(best - 1, 0)]), float(grid[min(best + 1, len(grid) - 1)])
    while high - low > 1e-9:
        left, right = high - _GOLDEN * (high - low), low + _GOLDEN * (high - low)
        if error(left) < error(right):
            high = right
        else:
            low = left
    return float((low + high) / 2.0)
