"""How much room and time a shootout will need, found out before it starts."""

from __future__ import annotations

import os
import time
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from tackbench.audio import Take
from tackbench.audio.files import audio_bytes
from tackbench.audio.place import size_words
from tackbench.audio.scratch import BYTES_PER_SAMPLE
from tackbench.render import MOST_LANES, prepare
from tackbench.shootout.survey import Survey
from tackbench.stage import Variant

SUBTYPE = "PCM_24"
"""The sample format of the finished files."""

SPARE = 1 << 20
"""Bytes for headers, the page and the data, and a little air."""


@dataclass(frozen=True)
class Estimate:
    """Number of audio files, bytes of the finished folder, bytes of temporary files, seconds of work (about)."""

    files: int
    final_bytes: int
    temporary_bytes: int
    seconds: float

    @property
    def words(self) -> str:
        """One sentence for people."""
        room = f"{size_words(self.final_bytes)}, and {size_words(self.temporary_bytes)} more while working"
        return f"{self.files} files, {room}; about {_duration(self.seconds)}"


def _duration(seconds: float) -> str:
    if seconds < 1.5:
        return "1 second"
    if seconds < 100:
        return f"{seconds:.0f} seconds"
    return f"{seconds / 60:.0f} minutes" if seconds < 5400 else f"{seconds / 3600:.1f} hours"


def estimate(take: Take, looked: Survey, variants: Sequence[Variant], quality: str, threads: int) -> Estimate:
    """Sizes by counting, seconds by sending a few tenths of a second of the take through the first variant."""
    per_file = audio_bytes(take.frames, take.channels, SUBTYPE)
    working = _seconds_per_frame(take, looked, variants[0], quality) * take.frames if variants else 0.0
    # lanes work side by side: a full block of them takes about as long as one circuit alone
    blocks_of_one = -(-take.channels // MOST_LANES)
    blocks = -(-len(variants) * take.channels // MOST_LANES)
    rounds = max(1.0, blocks / max(1, min(threads, os.cpu_count() or 1)))
    return Estimate(
        files=len(variants) + 1,
        final_bytes=(len(variants) + 1) * per_file + SPARE,
        temporary_bytes=len(variants) * take.frames * take.channels * BYTES_PER_SAMPLE,
        seconds=working / blocks_of_one * rounds,
    )


def _seconds_per_frame(take: Take, looked: Survey, variant: Variant, quality: str) -> float:
    """Seconds of work for one frame of the take, with everything that is made once already made."""
    stream = prepare(variant.circuit, take.rate, quality).stream(take.channels)
    stream.process(np.zeros((16, take.channels)))
    began = time.perf_counter()
    stream.process(looked.pieces * take.volts_per_full_scale)
    stream.finish()
    return (time.perf_counter() - began) / len(looked.pieces)
