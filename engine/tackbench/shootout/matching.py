"""Equal loudness: the one gain of each file that brings it to the take's loudness, and all down under the ceiling."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass

from tackbench.audio.loudness import Loudness

CEILING_DB = -1.0
"""No file's true peak goes above this many decibels of full scale."""

SILENT_BELOW_DB = -120.0
"""An output this far under the take is rounding error, not sound; it is not brought up to the take's loudness."""

HALF_A_CODE = 2.0**-25
"""Full scale: a file whose true peak stays under half a code of 24 bits would hold nothing but dither."""

_ROUNDS = 12
_CLOSE_DB = 1e-4


@dataclass(frozen=True)
class Sound:
    """What matching must know of one file, on the take's own scale where 1.0 is a full-scale sample of the take.

    ``loudness`` gives the integrated loudness after a gain: the gate of -70 LKFS makes that more than a sum.
    """

    loudness: Callable[[float], Loudness]
    true_peak: float


@dataclass(frozen=True)
class Matching:
    """The gains (factors on the take's own scale) in the order of the sounds, and the bypass's own gain.

    ``silent`` marks the sounds that were left as they are; ``target_lufs`` is the common loudness (None: silence),
    ``lowered_db`` (0 or less) is how far the ceiling took everything down.
    """

    bypass_gain: float
    gains: tuple[float, ...]
    silent: tuple[bool, ...]
    target_lufs: float | None
    lowered_db: float
    method: str

    @property
    def words(self) -> str:
        """One sentence for people."""
        if self.target_lufs is None:
            return "the take is silent, so nothing was matched"
        matched = f"all files at {self.target_lufs:.1f} LUFS ({self.method})"
        if self.lowered_db > -0.05:
            return matched
        return (
            f"{matched}: {-self.lowered_db:.1f} dB under the take, so that no file's true peak goes above "
            f"{CEILING_DB:g} dB"
        )


def match(take: Sound, files: Sequence[Sound], with_bypass: bool = True) -> Matching:
    """Bring every file to the take's loudness; where a true peak would pass the ceiling, all come down together.

    ``with_bypass`` says whether the take itself is one of the files that the ceiling holds for.
    """
    silent = tuple(_is_silent(sound, take) for sound in files)
    down, loudest = 1.0, 0.0
    gains: tuple[float, ...] = ()
    for _ in range(_ROUNDS):
        gains = _gains(take, files, silent, down)
        peaks = [sound.true_peak * gain for sound, gain in zip(files, gains, strict=True)]
        loudest = max([*peaks, take.true_peak * down if with_bypass else 0.0])
        if loudest <= _ceiling() * (1 + 1e-9):
            break
        down *= _ceiling() / loudest
    over = max(1.0, loudest / _ceiling()) if loudest > 0 else 1.0  # what the rounds may have left
    down, gains = down / over, tuple(gain / over for gain in gains)
    heard = take.loudness(down)
    return Matching(down, gains, silent, heard.lufs, 20 * math.log10(down), heard.method)


def _ceiling() -> float:
    return float(10 ** (CEILING_DB / 20))


def _is_silent(sound: Sound, take: Sound) -> bool:
    """Nothing to bring up: no loudness, or so little that only rounding error would become loud."""
    own, other = sound.loudness(1.0).lufs, take.loudness(1.0).lufs
    if own is None or sound.true_peak < HALF_A_CODE:
        return True
    return other is not None and own < other + SILENT_BELOW_DB


def _gains(take: Sound, files: Sequence[Sound], silent: Sequence[bool], down: float) -> tuple[float, ...]:
    """The gain of each file when the take itself is turned down by the factor ``down``."""
    target = take.loudness(down).lufs
    return tuple(
        down if still or target is None else _gain_to(sound, target)
        for sound, still in zip(files, silent, strict=True)
    )


def _gain_to(sound: Sound, target: float) -> float:
    """The gain that brings a sound to the target in LUFS; a few rounds, because the gate lies at a fixed level."""
    gain = 1.0
    for _ in range(_ROUNDS):
        reached = sound.loudness(gain).lufs
        if reached is None:
            return gain
        gain *= 10 ** ((target - reached) / 20)
        if abs(target - reached) < _CLOSE_DB:
            break
    return gain


def written_factor(gain: float, true_peak: float, subtype: str) -> float:
    """The gain to write a file with: zero, for digital silence, where rounding to 24 bits would leave only dither."""
    return 0.0 if subtype != "FLOAT" and true_peak * gain < HALF_A_CODE else gain
