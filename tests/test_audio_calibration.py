"""Volts per full scale from each kind of calibration, against hand calculation."""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from tackbench.audio import Calibration, choose_calibration
from tackbench.errors import InputError


@pytest.mark.parametrize(
    ("dbu", "volts"), [(9, 3.087), (12, 4.361), (15, 6.160), (18, 8.701), (20, 10.954), (24, 17.362)]
)
def test_dbu_at_full_scale_gives_the_peak_volts_of_the_sine(dbu, volts):
    """0 dBu = sqrt(0.6) V RMS; EBU R 68 and SMPTE RP 155 levels among them (values computed by hand)."""
    assert Calibration.full_scale_dbu(dbu).volts_per_full_scale(0.5) == pytest.approx(volts, abs=6e-4)


def test_dbv_gain_and_trim():
    assert Calibration.full_scale_dbv(0).volts_per_full_scale(1) == pytest.approx(math.sqrt(2), rel=1e-15)
    # 20 dB of gain on the input: full scale is reached with a tenth of the volts
    assert Calibration.full_scale_dbv(0, input_gain_db=20).volts_per_full_scale(1) == pytest.approx(0.1 * 2**0.5)
    # turned down by 6 dB since: the same sample stands for about twice the volts
    assert Calibration.full_scale_dbv(0, trimmed_db=6).volts_per_full_scale(1) == pytest.approx(2.8217, abs=1e-4)
    assert Calibration.full_scale_dbu(2.2185, 0, 0).volts_per_full_scale(1) == pytest.approx(2**0.5, rel=1e-5)


def test_calibrations_by_the_loudest_sample():
    assert Calibration.peak_volts(0.9).volts_per_full_scale(0.25) == pytest.approx(3.6)
    assert Calibration.assumed().volts_per_full_scale(0.5) == pytest.approx(1.4)
    assert Calibration.pickup("hot").volts_per_full_scale(0.5) == pytest.approx(2.8)
    assert Calibration.assumed().volts_per_full_scale(0.0) == 0.7  # a silent take: no division


def test_the_words_say_where_the_volts_come_from():
    assert Calibration.full_scale_dbu(12).words(4.361) == "0 dBFS = 4.36 V (12 dBu at 0 dBFS, 0 dB input gain)"
    assumed = Calibration.assumed()
    assert assumed.is_assumed
    assert assumed.words(1.4) == (
        "assumed: the loudest sample is taken to be 0.7 V; your guitar may be hotter or weaker (0 dBFS = 1.4 V)"
    )
    assert "medium pickup" in Calibration.pickup("medium").words(1.0)
    assert "from memory" in Calibration.pickup("medium").words(1.0)
    assert not Calibration.pickup("medium").is_assumed


@pytest.mark.parametrize("bad", [0, -1, float("nan"), float("inf"), "abc", None, 1e9])
def test_impossible_volts_are_refused_with_the_option_named(bad):
    for maker, option in (
        (Calibration.full_scale_volts, "--full-scale-volts"),
        (Calibration.peak_volts, "--peak-volts"),
    ):
        with pytest.raises(InputError, match=option):
            maker(bad)


@pytest.mark.parametrize("bad", [float("nan"), float("-inf"), "x", 101, -1e6])
def test_impossible_decibels_are_refused_with_the_option_named(bad):
    with pytest.raises(InputError, match="--full-scale-dbu"):
        Calibration.full_scale_dbu(bad)
    with pytest.raises(InputError, match="--full-scale-dbv"):
        Calibration.full_scale_dbv(bad)
    with pytest.raises(InputError, match="--input-gain-db"):
        Calibration.full_scale_dbu(12, input_gain_db=bad)
    with pytest.raises(InputError, match="--trimmed-db"):
        Calibration.full_scale_dbu(12, trimmed_db=bad)


def test_an_unknown_pickup_gets_the_nearest_and_all_volts():
    with pytest.raises(InputError, match=r"did you mean 'medium'\?.*low \(0.35 V\)"):
        Calibration.pickup("meduim")


def test_choosing_among_the_options_of_a_command():
    assert choose_calibration() == Calibration.assumed()
    assert choose_calibration(peak_volts=0.5) == Calibration.peak_volts(0.5)
    chosen = choose_calibration(full_scale_dbu=15, input_gain_db=3, trimmed_db=1)
    assert chosen == Calibration.full_scale_dbu(15, 3, 1)
    with pytest.raises(InputError, match="--peak-volts and --pickup"):
        choose_calibration(peak_volts=1, pickup="hot")
    with pytest.raises(InputError, match="--full-scale-volts and --full-scale-dbu"):
        choose_calibration(full_scale_volts=0.0, full_scale_dbu=12)
    with pytest.raises(InputError, match="--input-gain-db"):
        choose_calibration(input_gain_db=0.0)
    with pytest.raises(InputError, match="--trimmed-db"):
        choose_calibration(peak_volts=1, trimmed_db=3.0)


@given(st.floats(-100, 100), st.floats(-100, 100), st.floats(-100, 100))
def test_decibels_add(level, gain, trim):
    once = Calibration.full_scale_dbu(level, gain, trim).volts_per_full_scale(1)
    assert 20 * math.log10(once / math.sqrt(1.2)) == pytest.approx(level - gain + trim, abs=1e-9)
