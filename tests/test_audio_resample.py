"""The resamplers against closed forms: interpolated multitones, frequency responses, alignment, block invariance."""

from __future__ import annotations

import itertools

import numpy as np
import pytest

from tackbench.audio.resample import Downsampler, Upsampler, base_factor, check_rate, true_peak_factor
from tackbench.errors import InputError

FACTORS = (2, 3, 4, 8, 9, 12, 16, 17, 32, 48)


def multitone(times, seed=1, top=0.45):
    """Eleven sines up to ``top`` cycles a sample at any times: the take and its interpolation in one closed form."""
    draw = np.random.default_rng(seed)
    frequencies = np.append(draw.uniform(0.003, top, 10), top)
    phases = draw.uniform(0, 2 * np.pi, 11)
    return np.sum(np.sin(2 * np.pi * np.outer(times, frequencies) + phases), axis=1)


def decibels(ratio):
    return 20 * np.log10(np.maximum(ratio, 1e-20))


def rms(x):
    return np.sqrt(np.mean(np.square(x)))


def push_in_cuts(machine, stream, unit, cuts):
    parts, start = [], 0
    for cut in itertools.cycle(cuts):
        if start >= len(stream):
            return np.concatenate(parts)
        parts.append(machine.push(stream[start : start + cut * unit]))
        start += cut * unit
    return None


@pytest.mark.parametrize("factor", FACTORS)
def test_upsampling_equals_the_closed_form_of_a_multitone(factor):
    machine = Upsampler(factor)
    count = 600
    out = machine.push(multitone(np.arange(count)))
    times = np.arange(count * factor) / factor - machine.half
    inside = (times > machine.half) & (times < count - 1 - machine.half)
    due = multitone(times)
    # 11 tones of ripple 4e-8 each, incoherent: measured -147 dB
    assert decibels(rms((out - due)[inside]) / rms(due[inside])) < -140


@pytest.mark.parametrize("factor", FACTORS)
def test_the_images_of_the_upsampler_are_below_135_db(factor):
    machine = Upsampler(factor)
    impulse = np.zeros(2 * machine.half + 2)
    impulse[0] = 1.0
    spectrum = np.abs(np.fft.rfft(machine.push(impulse), 4096 * factor)) / factor
    frequency = np.arange(len(spectrum)) / 4096  # in take rates
    assert np.max(np.abs(spectrum[frequency <= 0.45] - 1)) < 1e-6
    assert decibels(spectrum[frequency >= 0.55].max()) < -135


def impulse_response(factor, dense):
    """The whole filter on the dense grid, put together from impulses at every offset of one output sample."""
    step = factor * dense
    count = 2 * Downsampler(factor, dense).half + 2
    response = np.zeros(count * step)
    for offset in range(step):
        stream = np.zeros(count * step)
        stream[offset] = 1.0
        response[np.arange(count) * step - offset] = Downsampler(factor, dense).push(stream)
    return response


@pytest.mark.parametrize(
    ("factor", "dense"), [(1, 8), (2, 8), (2, 1), (3, 4), (8, 8), (8, 1), (9, 8), (17, 2), (48, 8)]
)
def test_the_downsampler_passes_0_45_and_stops_0_55(factor, dense):
    step = factor * dense
    spectrum = np.abs(np.fft.rfft(impulse_response(factor, dense), 1024 * step))
    frequency = np.arange(len(spectrum)) / 1024  # in output rates
    assert np.max(np.abs(spectrum[frequency <= 0.45] - 1)) < 1e-6
    assert decibels(spectrum[frequency >= 0.55].max()) < -135
    assert spectrum[0] == pytest.approx(1.0, abs=1e-14)


@pytest.mark.parametrize("factor", FACTORS)
def test_up_then_down_is_the_take_delayed_by_both_halves(factor):
    up, down = Upsampler(factor), Downsampler(factor, dense=1)
    take = multitone(np.arange(900))
    out = down.push(up.push(take))
    delay = up.half + down.half
    middle = slice(2 * delay, 900 - 1)
    due = multitone(np.arange(900) - delay)
    assert decibels(rms((out - due)[middle]) / rms(due[middle])) < -130


@pytest.mark.parametrize(("factor", "dense"), [(1, 8), (2, 8), (4, 8), (8, 8), (9, 8), (48, 8)])
def test_a_dense_multitone_comes_down_in_its_place(factor, dense):
    machine = Downsampler(factor, dense)
    count = 400
    out = machine.push(multitone(np.arange(count * factor * dense) / (factor * dense)))
    due = multitone(np.arange(count) - machine.half)
    middle = slice(2 * machine.half + 1, count - 1)
    assert decibels(rms((out - due)[middle]) / rms(due[middle])) < -130


