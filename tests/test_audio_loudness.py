"""Loudness against the signals of EBU Tech 3341, the ITU table, a general library, and closed forms."""

from __future__ import annotations

import math

import numpy as np
import pytest

from tackbench.audio.loudness import SURROUND_WEIGHTS, TABLE, LoudnessMeter, k_weighting, measure_loudness
from tackbench.errors import WorkError

RATE = 48000


def sine(seconds, dbfs, channels=2, frequency=1000.0, rate=RATE):
    """A sine of that peak level in every channel; levels may differ by channel."""
    wave = np.sin(2 * np.pi * frequency * np.arange(round(seconds * rate)) / rate)
    return wave[:, None] * 10 ** (np.broadcast_to(dbfs, (channels,)) / 20)


# EBU Tech 3341, table 1, cases 1 to 6 (all want -23.0 ± 0.1 but case 2); levels of case 6 from memory.
# Last column: what the general library's exact filter class reads, from which this meter may differ by 0.002.
EBU_CASES = {
    1: ([(20, -23)], -23.0, -22.993),
    2: ([(20, -33)], -33.0, -32.993),
    3: ([(10, -36), (60, -23), (10, -36)], -23.0, -23.014),
    4: ([(10, -72), (10, -36), (60, -23), (10, -36), (10, -72)], -23.0, -23.014),
    5: ([(20, -26), (20.1, -20), (20, -26)], -23.0, -22.979),
    6: ([(20, (-28, -28, -24, -30, -30))], -23.0, -23.016),
}


@pytest.mark.parametrize("case", EBU_CASES)
def test_the_ebu_signals(case):
    parts, wanted, close = EBU_CASES[case]
    weights = SURROUND_WEIGHTS if case == 6 else None
    meter = LoudnessMeter(RATE, 5 if case == 6 else 2, weights)
    for seconds, level in parts:
        meter.add(sine(seconds, level, 5 if case == 6 else 2))
    found = meter.integrated()
    assert found.method == "BS.1770 integrated"
    assert found.lufs == pytest.approx(wanted, abs=0.1)
    assert found.lufs == pytest.approx(close, abs=0.002)


def test_at_48_khz_the_filters_are_the_itu_table():
    assert np.max(np.abs(k_weighting(48000) - np.array(TABLE))) < 1e-12


def weighting_db(frequency, rate):
    z = np.exp(-2j * np.pi * frequency / rate)
    powers = np.array([1, z, z * z])
    gain = 1.0
    for row in k_weighting(rate):
        gain *= abs(row[:3] @ powers / (np.array([1, *row[3:]]) @ powers))
    return 20 * math.log10(gain)


def test_the_weighting_curve_and_its_rate_dependence():
    """Gains of the 48 kHz table by hand calculation; other rates differ only by the bilinear transform's warping."""
    curve = {20: -13.275, 100: -1.134, 200: -0.265, 500: 0.043, 997: 0.691, 2000: 3.071, 4000: 3.968, 10000: 4.042}
    for frequency, gain in curve.items():
        assert weighting_db(frequency, 48000) == pytest.approx(gain, abs=6e-4)
        for rate in (44100, 96000, 192000, 384000):
            assert weighting_db(frequency, rate) == pytest.approx(gain, abs=0.025 if frequency != 2000 else 0.05)


def test_a_full_scale_997_hz_sine_in_one_channel_is_3_01_under():
    assert measure_loudness(sine(5, 0, 1, 997.0), RATE).lufs == pytest.approx(-3.01, abs=0.005)


@pytest.mark.parametrize("rate", [22050, 44100, 48000, 96000])
def test_against_a_general_library(rate):
    """pyloudnorm's filter class that equals the ITU table at 48 kHz; elsewhere its high pass is scaled otherwise."""
    import pyloudnorm

    draw = np.random.default_rng(4)
    steps = np.repeat([0.001, 0.3, 0.05, 0.2, 1e-6, 0.02], 2 * rate)
    noise = draw.standard_normal((len(steps), 2)) * steps[:, None]
    other = pyloudnorm.Meter(rate, filter_class="DeMan")
    due = other.integrated_loudness(noise)
    assert measure_loudness(noise, rate).lufs == pytest.approx(due, abs=1e-6 if rate == 48000 else 0.06)


