"""Levels against closed forms and the true-peak signals of EBU Tech 3341."""

from __future__ import annotations

import math

import numpy as np
import pytest

from tackbench.audio.levels import LevelMeter, measure_levels
from tackbench.errors import WorkError

RATE = 48000


def tone(ratio, amplitude, degrees, seconds=1.0, fade=0.01):
    """A sine at the rate over ``ratio`` with 10 ms fades, as the true-peak signals ask."""
    n = np.arange(round(seconds * RATE))
    edge = np.minimum(1, np.minimum(n, n[::-1]) / (fade * RATE))
    return (edge * amplitude * np.sin(2 * np.pi * n / ratio + math.radians(degrees)))[:, None]


# EBU Tech 3341, cases 15 to 19: rate over frequency, amplitude, phase, wanted dBTP (+0.2/-0.4 dB)
TRUE_PEAKS = {
    15: (4, 0.50, 0.0, -6.0),
    16: (4, 0.50, 45.0, -6.0),
    17: (6, 0.50, 60.0, -6.0),
    18: (8, 0.50, 67.5, -6.0),
    19: (4, 1.41, 45.0, 3.0),
}


@pytest.mark.parametrize("case", TRUE_PEAKS)
def test_the_true_peak_signals(case):
    ratio, amplitude, degrees, wanted = TRUE_PEAKS[case]
    found = 20 * math.log10(measure_levels(tone(ratio, amplitude, degrees), RATE).true_peak)
    assert wanted - 0.4 <= found <= wanted + 0.2
    assert found == pytest.approx(20 * math.log10(amplitude), abs=0.01)  # the closed form


@pytest.mark.parametrize(
    ("rate", "worst"), [(44100, 0.45), (48000, 0.45), (96000, 0.45), (192000, 0.48), (384000, 0.12)]
)
def test_the_true_peak_of_any_sine_to_20_khz(rate, worst):
    """Reads at most cos(pi·f/(factor·rate)) under the truth, and never more than the filter's ripple over it."""
    draw = np.random.default_rng(8)
    n = np.arange(rate // 4)
    edge = np.minimum(1, np.minimum(n, n[::-1]) / (0.02 * rate))
    for frequency in draw.uniform(100, min(20000, 0.44 * rate), 10):
        wave = edge * np.sin(2 * np.pi * frequency * n / rate + draw.uniform(0, 6))
        found = 20 * math.log10(measure_levels(wave[:, None], rate).true_peak)
        assert -worst <= found <= 0.01


def test_a_sine_with_dc_against_its_closed_forms():
    n = np.arange(RATE)
    samples = 4.5 + 0.3 * np.sin(2 * np.pi * 1000 * n / RATE)[:, None]
    found = measure_levels(samples, RATE, resting=4.5)
    assert found.mean == pytest.approx(4.5, abs=1e-12)
    assert (found.minimum, found.maximum) == pytest.approx((4.2, 4.8))
    assert found.peak_to_peak == pytest.approx(0.6)
    assert found.peak == pytest.approx(4.8)
    assert found.peak_from_rest == pytest.approx(0.3)
    assert found.ac_rms == pytest.approx(0.3 / math.sqrt(2), rel=1e-9)
    assert found.rms == pytest.approx(math.hypot(4.5, 0.3 / math.sqrt(2)), rel=1e-12)
    assert found.crest_db == pytest.approx(20 * math.log10(math.sqrt(2)), abs=1e-9)
    assert found.true_peak == pytest.approx(0.3, rel=0.02)  # its hard start rings a little
    assert found.frames == RATE


def test_small_signals_on_a_large_dc_keep_their_digits():
    n = np.arange(RATE)
    samples = 9.0 + 1e-6 * np.sin(2 * np.pi * 100 * n / RATE)[:, None]
    assert measure_levels(samples, RATE).ac_rms == pytest.approx(1e-6 / math.sqrt(2), rel=1e-4)


def test_channels_with_different_dc_do_not_make_ac():
    samples = np.tile([1.0, -2.0], (100, 1))
    found = measure_levels(samples, RATE)
    assert (found.ac_rms, found.crest_db) == (0.0, None)
    assert found.mean == -0.5
    assert (found.minimum, found.maximum) == (-2.0, 1.0)
    assert found.rms == pytest.approx(math.sqrt(2.5))


def test_the_last_samples_count_in_the_true_peak():
    samples = np.zeros((1000, 1))
    samples[-2:, 0] = 0.9
    assert measure_levels(samples, RATE).true_peak > 1.0  # two equal samples: the truth lies higher, between them


def test_the_loudest_sample_over_the_rest():
    samples = np.tile([0.1, -0.1], 3000)[:, None]
    samples[77] = 0.4
    assert measure_levels(samples, RATE).over_999_db == pytest.approx(20 * math.log10(4), abs=0.08)
    silence = measure_levels(np.zeros((5, 1)), RATE)
    assert (silence.over_999_db, silence.crest_db, silence.true_peak) == (None, None, 0.0)


def test_results_do_not_depend_on_the_block_and_the_meter_goes_on():
    samples = np.random.default_rng(9).standard_normal((9001, 2)) + 3
    due = measure_levels(samples, RATE, resting=2.0)
    for cuts in ([1] * 50, [7] * 100, [1000, 64, 64, 0, 3]):
        meter = LevelMeter(RATE, 2, resting=2.0)
        for block in np.split(samples, np.cumsum(cuts)):
            meter.add(block)
            if meter._frames:
                meter.result()  # looking does not disturb
        assert meter.result() == due


def test_refusals():
    meter = LevelMeter(RATE, 1)
    with pytest.raises(ValueError, match="no sample"):
        meter.result()
    with pytest.raises(WorkError, match="finite"):
        meter.add(np.array([[np.nan]]))
    with pytest.raises(ValueError, match="shape"):
        meter.add(np.zeros(4))