@pytest.mark.parametrize("cuts", [(1,), (7,), (64, 1), (1000,), (3, 500, 0, 11)])
@pytest.mark.parametrize("factor", [1, 2, 8, 9])
def test_the_samples_do_not_depend_on_the_block(factor, cuts):
    draw = np.random.default_rng(3)
    take = draw.standard_normal(2500)
    whole = Upsampler(factor).push(take)
    assert np.array_equal(push_in_cuts(Upsampler(factor), take, 1, cuts), whole)
    for dense in (1, 8):
        unit = factor * dense
        stream = draw.standard_normal(2500 * unit)
        whole = Downsampler(factor, dense).push(stream)
        assert np.array_equal(push_in_cuts(Downsampler(factor, dense), stream, unit, cuts), whole)


@pytest.mark.parametrize("factor", FACTORS)
def test_a_constant_stays_constant(factor):
    up, down = Upsampler(factor), Downsampler(factor, dense=8)
    raised = up.push(np.full(300, 0.7))[2 * up.half * factor :]
    assert np.max(np.abs(raised - 0.7)) < 1e-15 * 8
    lowered = down.push(np.full(300 * factor * 8, 0.7))[2 * down.half + 1 :]
    assert np.max(np.abs(lowered - 0.7)) < 1e-15 * 50


def test_the_take_s_own_samples_pass_bit_for_bit():
    take = np.random.default_rng(5).standard_normal(500)
    up = Upsampler(8)
    assert np.array_equal(up.push(take)[up.half * 8 :: 8], take[: 500 - up.half])


def test_factor_one_is_the_identity_up_and_down_without_delay():
    take = np.random.default_rng(5).standard_normal(50)
    up, down = Upsampler(1), Downsampler(1, dense=1)
    assert (up.half, down.half) == (0, 0)
    assert np.array_equal(down.push(up.push(take)), take)


def test_an_odd_instant_against_the_plain_sinc_series():
    """A pulse at one odd instant against the sampling theorem summed over 20000 samples (Shannon 1949)."""
    index = np.arange(-10000, 10000)
    take = np.cos(2 * np.pi * 0.1234 * index) * np.exp(-((index / 900.0) ** 2))
    up = Upsampler(17)
    out = up.push(take[9000:11000])
    at = 1000 + 3 / 17
    due = np.sum(take * np.sinc(at - 1000 - index))
    assert out[round((at + up.half) * 17)] == pytest.approx(due, abs=3e-8)


def test_base_factor_and_the_rates_that_can_be_worked_with():
    rates = (8000, 22050, 32000, 44100, 48000, 88200, 96000, 176400, 192000, 384000)
    assert [base_factor(rate) for rate in rates] == [48, 17, 12, 9, 8, 4, 4, 2, 2, 1]
    assert [true_peak_factor(rate) for rate in (44100, 96000, 192000)] == [4, 2, 1]
    for rate in (7999, 0, 768000, float("nan"), 44100.5):
        with pytest.raises(InputError, match="384000 Hz"):
            check_rate(rate)


def test_wrong_shapes_are_programming_errors():
    with pytest.raises(ValueError, match="multiple of 16"):
        Downsampler(2, 8).push(np.zeros(15))
    with pytest.raises(ValueError, match="one channel"):
        Upsampler(2).push(np.zeros((4, 2)))


@pytest.mark.parametrize(("factor", "rate"), [(8, 48000), (4, 96000), (2, 192000), (1, 384000)])
@pytest.mark.parametrize("hertz", [100.0, 5000.0, 18000.0])
def test_means_over_cells_come_down_as_values(factor, rate, hertz):
    """A sine's exact mean over each cell, sin(x)/x lower and half a cell later, comes out as the sine itself."""
    dense = 8
    cells = 400 * factor * dense
    edges = np.arange(cells + 1) / (rate * factor * dense)
    omega = 2 * np.pi * hertz
    means = -np.diff(np.cos(omega * edges)) / np.diff(edges) / omega
    machine = Downsampler(factor, dense, means=True)
    out = machine.push(means)
    t = (np.arange(len(out)) - machine.half) / rate
    keep = slice(2 * machine.half + 2, None)
    assert np.max(np.abs(out[keep] - np.sin(omega * t[keep]))) < 3e-7


def test_means_need_cells():
    with pytest.raises(ValueError, match="2 for means"):
        Downsampler(8, 1, means=True)