def test_only_whole_blocks_count():
    """A tone of 0.46 s holds one block of 0.4 s: exact -23.0 (closed form of the steady sine within 0.02 dB)."""
    for seconds in (0.46, 0.49, 0.55, 0.6):
        padded = sine(seconds, -23)
        assert measure_loudness(padded, RATE).lufs == pytest.approx(-22.993, abs=0.02)


def test_the_gates_by_hand():
    """Ten seconds at -20 and ten at -40: the second lies under the relative gate (-20 - 3 - 10)."""
    assert measure_loudness(np.vstack([sine(10, -20), sine(10, -40)]), RATE).lufs == pytest.approx(-20, abs=0.07)
    # at -28 it counts: the mean of both powers
    due = 10 * math.log10((10**-2.0 + 10**-2.8) / 2)
    assert measure_loudness(np.vstack([sine(10, -20), sine(10, -28)]), RATE).lufs == pytest.approx(due, abs=0.07)


def test_short_and_quiet_signals_fall_back_and_say_so():
    short = measure_loudness(sine(0.399, -23), RATE)
    assert short.method.startswith("ungated K-weighted energy: shorter")
    assert short.lufs == pytest.approx(-23, abs=0.05)
    quiet = measure_loudness(sine(3, -80), RATE)
    assert quiet.method.startswith("ungated K-weighted energy: nothing reaches")
    assert quiet.lufs == pytest.approx(-80, abs=0.05)
    silence = measure_loudness(np.zeros((RATE, 1)), RATE)
    assert silence.lufs is None
    assert "silence" in silence.method
    assert LoudnessMeter(RATE, 1).integrated().lufs is None


def test_the_loudness_after_a_gain_is_that_of_the_multiplied_samples():
    draw = np.random.default_rng(6)
    samples = draw.standard_normal((3 * RATE, 1)) * np.repeat([1e-3, 3e-4, 1e-1], RATE)[:, None]
    meter = LoudnessMeter(RATE, 1)
    meter.add(samples)
    for gain in (1e-3, 0.02, 1.0, 30.0):  # across the absolute gate
        scaled = measure_loudness(samples * gain, RATE)
        assert meter.integrated(gain).lufs == pytest.approx(scaled.lufs, abs=1e-9)
        assert meter.integrated(gain).method == scaled.method


@pytest.mark.parametrize("rate", [11025, 44100])
def test_the_result_does_not_depend_on_the_block(rate):
    samples = np.random.default_rng(7).standard_normal((2 * rate + 13, 2)) * 0.1
    due = measure_loudness(samples, rate)
    for cuts in ([1] * 40 + [7] * 300, [1000] * 9, [64, 4411, 3]):
        meter = LoudnessMeter(rate, 2)
        for block in np.split(samples, np.cumsum(cuts)):
            meter.add(block)
        assert meter.integrated() == due


def test_every_channel_weighs_one():
    """Six strings of equal level: 10·log10(6) over one of them, no surround weighting."""
    one, six = measure_loudness(sine(2, -40, 1), RATE).lufs, measure_loudness(sine(2, -40, 6), RATE).lufs
    assert six - one == pytest.approx(10 * math.log10(6), abs=1e-9)


@pytest.mark.parametrize("bad", [np.nan, np.inf])
def test_what_is_no_number_is_refused(bad):
    meter = LoudnessMeter(RATE, 1)
    with pytest.raises(WorkError, match="finite"):
        meter.add(np.array([[0.0], [bad]]))
    with pytest.raises(ValueError, match="shape"):
        meter.add(np.zeros((3, 2)))
    with pytest.raises(ValueError, match="weights"):
        LoudnessMeter(RATE, 2, (1.0,))
