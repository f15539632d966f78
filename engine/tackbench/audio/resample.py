"""Streaming resamplers by whole factors whose samples do not depend on how the stream is cut into blocks.

All filters are windowed sincs (Kaiser window; J. F. Kaiser, "Nonrecursive digital filter design using the I0-sinh
window function", 1974, whose length formula is used from memory) and reach from a pass band of 0.45 to a stop band of
0.55 times the take's rate. A linear-algebra library would sum in an order that depends on the block; here each output
sample is summed in one fixed order by a small compiled loop.
"""

from __future__ import annotations

from functools import cache
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tackbench.compiled import njit_cached
from tackbench.errors import InputError

Samples = NDArray[np.float64]

LOWEST_RATE, HIGHEST_RATE = 8000, 384000
"""The sample rates of takes, in hertz."""

BASE_RATE = 384000
"""About the rate, in hertz, to which every take is brought before the circuit sees it."""

_STOP_DB = 150.0  # asked of each filter, so that images of several phases together stay under -135 dB
_TRANSITION = 0.1  # of the take's rate: from 0.45 to 0.55


def check_rate(rate: float, file: object = None) -> int:
    """The sample rate in hertz as an integer; InputError outside 8 to 384 kHz or when it is not whole."""
    if not LOWEST_RATE <= rate <= HIGHEST_RATE or rate != int(rate):
        raise InputError(
            f"the sample rate is {rate:g} Hz", file=file, expected="rates from 8000 to 384000 Hz can be worked with"
        )
    return int(rate)


def base_factor(rate: float) -> int:
    """The whole factor, at least 1, that brings a take of ``rate`` hertz nearest to 384 kHz."""
    return max(1, round(BASE_RATE / check_rate(rate)))


def true_peak_factor(rate: float) -> int:
    """The oversampling that a true-peak reading needs: 4 up to 96 kHz, then less (ITU-R BS.1770-4, Annex 2)."""
    return 4 if rate < 96000 else 2 if rate < 192000 else 1


@njit_cached("void(float64[::1], float64[::1], float64[::1])")
def _convolve_add(samples: Any, taps: Any, out: Any) -> None:  # pragma: no cover - compiled
    """Add to ``out[n]`` the sum over j, in rising order, of ``taps[j] * samples[n + j]``.

    The inner loop runs over output samples, not over taps: the processor works on several outputs at a time and yet
    each is summed in the same order, whatever the block. ``out`` is worked through in pieces that stay in the cache.
    """
    piece = 1024
    in_fours = len(taps) // 4 * 4
    for start in range(0, len(out), piece):
        target = out[start : start + piece]
        count = len(target)
        for j in range(0, in_fours, 4):
            t0, t1, t2, t3 = taps[j], taps[j + 1], taps[j + 2], taps[j + 3]
            s0 = samples[start + j : start + j + count]
            s1 = samples[start + j + 1 : start + j + 1 + count]
            s2 = samples[start + j + 2 : start + j + 2 + count]
            s3 = samples[start + j + 3 : start + j + 3 + count]
            for n in range(count):
                target[n] = (((target[n] + t0 * s0[n]) + t1 * s1[n]) + t2 * s2[n]) + t3 * s3[n]
        for j in range(in_fours, len(taps)):
            t = taps[j]
            s = samples[start + j : start + j + count]
            for n in range(count):
                target[n] += t * s[n]


def _half_length(transition: float) -> int:
    """Half the length, in periods of the lower rate, of a filter whose transition is that part of the lower rate."""
    return int(np.ceil((_STOP_DB - 7.95) / (2.285 * 2 * np.pi * transition) / 2))


def _windowed_sinc(times: Samples, half: int) -> Samples:
    """The interpolation kernel at ``times`` (periods of the lower rate); zero from ``half`` outwards."""
    beta = 0.1102 * (_STOP_DB - 8.7)
    inside = np.maximum(0.0, 1.0 - (times / half) ** 2)
    window = np.i0(beta * np.sqrt(inside)) / np.i0(beta)
    return np.where(np.abs(times) < half, np.sinc(times) * window, 0.0)


@cache
def _upsampling_phases(factor: int) -> tuple[int, tuple[Samples, ...]]:
    """Half length and the taps of phases 1 to factor-1, each summing to 1 so that a constant stays constant."""
    half = _half_length(_TRANSITION)
    phases = []
    for phase in range(1, factor):
        taps = _windowed_sinc(np.arange(2.0 * half) - (half - 1 + phase / factor), half)
        phases.append(np.ascontiguousarray(taps / taps.sum()))
    return half, tuple(phases)


_FROM_MEANS = np.array([3.0 / 640.0, -29.0 / 480.0, 1.0 + 107.0 / 960.0, -29.0 / 480.0, 3.0 / 640.0])
"""From means over cells to values at their centres, to the fifth power of frequency: 1 - d²/24 + 3 d⁴/640, d² the
second central difference (the inverse of the mean's own series)."""


