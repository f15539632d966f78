"""One pass over a take when it is loaded: is every sample a number, how loud is it, was it clipped?"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from tackbench.audio.amplitudes import AmplitudeHistogram
from tackbench.errors import InputError

LONGEST_PEAK_DB = 6.0
"""A loudest sample this far over the 99.9 % level is pointed out: it may be a knock or a click, not the playing."""

_ABSURD = 1e6  # times full scale: no float file of a guitar is there
_CARRIED = 3  # rows of the previous block that a run of clipped samples is followed across


@dataclass(frozen=True)
class Scan:
    """What one pass found: frames, the loudest magnitude, the 99.9 % level, and the runs at full scale."""

    frames: int
    peak: float
    level_999: float
    clipped_runs: int
    first_clip: float | None
    """Seconds of the first run of at least three samples at full scale."""


class _ClipCounter:
    """Counts runs of three and more samples of one channel at full scale with one sign.

    An integer recording clips at its largest code. A float file may exceed full scale without being clipped, so there
    the samples of a run must also be equal: a flat top.
    """

    def __init__(self, channels: int, subtype: str) -> None:
        bits = {"PCM_S8": 8, "PCM_U8": 8, "PCM_16": 16, "PCM_24": 24, "PCM_32": 32}.get(subtype)
        self._flat = bits is None
        self._threshold = 1.0 - 2.0 ** -(15 if bits is None else bits - 1)
        self._before: NDArray[np.float64] = np.zeros((_CARRIED, channels))
        self.runs = 0
        self.first: int | None = None

    def add(self, block: NDArray[np.float64], start: int) -> None:
        rows = np.concatenate([self._before, block])
        self._before = rows[-_CARRIED:].copy()
        if max(block.max(), -block.min()) < self._threshold:
            return
        top = np.where(np.abs(rows) >= self._threshold, np.sign(rows), 0.0)
        linked = (top[1:] == top[:-1]) & (top[1:] != 0.0)
        if self._flat:
            linked &= rows[1:] == rows[:-1]
        begins = linked[2:] & linked[1:-1] & ~linked[:-2]  # row n is the third sample of a run
        self.runs += int(begins.sum())
        if self.first is None and begins.any():
            self.first = start + int(np.argmax(begins.any(axis=1))) - 2


def _check_numbers(block: NDArray[np.float64], start: int, rate: int, path: Path) -> None:
    with np.errstate(invalid="ignore"):
        bad = ~(np.abs(block) <= _ABSURD)
    if not bad.any():
        return
    row, channel = np.argwhere(bad)[0]
    value = block[row, channel]
    name = "not a number" if np.isnan(value) else "infinite" if np.isinf(value) else f"{value:.3g} times full scale"
    where = f"sample {start + row} of channel {channel + 1} (at {(start + row) / rate:.3f} s)"
    raise InputError(f"{where} is {name}", file=path, expected="every sample has to be a finite number near -1 to 1")


def scan_blocks(blocks: Iterable[NDArray[np.float64]], rate: int, channels: int, subtype: str, path: Path) -> Scan:
    """Go once through full-scale samples, shape (n, channels) a block; InputError at the first that is no number."""
    histogram, clips = AmplitudeHistogram(), _ClipCounter(channels, subtype)
    frames, peak = 0, 0.0
    for block in blocks:
        _check_numbers(block, frames, rate, path)
        magnitudes = np.abs(block)
        peak = max(peak, float(magnitudes.max()))
        histogram.add(magnitudes)
        clips.add(block, frames)
        frames += len(block)
    first = None if clips.first is None else clips.first / rate
    return Scan(frames, peak, histogram.level(), clips.runs, first)
