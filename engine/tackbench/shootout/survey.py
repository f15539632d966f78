"""What is measured of the take itself before anything is rendered: loudness, levels, a few pieces to time with."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tackbench.audio import Take
from tackbench.audio.levels import LevelMeter, Levels
from tackbench.audio.loudness import LoudnessMeter
from tackbench.shootout.matching import Sound

_PIECES = (1 / 6, 3 / 6, 5 / 6)
_PIECE_SECONDS = 0.1
_BLOCK_FRAMES = 1 << 15


@dataclass(frozen=True)
class Survey:
    """Levels in full scale, the loudness meter, and short pieces of the take (full scale) for a timed trial."""

    levels: Levels
    loudness: LoudnessMeter
    pieces: NDArray[np.float64]

    @property
    def sound(self) -> Sound:
        """The take as matching sees it."""
        return Sound(self.loudness.integrated, self.levels.true_peak)


def survey(take: Take) -> Survey:
    """Go once through the take, in constant memory."""
    levels, loudness = LevelMeter(take.rate, take.channels), LoudnessMeter(take.rate, take.channels)
    length = max(1, round(_PIECE_SECONDS * take.rate))
    starts = [int(share * max(0, take.frames - length)) for share in _PIECES]
    found: list[NDArray[np.float64]] = []
    at = 0
    for block in take.blocks(_BLOCK_FRAMES):
        levels.add(block)
        loudness.add(block)
        found += [block[max(0, start - at) : max(0, start + length - at)] for start in starts]
        at += len(block)
    return Survey(levels.result(), loudness, np.concatenate(found))
