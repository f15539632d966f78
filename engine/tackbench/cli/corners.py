"""What a frequency response says in a line: the gain at 1 kHz, the peak, the -3 dB corners."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

LOWEST, HIGHEST, POINTS = 1.0, 200e3, 1201
"""The span that corners are looked for in, in hertz, and how many points (more than 220 a decade)."""


@dataclass(frozen=True)
class Corners:
    """Gains in dB, frequencies in Hz; a corner is None where the gain stays within 3 dB to that end of the span."""

    gain_db_1khz: float
    peak_db: float
    peak_hz: float
    low_hz: float | None
    high_hz: float | None


def frequencies() -> NDArray[np.float64]:
    """The frequencies in Hz to ask a response at, evenly spaced in logarithm."""
    return np.geomspace(LOWEST, HIGHEST, POINTS)


def corners(hertz: NDArray[np.float64], response: NDArray[np.complex128]) -> Corners | None:
    """The corners 3.01 dB (half power) below the peak, interpolated; None when nothing comes through at all."""
    size = np.abs(response)
    if not np.any(size > 0):
        return None
    level = 20 * np.log10(np.maximum(size, 1e-300))
    peak = int(np.argmax(level))
    edge = level[peak] - 10 * math.log10(2)
    return Corners(
        gain_db_1khz=float(np.interp(math.log(1000.0), np.log(hertz), level)),
        peak_db=float(level[peak]),
        peak_hz=float(hertz[peak]),
        low_hz=_crossing(hertz[peak::-1], level[peak::-1], edge),
        high_hz=_crossing(hertz[peak:], level[peak:], edge),
    )


def _crossing(hertz: NDArray[np.float64], level: NDArray[np.float64], edge: float) -> float | None:
    """Where the level first falls below the edge, going along the arrays."""
    below = np.flatnonzero(level < edge)
    if below.size == 0:
        return None
    after = int(below[0])
    share = (level[after - 1] - edge) / (level[after - 1] - level[after])
    return float(hertz[after - 1] * (hertz[after] / hertz[after - 1]) ** share)
