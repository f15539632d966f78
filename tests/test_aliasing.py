"""Lines that no harmonic explains: steady tones at prime bins of 16384 samples, 20 dB over clip onset."""

from __future__ import annotations

import numpy as np
import pytest

from reference.make import circuit_of
from tackbench.render.prepared import prepare

RATE, BINS = 48000, 16384
TONES = {997.0: 347, 2503.0: 853, 4999.0: 1709}
"""Tone near so many hertz: the prime bin it stands on (a tone on 1 kHz would alias onto its own harmonics)."""

LIMITS = {"draft": -60.0, "standard": -105.0, "best": -110.0}
CIRCUITS = {"passive-clipper": 5.0, "drive-voice": 0.1, "feedback-clipper": 0.2, "flat-voice": 0.5}
"""Peak volts, ten times the onset of clipping at least."""


def worst_line(name: str, quality: str, bin_number: int) -> float:
    """The largest line below 18 kHz that is no harmonic, in dB re the fundamental."""
    frames = 2 * BINS
    t = np.arange(frames) / RATE
    volts = CIRCUITS[name] * np.sin(2 * np.pi * bin_number * RATE / BINS * t) * np.minimum(1.0, t / 0.02) ** 2
    stream = prepare(circuit_of(name), RATE, quality).stream(1)
    out = stream.process(volts[:, None])[:, 0][-BINS:]
    # a slow approach of the capacitors to their mean is no line: take its straight part off
    steady = out - np.polyval(np.polyfit(np.arange(BINS), out, 1), np.arange(BINS))
    lines = np.abs(np.fft.rfft(steady * np.kaiser(BINS, 24.0)))
    fundamental = lines[bin_number]
    for harmonic in range(0, len(lines), bin_number):
        lines[max(0, harmonic - 9) : harmonic + 10] = 0.0
    return float(20 * np.log10(np.max(lines[: int(18000 * BINS / RATE)]) / fundamental))


@pytest.mark.parametrize("tone", TONES)
@pytest.mark.parametrize("quality", LIMITS)
@pytest.mark.parametrize("name", CIRCUITS)
def test_aliases_stay_below_the_limit(name: str, quality: str, tone: float) -> None:
    found = worst_line(name, quality, TONES[tone])
    print(f"{name} {quality} {tone:.0f} Hz: {found:.1f} dB")
    assert found < LIMITS[quality]
