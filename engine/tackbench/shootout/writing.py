"""The second pass: the volts that were kept aside, brought to their gain and written as finished files."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from tackbench.audio import Take
from tackbench.audio.files import write_audio
from tackbench.audio.scratch import ScratchAudio

BLOCK_FRAMES = 8192


@dataclass(frozen=True)
class Written:
    """A finished file: its name, and how its samples go with the take's (-1 to 1, None where either is silent)."""

    name: str
    correlation: float | None


class _Together:
    """Sums over two streams, for their correlation coefficient without their means (Pearson's)."""

    def __init__(self) -> None:
        self._count = 0
        self._sums: NDArray[np.float64] = np.zeros(5)

    def add(self, one: NDArray[np.float64], other: NDArray[np.float64]) -> None:
        self._count += one.size
        self._sums += [one.sum(), other.sum(), (one * one).sum(), (other * other).sum(), (one * other).sum()]

    def coefficient(self) -> float | None:
        if not self._count:
            return None
        x, y, xx, yy, xy = self._sums / self._count
        spread = (xx - x * x) * (yy - y * y)
        return float((xy - x * y) / math.sqrt(spread)) if spread > 0 else None


def write_volts(
    path: Path,
    take: Take,
    scratch: ScratchAudio,
    rest: float,
    factor: float,
    subtype: str,
    advance: Callable[[float], None],
    overwrite: bool = False,
) -> Written:
    """Write (volts - ``rest``) x ``factor`` of everything in ``scratch``, and compare it with the take on the way.

    ``factor`` is full-scale samples per volt; ``rest`` the DC in volts to take off. ``advance`` is told the frames of
    each block and may raise to end the work. Errors as of ``write_audio``; no part of a file is left.
    """
    together = _Together()

    def blocks() -> Iterator[NDArray[np.float64]]:
        pairs = zip(scratch.blocks(BLOCK_FRAMES), take.blocks(BLOCK_FRAMES), strict=True)
        for volts, dry in pairs:
            moving = volts - rest
            together.add(dry, moving)
            yield moving * factor
            advance(len(volts))

    write_audio(path, blocks(), take.rate, take.channels, subtype, overwrite=overwrite)
    return Written(path.name, together.coefficient())


def write_bypass(path: Path, take: Take, gain: float, subtype: str, advance: Callable[[float], None]) -> Written:
    """Write the take's own samples times ``gain``."""

    def blocks() -> Iterator[NDArray[np.float64]]:
        for dry in take.blocks(BLOCK_FRAMES):
            yield dry * gain
            advance(len(dry))

    write_audio(path, blocks(), take.rate, take.channels, subtype)
    return Written(path.name, 1.0)
