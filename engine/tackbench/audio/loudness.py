"""Integrated loudness after ITU-R BS.1770-4, streaming, for any sample rate.

The K-weighting is given there as a table for 48 kHz only. Here the table is turned back into the two analogue filters
behind it and these into filters for the rate at hand, each matched at its own corner frequency; at 48 kHz the table
comes out again to within rounding (1e-12).
"""

from __future__ import annotations

import math
from array import array
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tackbench.compiled import njit_cached
from tackbench.errors import WorkError

TABLE_RATE = 48000
TABLE: tuple[tuple[float, float, float, float, float], ...] = (
    (1.53512485958697, -2.69169618940638, 1.19839281085285, -1.69065929318241, 0.73248077421585),
    (1.0, -2.0, 1.0, -1.99004745483398, 0.99007225036621),
)
"""b0, b1, b2, a1, a2 at 48 kHz of the shelf and of the high pass (ITU-R BS.1770-4, Annex 1, tables 1 and 2)."""

SURROUND_WEIGHTS = (1.0, 1.0, 1.0, 1.41, 1.41)
"""Weights of BS.1770 for left, right, centre and the two surrounds; never used unless asked for."""

_OFFSET = -0.691
_ABSOLUTE_GATE, _RELATIVE_GATE = -70.0, -10.0  # LKFS; LU under the mean of what passes the first
_HOPS_PER_BLOCK, _HOPS_PER_SECOND = 4, 10  # blocks of 400 ms that overlap by 75 %


