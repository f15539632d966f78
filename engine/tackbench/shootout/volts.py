"""The first pass: the variants' output volts, kept aside and measured while they are made."""

from __future__ import annotations

import time
from collections.abc import Callable, Mapping, Sequence
from dataclasses import asdict, dataclass

import numpy as np
from numpy.typing import NDArray

from tackbench.audio import Take
from tackbench.audio.levels import LevelMeter, Levels
from tackbench.audio.loudness import LoudnessMeter
from tackbench.audio.scratch import ScratchAudio
from tackbench.errors import InputError, WorkError
from tackbench.network import response
from tackbench.render import GroupStream, PreparedStage, UnsolvedError, prepare
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


@dataclass(frozen=True)
class Prepared:
    """A variant ready for the first pass, its words, and the scratch file that its volts go to."""

    stage: PreparedStage
    polarity: str
    words: str
    scratch: ScratchAudio


def prepare_variant(take: Take, variant: Variant, words: str, quality: str, scratch: ScratchAudio) -> Prepared:
    """Make a variant ready. Errors are led by the variant's ``words``."""
    try:
        stage = prepare(variant.circuit, take.rate, quality)
        return Prepared(stage, polarity_of(response(variant.circuit, MID_FREQUENCIES)), words, scratch)
    except (InputError, WorkError) as trouble:
        raise type(trouble)(f"{words}: {trouble}") from trouble


def render_volts(take: Take, group: Sequence[Prepared], advance: Callable[[float], None]) -> list[Volts]:
    """Send the take through the variants of a group, side by side, and write each one's volts to its scratch file.

    ``advance`` is told the frames of each block that is done, times the variants, and may raise to end the work.
    Errors are led by the variant's words; the seconds of the work are shared out evenly.
    """
    began = time.thread_time()
    stages = [one.stage for one in group]
    stream = GroupStream(stages, take.channels)
    keepers = [_Keeper(take, one.stage, one.scratch) for one in group]
    try:
        for block in take.blocks(BLOCK_FRAMES):
            for keeper, volts in zip(keepers, stream.process(block * take.volts_per_full_scale), strict=True):
                keeper.keep(volts)
            advance(len(block) * len(group))
        for keeper, volts in zip(keepers, stream.finish(), strict=True):
            keeper.keep(volts)
    except UnsolvedError as trouble:
        raise WorkError(f"{group[trouble.stage].words}: {trouble}") from trouble
    seconds = (time.thread_time() - began) / len(group)
    return [
        Volts(
            rest=one.stage.output_dc,
            levels=keeper.levels.result(),
            loudness=keeper.loudness,
            counts=asdict(counts),
            warnings=tuple(one.stage.warnings),
            polarity=one.polarity,
            seconds=seconds,
        )
        for one, keeper, counts in zip(group, keepers, stream.counts, strict=True)
    ]


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


def polarity_of(gains: NDArray[np.complex128]) -> str:
    """The same way up as the take (+), upside down (inv) or neither clearly (?), by small-signal gains."""
    whole = float(np.sum(np.abs(gains)))
    share = float(np.sum(gains.real)) / whole if whole > 0 else 0.0
    if abs(share) < UNCLEAR_BELOW:
        return "?"
    return "+" if share > 0 else "inv"