@cache
def _downsampling_taps(factor: int, transition: float, means: bool) -> tuple[int, Samples]:
    """Half length in output samples, and the taps, summing to 1, on a grid ``factor`` times as dense: of values at
    the grid's points, or of ``means`` over its cells, whose centres lie half a cell later."""
    half = _half_length(transition)
    if not means:
        taps = _windowed_sinc(np.arange(-half * factor, half * factor + 1.0) / factor, half)
        return half, taps / taps.sum()
    inner = _windowed_sinc((np.arange(-half * factor, half * factor) + 0.5) / factor, half)
    taps = np.zeros(2 * (half + 1) * factor)
    corrected = np.convolve(inner / inner.sum(), _FROM_MEANS)
    taps[factor - 2 : factor - 2 + len(corrected)] = corrected
    return half + 1, taps


def _as_stream(samples: Any) -> Samples:
    stream = np.ascontiguousarray(samples, dtype=np.float64)
    if stream.ndim != 1:
        raise ValueError(f"one channel is expected as a one-dimensional array, not of shape {stream.shape}")
    return stream


class Upsampler:
    """Band-limited interpolation of one channel by a whole factor, block by block.

    Output sample k of the whole stream is the take at the time ``k / factor - half``, in take samples; before its
    first sample the take is zero. Push ``half`` zeros after the last sample to get its surroundings out. The take's
    own samples pass bit for bit (every factor-th output). ``half`` is 0 for factor 1.
    """

    def __init__(self, factor: int) -> None:
        if factor < 1:
            raise ValueError(f"the factor must be at least 1, not {factor}")
        self.factor = factor
        self.half, self._phases = _upsampling_phases(factor) if factor > 1 else (0, ())
        self._past: Samples = np.zeros(max(0, 2 * self.half - 1))

    def push(self, samples: Samples) -> Samples:
        """Take in n samples, shape (n,), and return the next n·factor, shape (n·factor,)."""
        fresh = _as_stream(samples)
        if self.factor == 1:
            return fresh.copy()
        stream = np.concatenate([self._past, fresh])
        count = len(fresh)
        out = np.empty((count, self.factor))
        out[:, 0] = stream[self.half - 1 : self.half - 1 + count]
        phase_out = np.empty(count)
        for phase, taps in enumerate(self._phases, start=1):
            phase_out[:] = 0.0
            _convolve_add(stream, taps, phase_out)
            out[:, phase] = phase_out
        self._past = stream[count:]
        return out.reshape(-1)

    def ending(self) -> Samples:
        """What pushing ``2 * half`` zeros would return, while the stream itself stays where it is."""
        kept = self._past
        tail = self.push(np.zeros(2 * self.half))
        self._past = kept
        return tail


class _Decimator:
    """One filter and one whole decimation; output m is the input around ``m - delay`` output samples."""

    def __init__(self, factor: int, transition: float, delay: int | None = None, means: bool = False) -> None:
        half, taps = _downsampling_taps(factor, transition, means)
        self.factor = factor
        self.delay = half if delay is None else delay
        self._branches = [np.ascontiguousarray(taps[phase::factor]) for phase in range(factor)]
        self._past: Samples = np.zeros((half + self.delay) * factor)

    def push(self, samples: Samples) -> Samples:
        stream = np.concatenate([self._past, samples])
        count = len(samples) // self.factor
        out = np.zeros(count)
        for phase, taps in enumerate(self._branches):
            branch = np.ascontiguousarray(stream[phase :: self.factor])
            _convolve_add(branch, taps, out)
        self._past = stream[count * self.factor :]
        return out


class Downsampler:
    """Filtering and decimation of one channel, block by block, by ``factor * dense`` to the take's rate.

    Sample i of the input stream stands at the time ``i / (factor * dense)`` in output samples, or with ``means`` is
    the mean from there to sample i + 1; output sample m of the whole stream is the filtered input at the time
    ``m - half``. The work is done in two stages: from ``dense`` times
    the base rate to the base rate (a short filter, for the images are far away) and from there by ``factor``.
    Factor 1 with dense 1 is the identity with ``half`` 0.
    """

    def __init__(self, factor: int, dense: int = 8, means: bool = False) -> None:
        if factor < 1 or dense < (2 if means else 1):
            raise ValueError(f"the factors must be at least 1, 2 for means, not {factor} and {dense}")
        self.factor, self.dense = factor, dense
        self._stages: list[_Decimator] = []
        if factor == 1:
            self._stages = [_Decimator(dense, _TRANSITION, means=means)] if dense > 1 else []
            self.half = sum(stage.delay for stage in self._stages)
            return
        last = _Decimator(factor, _TRANSITION)
        self.half = last.delay
        if dense > 1:
            # what folds onto the last filter's stop band is removed there, so this one may be wide: 1 - 1/factor;
            # its delay is made a whole number of output samples
            transition = 1.0 - 1.0 / factor
            more = -(-_downsampling_taps(dense, transition, means)[0] // factor)
            self._stages = [_Decimator(dense, transition, delay=more * factor, means=means)]
            self.half += more
        self._stages.append(last)

    def push(self, samples: Samples) -> Samples:
        """Take in n·factor·dense samples and return n, shape (n,); ValueError for another length."""
        stream = _as_stream(samples)
        if len(stream) % (self.factor * self.dense):
            raise ValueError(f"a multiple of {self.factor * self.dense} samples is expected, not {len(stream)}")
        if not self._stages:
            return stream.copy()
        for stage in self._stages:
            stream = stage.push(stream)
        return stream