def _analogue(row: Sequence[float]) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Numerator and denominator (rising powers) in s, undoing z = (1 + s)/(1 - s) of the bilinear transform."""
    b0, b1, b2, a1, a2 = row
    ascending = [np.array([p + q + r, 2 * (p - r), p - q + r]) for p, q, r in ((b0, b1, b2), (1.0, a1, a2))]
    return ascending[0], ascending[1]


def _digital(powers: NDArray[np.float64]) -> NDArray[np.float64]:
    """The polynomial in 1/z of one in s with rising powers."""
    c0, c1, c2 = powers
    return np.array([c0 + c1 + c2, 2 * (c0 - c2), c0 - c1 + c2])


def k_weighting(rate: float) -> NDArray[np.float64]:
    """Rows (b0, b1, b2, a1, a2) of the shelf and the high pass at ``rate`` hertz, shape (2, 5)."""
    rows = []
    for row in TABLE:
        numerator, denominator = _analogue(row)
        corner = math.sqrt(denominator[0] / denominator[2])  # tan(pi f0 / 48000)
        at_rate = math.tan(math.atan(corner) * TABLE_RATE / rate)
        stretch = (corner / at_rate) ** np.arange(3)
        b, a = _digital(numerator * stretch), _digital(denominator * stretch)
        rows.append(np.concatenate([b, a[1:]]) / a[0])
    return np.array(rows)


@njit_cached("void(float64[:,::1], float64[:,::1], float64[:,::1], float64[::1])")
def _add_energies(samples: Any, filters: Any, states: Any, energies: Any) -> None:  # pragma: no cover - compiled
    """Weigh each channel by both filters (transposed direct form II) and add its squares, one after the other."""
    frames, channels = samples.shape
    c0, c1, c2, c3, c4 = filters[0, 0], filters[0, 1], filters[0, 2], filters[0, 3], filters[0, 4]
    d0, d1, d2, d3, d4 = filters[1, 0], filters[1, 1], filters[1, 2], filters[1, 3], filters[1, 4]
    for channel in range(channels):
        p, q, r, s = states[channel, 0], states[channel, 1], states[channel, 2], states[channel, 3]
        energy = energies[channel]
        for n in range(frames):
            x = samples[n, channel]
            y = c0 * x + p
            p = c1 * x - c3 * y + q
            q = c2 * x - c4 * y
            z = d0 * y + r
            r = d1 * y - d3 * z + s
            s = d2 * y - d4 * z
            energy += z * z
        states[channel, 0], states[channel, 1], states[channel, 2], states[channel, 3] = p, q, r, s
        energies[channel] = energy


@dataclass(frozen=True)
class Loudness:
    """``lufs`` is None for silence; ``method`` says in words how the number was got."""

    lufs: float | None
    method: str


class LoudnessMeter:
    """Takes audio in block by block and gives its integrated loudness at any time.

    Every channel has the weight 1, however many there are: a take of several channels is a set of strings or
    pickups, not a surround mix. ``weights`` sets others (BS.1770 gives 1.41 to the surround channels). Only whole
    400 ms blocks are counted. What it keeps grows by ten numbers a second; the result does not depend on the block
    size. The unit of the samples may be full scale or volts: then only differences mean anything, and the absolute
    gate of -70 LKFS lies 70 LU under 1 V.
    """

    def __init__(self, rate: int, channels: int, weights: Sequence[float] | None = None) -> None:
        self._rate, self._channels = rate, channels
        self._weights = np.ones(channels) if weights is None else np.array(weights, dtype=np.float64)
        if self._weights.shape != (channels,):
            raise ValueError(f"{channels} weights are expected, not {len(self._weights)}")
        self._filters = k_weighting(rate)
        self._states: NDArray[np.float64] = np.zeros((channels, 4))
        self._energies: NDArray[np.float64] = np.zeros(channels)
        self._hops = array("d")  # summed squares of each finished tenth of a second
        self._frames = 0

    def _hop_end(self) -> int:
        """Frame at which the present tenth of a second ends; at odd rates these differ by one frame."""
        return (len(self._hops) + 1) * self._rate // _HOPS_PER_SECOND

    def add(self, block: NDArray[np.float64]) -> None:
        """Take in samples, shape (n, channels); WorkError when one is not finite."""
        samples = np.ascontiguousarray(block, dtype=np.float64)
        if samples.ndim != 2 or samples.shape[1] != self._channels:
            raise ValueError(f"blocks of shape (n, {self._channels}) are expected, not {samples.shape}")
        if not np.isfinite(samples).all():
            raise WorkError("the loudness of samples that are not finite numbers cannot be measured")
        start = 0
        while start < len(samples):
            stop = min(len(samples), start + self._hop_end() - self._frames)
            _add_energies(samples[start:stop], self._filters, self._states, self._energies)
            self._frames += stop - start
            start = stop
            if self._frames == self._hop_end():
                self._finish_hop()

    def _finish_hop(self) -> None:
        self._hops.append(float(self._weights @ self._energies))
        self._energies[:] = 0.0
        self._states[np.abs(self._states) < 1e-30] = 0.0  # a tail must not slow the filter down with denormals

    def integrated(self, gain: float = 1.0) -> Loudness:
        """The loudness of everything so far, as it would be after multiplying the samples by ``gain``.

        Under 0.4 s, or when nothing reaches the absolute gate, the ungated K-weighted energy is given instead and
        ``method`` says so. Silence has none.
        """
        total = (math.fsum(self._hops) + float(self._weights @ self._energies)) * gain * gain
        if total <= 0.0:
            return Loudness(None, "silence has no loudness")
        blocks = self._block_powers() * (gain * gain)
        if len(blocks) == 0:
            return self._ungated(total, "shorter than one block of 0.4 s")
        passed = blocks[blocks > _power(_ABSOLUTE_GATE)]
        if len(passed) == 0:
            return self._ungated(total, "nothing reaches the gate of -70 LKFS")
        passed = passed[passed > np.mean(passed) * 10.0 ** (_RELATIVE_GATE / 10.0)]
        return Loudness(_level(float(np.mean(passed))), "BS.1770 integrated")

    def _ungated(self, total: float, why: str) -> Loudness:
        return Loudness(_level(total / self._frames), f"ungated K-weighted energy: {why}")

    def _block_powers(self) -> NDArray[np.float64]:
        """Mean squares of every whole block of 400 ms, one beginning each 100 ms."""
        hops = np.array(self._hops)
        if len(hops) < _HOPS_PER_BLOCK:
            return np.zeros(0)
        ends = np.arange(len(hops) + 1) * self._rate // _HOPS_PER_SECOND
        lengths = ends[_HOPS_PER_BLOCK:] - ends[:-_HOPS_PER_BLOCK]
        sums = hops[:-3] + hops[1:-2] + hops[2:-1] + hops[3:]
        powers: NDArray[np.float64] = sums / lengths
        return powers


def _level(power: float) -> float:
    return _OFFSET + 10.0 * math.log10(power)


def _power(level: float) -> float:
    return 10.0 ** ((level - _OFFSET) / 10.0)


def measure_loudness(samples: NDArray[np.float64], rate: int, weights: Sequence[float] | None = None) -> Loudness:
    """The integrated loudness of samples of shape (frames, channels) that are there as a whole."""
    meter = LoudnessMeter(rate, samples.shape[1], weights)
    meter.add(samples)
    return meter.integrated()
