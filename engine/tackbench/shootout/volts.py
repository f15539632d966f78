"""The first pass: one variant's output volts, kept aside and measured while they are made."""

from __future__ import annotations

import time
from collections.abc import Callable, Mapping
from dataclasses import asdict, dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tackbench.audio import Take
from tackbench.audio.levels import LevelMeter, Levels
from tackbench.audio.loudness import LoudnessMeter
from tackbench.audio.scratch import ScratchAudio
from tackbench.errors import InputError, WorkError
from tackbench.network import response
from tackbench.render import PreparedStage, prepare
from tackbench.stage import Variant

BLOCK_FRAMES = 2048
"""Frames of the take that are worked on at a time: few enough that Ctrl-C and the progress bar are prompt."""


MID_FREQUENCIES = np.geomspace(200.0, 4000.0, 40)
"""Hertz at which the polarity is asked: where a guitar has its weight, away from the coupling capacitors' turn."""

UNCLEAR_BELOW = 0.1
"""An in-phase share of the response nearer to zero than this tells no polarity."""


@dataclass(frozen=True)
class Volts:
    """What the first pass found. ``rest`` is the output's DC with the take silent, in volts; ``levels`` are in volts;
    ``loudness`` measures the moving part on the take's own scale; ``counts`` are the solver's;
    ``polarity`` is "+", "inv" or "?"."""

    rest: float
    levels: Levels
    loudness: LoudnessMeter
    counts: Mapping[str, int]
    warnings: tuple[str, ...]
    polarity: str
    seconds: float


def render_volts(
    take: Take, variant: Variant, words: str, quality: str, scratch: ScratchAudio, advance: Callable[[float], None]
) -> Volts:
    """Send the take through the variant and write its volts to ``scratch``, as many frames as the take has.

    ``advance`` is told the frames of each block that is done, and may raise to end the work. Errors are led by the
    variant's ``words``.
    """
    began = time.thread_time()
    try:
        prepared = prepare(variant.circuit, take.rate, quality)
        keeper = _Keeper(take, prepared, scratch)
        counts = _through(take, prepared, keeper, advance)
        polarity = polarity_of(response(variant.circuit, MID_FREQUENCIES))
    except (InputError, WorkError) as trouble:
        raise type(trouble)(f"{words}: {trouble}") from trouble
    return Volts(
        rest=prepared.output_dc,
        levels=keeper.levels.result(),
        loudness=keeper.loudness,
        counts=counts,
        warnings=tuple(prepared.warnings),
        polarity=polarity,
        seconds=time.thread_time() - began,
    )


class _Keeper:
    """Takes finished volts: to the scratch file and past the meters."""

    def __init__(self, take: Take, prepared: PreparedStage, scratch: ScratchAudio) -> None:
        self._scratch, self._rest, self._full_scale = scratch, prepared.output_dc, take.volts_per_full_scale
        self.levels = LevelMeter(take.rate, take.channels, resting=prepared.output_dc)
        self.loudness = LoudnessMeter(take.rate, take.channels)

    def keep(self, volts: NDArray[np.float64]) -> None:
        self._scratch.append(volts)
        self.levels.add(volts)
        self.loudness.add((volts - self._rest) / self._full_scale)


def _through(
    take: Take, prepared: PreparedStage, keeper: _Keeper, advance: Callable[[float], None]
) -> dict[str, Any]:
    """Stream the take block by block; the solver's counts."""
    stream = prepared.stream(take.channels)
    for block in take.blocks(BLOCK_FRAMES):
        keeper.keep(stream.process(block * take.volts_per_full_scale))
        advance(len(block))
    keeper.keep(stream.finish())
    return asdict(stream.counts)


def polarity_of(gains: NDArray[np.complex128]) -> str:
    """The same way up as the take (+), upside down (inv) or neither clearly (?), by small-signal gains."""
    whole = float(np.sum(np.abs(gains)))
    share = float(np.sum(gains.real)) / whole if whole > 0 else 0.0
    if abs(share) < UNCLEAR_BELOW:
        return "?"
    return "+" if share > 0 else "inv"
