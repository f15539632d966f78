"""Lines that no harmonic explains: steady tones at prime bins of 16384 samples, 20 dB over clip onset."""

from __future__ import annotations

import numpy as np
import pytest

from reference.make import circuit_of
from tackbench.circuit import Circuit
from tackbench.render.prepared import prepare
from tackbench.stage import load_stage

RATE, BINS = 48000, 16384
WINDOW_BETA = 24.0  # Kaiser: a line is 8 bins wide either side, and below that -200 dB
TONES = {997.0: 347, 2503.0: 853, 4999.0: 1709}
"""Tone near so many hertz: the prime bin it stands on (a tone on 1 kHz would alias onto its own harmonics)."""

LIMITS = {"draft": -60.0, "standard": -105.0, "best": -110.0}
CIRCUITS = {"passive-clipper": 5.0, "drive-voice": 0.1, "feedback-clipper": 0.2, "flat-voice": 1.5, "two-voice": 0.2}
"""Peak volts, ten times the onset of clipping at least (in the flat voice that of the op-amp, behind the diodes')."""


def circuit(name: str) -> Circuit:
    if name == "two-voice":
        return load_stage(name).variant({"voice": "drive", "clip": "silicon", "gain": 1.0}).circuit
    return circuit_of(name)


def inharmonic(steady: np.ndarray, bin_number: int) -> np.ndarray:
    """The lines, shape (BINS / 2 + 1,), re the fundamental; those of the harmonics are made zero."""
    lines = np.abs(np.fft.rfft(steady * np.kaiser(BINS, WINDOW_BETA)))
    lines /= lines[bin_number]
    for harmonic in range(0, len(lines), bin_number):
        lines[max(0, harmonic - 9) : harmonic + 10] = 0.0
    return lines


def worst_line(name: str, quality: str, bin_number: int) -> float:
    """The largest line below 18 kHz that is no harmonic, in dB re the fundamental."""
    t = np.arange(2 * BINS) / RATE
    volts = CIRCUITS[name] * np.sin(2 * np.pi * bin_number * RATE / BINS * t) * np.minimum(1.0, t / 0.02) ** 2
    stream = prepare(circuit(name), RATE, quality).stream(1)
    out = stream.process(volts[:, None])[:, 0][-BINS:]
    # a slow approach of the capacitors to their mean is no line: take its straight part off
    steady = out - np.polyval(np.polyfit(np.arange(BINS), out, 1), np.arange(BINS))
    return float(20 * np.log10(np.max(inharmonic(steady, bin_number)[: int(18000 * BINS / RATE)])))


@pytest.mark.parametrize("tone", TONES)
@pytest.mark.parametrize("quality", LIMITS)
@pytest.mark.parametrize("name", CIRCUITS)
def test_aliases_stay_below_the_limit(name: str, quality: str, tone: float) -> None:
    found = worst_line(name, quality, TONES[tone])
    print(f"{name} {quality} {tone:.0f} Hz: {found:.1f} dB")
    assert found < LIMITS[quality]


@pytest.mark.parametrize(("times", "expected"), [(1, -11.1), (4, -39.7), (16, -66.5)])
def test_the_measure_itself(times: int, expected: float) -> None:
    """Worked table: a sine 20 dB over a hard clip at so many times 48 kHz, decimated ideally; all lines below 24 kHz
    that are no harmonics, in dB re the fundamental."""
    number = TONES[4999.0]
    clipped = np.clip(10.0 * np.sin(2 * np.pi * number * np.arange(times * BINS) / (times * BINS)), -1.0, 1.0)
    decimated = np.fft.irfft(np.fft.rfft(clipped)[: BINS // 2 + 1] / times, BINS)
    lines = inharmonic(decimated, number)
    bandwidth = np.mean(np.kaiser(BINS, WINDOW_BETA) ** 2) / np.mean(np.kaiser(BINS, WINDOW_BETA)) ** 2
    assert 10 * np.log10(np.sum(lines**2) / bandwidth) == pytest.approx(expected, abs=0.3)
