"""A steady sine through a circuit: its harmonics, distortion, levels, and two periods to look at."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from tackbench.circuit import Circuit
from tackbench.render import prepare

RATE = 192000
"""Samples a second that sines are measured at: harmonics up to 86 kHz are kept."""

HARMONICS = 15

_BLOCK_SECONDS = 0.05
_LONGEST_SECONDS = 3.0
_SETTLED = 2e-4  # change of any harmonic from block to block, of the fundamental
_RISE_SECONDS = 0.01
_MOST_CYCLES = 40


@dataclass(frozen=True)
class Sine:
    """What came out for a sine of ``take_volts`` peak at ``hertz``.

    ``harmonics``: peak volts of the fundamental and its multiples up to the fifteenth that lie under 86 kHz;
    ``samples``: output volts over two periods, with ``take`` beside them and ``seconds`` from the first; ``dc`` is
    their mean and ``resting`` the output's volts with the take silent. ``settled`` is False when slow capacitors were
    still moving after three seconds.
    """

    hertz: float
    take_volts: float
    harmonics: NDArray[np.float64]
    seconds: NDArray[np.float64]
    take: NDArray[np.float64]
    samples: NDArray[np.float64]
    dc: float
    resting: float
    rms_all: float
    settled: bool

    @property
    def gain_db(self) -> float:
        """The fundamental against the take, dB."""
        return 20 * math.log10(max(self.harmonics[0], 1e-300) / self.take_volts)

    @cached_property
    def vpp(self) -> float:
        """Volts from the lowest to the highest instant."""
        return float(np.max(self.samples) - np.min(self.samples))

    @property
    def highest(self) -> float:
        """The crest above the mean, V."""
        return float(np.max(self.samples) - self.dc)

    @property
    def lowest(self) -> float:
        """The trough below the mean, V (negative)."""
        return float(np.min(self.samples) - self.dc)

    @property
    def rms(self) -> float:
        """Volts RMS of the moving part."""
        return self.rms_all

    @property
    def thd_of_fundamental(self) -> float:
        """Harmonics 2 and up against the fundamental, a ratio."""
        return float(np.sqrt(np.sum(self.harmonics[1:] ** 2)) / max(self.harmonics[0], 1e-300))

    @property
    def thd_of_total(self) -> float:
        """Harmonics 2 and up against the whole moving output, a ratio (the wording of IEC 60268-3)."""
        return float(np.sqrt(np.sum(self.harmonics[1:] ** 2) / max(np.sum(self.harmonics**2), 1e-300)))

    @property
    def even(self) -> float:
        """Even harmonics against the fundamental, a ratio."""
        return float(np.sqrt(np.sum(self.harmonics[1::2] ** 2)) / max(self.harmonics[0], 1e-300))

    @property
    def odd(self) -> float:
        """Odd harmonics from the third against the fundamental, a ratio."""
        return float(np.sqrt(np.sum(self.harmonics[2::2] ** 2)) / max(self.harmonics[0], 1e-300))


def whole_cycles(hertz: float) -> tuple[int, int]:
    """Cycles and samples of the shortest stretch that holds whole cycles to a millionth, or the nearest of forty."""
    best = (1, round(RATE / hertz))
    for cycles in range(1, _MOST_CYCLES + 1):
        samples = round(cycles * RATE / hertz)
        error = abs(samples * hertz / RATE - cycles) / cycles
        if error < 1e-9:
            return cycles, samples
        if error < abs(best[1] * hertz / RATE - best[0]) / best[0]:
            best = cycles, samples
    return best


def measure_sines(
    circuit: Circuit, hertz: float, take_volts: Sequence[float], quality: str = "standard"
) -> list[Sine]:
    """A sine of ``hertz`` at each of several peak voltages, until what comes out repeats.

    The frequency is moved by less than 0.1 % where whole cycles need it; ``Sine.hertz`` is the one that was used.
    Raises WorkError where the circuit cannot be solved, ValueError for a frequency outside 10 Hz to 20 kHz.
    """
    if not 10.0 <= hertz <= 20000.0:
        raise ValueError(f"sines from 10 Hz to 20 kHz can be measured, not {hertz:g} Hz")
    cycles, samples = whole_cycles(hertz)
    exact = cycles * RATE / samples
    repeats = max(1, math.ceil(_BLOCK_SECONDS * RATE / samples))
    block = samples * repeats
    stage = prepare(circuit, RATE, quality)
    levels = np.asarray(take_volts, dtype=float)
    stream = stage.stream(len(levels))
    orders = np.arange(1, HARMONICS + 1)
    orders = orders[orders * exact < 0.45 * RATE]
    settled, last = np.zeros(len(levels), dtype=bool), np.zeros((len(orders), len(levels)))
    held, at = np.zeros((0, len(levels))), 0
    found, rms = last, np.zeros(len(levels))
    out = np.zeros((block, len(levels)))
    for _ in range(max(3, round(_LONGEST_SECONDS * RATE / block))):
        t = (at + np.arange(block)) / RATE
        rise = np.sin(0.5 * np.pi * np.clip(t / _RISE_SECONDS, 0, 1)) ** 2
        wave = np.sin(2 * np.pi * exact * t)
        held = np.concatenate([held, stream.process((rise * wave)[:, None] * levels)])
        at += block
        if len(held) < block or at / RATE < 2 * _RISE_SECONDS:
            continue
        out, held = held[-block:], held[-block:]
        spectrum = np.fft.rfft(out, axis=0) / block
        found = 2 * np.abs(spectrum[orders * cycles * repeats])
        rms = np.sqrt(2 * np.sum(np.abs(spectrum[1:]) ** 2, axis=0))
        settled = np.all(np.abs(found - last) <= _SETTLED * np.maximum(found[0], 1e-9), axis=0)
        last = found
        if np.all(settled):
            break
    return [
        _sine(exact, float(volts), column, found, rms, out, stage.output_dc, bool(settled[column]))
        for column, volts in enumerate(levels)
    ]


def _sine(
    hertz: float,
    volts: float,
    column: int,
    harmonics: NDArray[np.float64],
    rms: NDArray[np.float64],
    out: NDArray[np.float64],
    resting: float,
    settled: bool,
) -> Sine:
    """Two periods of the output, beginning where its fundamental's sine would, and the figures."""
    moving, mean = out[:, column] - np.mean(out[:, column]), float(np.mean(out[:, column]))
    t = np.arange(len(moving)) / RATE
    turn = np.angle(np.sum(moving * np.exp(-2j * np.pi * hertz * t))) + 0.5 * np.pi
    start = round((-turn / (2 * np.pi * hertz)) % (1 / hertz) * RATE) % len(moving)
    count = min(len(moving), round(2 * RATE / hertz) + 1)
    shown = np.take(moving, np.arange(start, start + count), mode="wrap") + mean
    seconds = np.arange(count) / RATE
    take = volts * np.sin(2 * np.pi * hertz * seconds)
    return Sine(
        hertz, volts, harmonics[:, column].copy(), seconds, take, shown, mean, resting, float(rms[column]), settled
    )
