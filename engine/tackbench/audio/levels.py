"""Levels of a stream: extremes, mean, RMS, crest factor, true peak and how far the loudest sample stands out."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tackbench.audio.amplitudes import AmplitudeHistogram
from tackbench.audio.resample import Upsampler, true_peak_factor
from tackbench.compiled import njit_cached
from tackbench.errors import WorkError


@dataclass(frozen=True)
class Levels:
    """In the unit of the samples unless said; over all channels together.

    ``resting`` is the level that was given for the stream at rest. The true peak, the crest factor and
    the loudest sample's distance are those of the stream less what does not move.
    """

    frames: int
    minimum: float
    maximum: float
    mean: float
    """DC: the mean over time and channels."""
    rms: float
    """Root of the mean square, the DC in it."""
    ac_rms: float
    """The same after taking each channel's own mean off."""
    resting: float
    peak_from_rest: float
    """Largest distance of a sample from the resting level."""
    true_peak: float
    """Largest distance from the resting level between the samples too (ITU-R BS.1770-4, Annex 2)."""
    crest_db: float | None
    """``peak_from_rest`` over ``ac_rms`` in decibels; None for silence."""
    over_999_db: float | None
    """The loudest sample over the level that 99.9 % of the samples keep to, in decibels; None for silence."""

    @property
    def peak(self) -> float:
        """The largest magnitude of a sample, DC and all."""
        return max(abs(self.minimum), abs(self.maximum))

    @property
    def peak_to_peak(self) -> float:
        """Maximum less minimum."""
        return self.maximum - self.minimum


@njit_cached("void(float64[:,::1], float64[::1], float64[:,::1])")
def _sum_up(samples: Any, origins: Any, sums: Any) -> None:  # pragma: no cover - compiled
    """Add the samples of each channel and their squares, less its origin, one after the other; keep the extremes."""
    frames, channels = samples.shape
    for channel in range(channels):
        origin = origins[channel]
        total, squares, low, high = sums[channel, 0], sums[channel, 1], sums[channel, 2], sums[channel, 3]
        for n in range(frames):
            x = samples[n, channel]
            low = min(low, x)
            high = max(high, x)
            total += x - origin
            squares += (x - origin) * (x - origin)
        sums[channel, 0], sums[channel, 1], sums[channel, 2], sums[channel, 3] = total, squares, low, high


class LevelMeter:
    """Takes audio in block by block, in full scale or volts, and gives its levels; constant memory.

    ``resting`` is the level at rest (the operating point's DC of a stage's output): a true peak of a stream that
    begins with a step would read the ringing of that step. The stream counts as at rest before and after. Results do
    not depend on the block size.
    """

    def __init__(self, rate: int, channels: int, resting: float = 0.0) -> None:
        self._channels, self._resting = channels, resting
        self._frames = 0
        self._origins: NDArray[np.float64] = np.zeros(channels)
        self._sums: NDArray[np.float64] = np.tile([0.0, 0.0, math.inf, -math.inf], (channels, 1))
        self._histogram = AmplitudeHistogram()
        self._between = [Upsampler(true_peak_factor(rate)) for _ in range(channels)]
        self._true_peak = 0.0

    def add(self, block: NDArray[np.float64]) -> None:
        """Take in samples, shape (n, channels); WorkError when one is not finite."""
        samples = np.ascontiguousarray(block, dtype=np.float64)
        if samples.ndim != 2 or samples.shape[1] != self._channels:
            raise ValueError(f"blocks of shape (n, {self._channels}) are expected, not {samples.shape}")
        if len(samples) == 0:
            return
        if not np.isfinite(samples).all():
            raise WorkError("the level of samples that are not finite numbers cannot be measured")
        if self._frames == 0:
            self._origins = samples[0].copy()  # sums about a nearby value: a large DC costs no digits
        self._frames += len(samples)
        _sum_up(samples, self._origins, self._sums)
        moved = samples - self._resting
        self._histogram.add(np.abs(moved))
        for channel, upsampler in enumerate(self._between):
            self._true_peak = max(self._true_peak, float(np.max(np.abs(upsampler.push(moved[:, channel])))))

    def _peak_with_the_end(self) -> float:
        """The true peak with what the interpolation still holds back, the stream going on at rest."""
        peak = self._true_peak
        for upsampler in self._between:
            rest = upsampler.ending()
            peak = max(peak, float(np.max(np.abs(rest), initial=0.0)))
        return peak

    def result(self) -> Levels:
        """The levels of everything so far; ValueError when there was nothing."""
        if self._frames == 0:
            raise ValueError("no sample has been measured")
        means = self._sums[:, 0] / self._frames
        variances = np.maximum(0.0, self._sums[:, 1] / self._frames - means**2)
        channel_means = self._origins + means
        minimum, maximum = float(self._sums[:, 2].min()), float(self._sums[:, 3].max())
        peak = max(abs(minimum - self._resting), abs(maximum - self._resting))
        ac_rms = float(np.sqrt(variances.mean()))
        level = self._histogram.level()
        return Levels(
            frames=self._frames,
            minimum=minimum,
            maximum=maximum,
            mean=float(channel_means.mean()),
            rms=float(np.sqrt(np.mean(variances + channel_means**2))),
            ac_rms=ac_rms,
            resting=self._resting,
            peak_from_rest=peak,
            true_peak=max(peak, self._peak_with_the_end()),
            crest_db=20.0 * math.log10(peak / ac_rms) if peak > 0.0 and ac_rms > 0.0 else None,
            over_999_db=max(0.0, 20.0 * math.log10(peak / level)) if level > 0.0 else None,
        )


def measure_levels(samples: NDArray[np.float64], rate: int, resting: float = 0.0) -> Levels:
    """The levels of samples of shape (frames, channels) that are there as a whole."""
    meter = LevelMeter(rate, samples.shape[1], resting)
    meter.add(samples)
    return meter.result()
