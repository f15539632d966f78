"""The demo take: the same bytes again, in tune, decaying like strings, clean, and within its size."""

from __future__ import annotations

import importlib.util
import itertools
import sys
from pathlib import Path
from types import ModuleType

import numpy as np
import pytest
import soundfile

FOLDER = Path(__file__).resolve().parents[1] / "demo_audio"
TAKE = FOLDER / "take.wav"


def _script() -> ModuleType:
    spec = importlib.util.spec_from_file_location("make_take", FOLDER / "make_take.py")
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    sys.modules["make_take"] = module
    spec.loader.exec_module(module)
    return module


make_take = _script()


@pytest.fixture(scope="module")
def take() -> np.ndarray:
    samples, rate = soundfile.read(TAKE, dtype="float64")
    assert rate == 48_000
    return np.asarray(samples)


def decibels(ratio: float) -> float:
    return float(20.0 * np.log10(ratio))


def amplitude(samples: np.ndarray, frequency: float) -> float:
    """Amplitude of one line under a Hann window."""
    window = np.hanning(len(samples))
    turn = np.exp(-2j * np.pi * frequency * np.arange(len(samples)) / make_take.RATE)
    return float(2.0 * abs(np.sum(samples * window * turn)) / window.sum())


def peak_near(samples: np.ndarray, frequency: float) -> float:
    """The frequency of the strongest line within 12 cents, by a parabola through log amplitudes 1 cent apart."""
    tried = frequency * 2.0 ** (np.arange(-12, 13) / 1200.0)
    level = np.log([amplitude(samples, one) for one in tried])
    best = int(np.clip(np.argmax(level), 1, 23))
    a, b, c = level[best - 1 : best + 2]
    return float(tried[best] * 2.0 ** (0.5 * (a - c) / (a - 2.0 * b + c) / 1200.0))


def test_the_file_is_what_its_script_makes(tmp_path: Path) -> None:
    make_take.write_take(tmp_path / "again.wav")
    assert (tmp_path / "again.wav").read_bytes() == TAKE.read_bytes()


def test_form_and_size(take: np.ndarray) -> None:
    info = soundfile.info(TAKE)
    assert (info.channels, info.subtype, info.format) == (1, "PCM_24", "WAV")
    assert 10.0 <= info.duration <= 15.0
    assert TAKE.stat().st_size < 2_000_000
    assert len(take) == info.frames


def test_level_as_the_scenario_says(take: np.ndarray) -> None:
    """0.5 V peak at 0.7 V per full scale; soft notes far below, the noise floor at -88 dBFS, no DC."""
    assert 0.7 * np.abs(take).max() == pytest.approx(0.5, abs=1e-3)
    assert 0.7 * np.abs(take[9_600:91_200]).max() == pytest.approx(0.08, abs=0.01)
    for quiet in (take[:9_000], take[-4_800:]):
        assert decibels(np.sqrt(np.mean(quiet**2))) == pytest.approx(-88.0, abs=0.5)
    assert abs(take.mean()) < 3e-5


@pytest.mark.parametrize(
    ("string", "fret", "frequency"),
    [(0, 0, 82.4069), (1, 0, 110.0), (2, 2, 164.8138), (3, 4, 246.9417), (4, 10, 440.0), (5, 0, 329.6276)],
)
def test_fundamentals_are_in_tune(string: int, fret: int, frequency: float) -> None:
    """Equal temperament on 440 Hz; the frequencies are the usual printed table."""
    wave = make_take.play(make_take.Note(0.0, string, fret, 0.8, 2.0), np.random.RandomState(1))
    assert abs(1200.0 * np.log2(peak_near(wave[4_800:76_800], frequency) / frequency)) < 0.5


def test_the_ringing_chord_is_in_tune_in_the_file(take: np.ndarray) -> None:
    """The lowest string's octave, fifth and the highest string of the last chord, in the take itself."""
    held = take[int(8.8 * 48_000) : int(11.8 * 48_000)]
    for frequency in (82.4069, 123.4708, 207.6523, 329.6276):
        assert abs(1200.0 * np.log2(peak_near(held, frequency) / frequency)) < 2.0


@pytest.mark.parametrize(("string", "fret"), [(0, 0), (1, 0), (3, 2), (5, 0)])
def test_partials_decay_faster_the_higher_they_are(string: int, fret: int) -> None:
    """1 to 8 s to fall by 60 dB up to 2 kHz, and falling with frequency."""
    note = make_take.Note(0.0, string, fret, 0.8, 2.0)
    wave = make_take.play(note, np.random.RandomState(1))
    times = []
    for partial in range(1, int(2_000.0 / note.frequency) + 1, max(1, int(330.0 / note.frequency))):
        first, later = (
            amplitude(wave[start : start + 14_400], partial * note.frequency) for start in (4_800, 62_400)
        )
        times.append(60.0 * 1.2 / decibels(first / later))
    assert all(1.0 <= seconds <= 8.0 for seconds in times)
    assert times[-1] < 0.6 * times[0]
    assert all(later < 1.1 * earlier for earlier, later in itertools.pairwise(times))


def test_no_clicks(take: np.ndarray) -> None:
    """A click fills every frequency: no 5 ms above 14 kHz comes near the music that the pickup lets through."""
    spectrum = np.fft.rfft(take)
    spectrum[: int(14_000 * len(take) / 48_000)] = 0.0
    high = np.fft.irfft(spectrum, len(take))
    assert decibels(np.abs(high).max()) < -65.0


def test_the_pickup_resonates_and_then_falls() -> None:
    """Its transfer at low frequency is 1 less the divider, its peak lies at the corner, 12 dB an octave above it."""
    b, a1, a2, corner = make_take.pickup_coefficients()
    assert corner == pytest.approx(4_300.0, abs=200.0)

    def transfer(frequency: float) -> float:
        z = np.exp(-2j * np.pi * frequency / 48_000.0)
        return float(abs(b * (1 + z) ** 2 / (1 + a1 * z + a2 * z * z)))

    assert transfer(50.0) == pytest.approx(1.0 / (1.0 + 6e3 * (2.0 / 250e3 + 1e-6)), abs=2e-3)
    assert transfer(corner) > 1.4
    assert decibels(transfer(5_000.0) / transfer(10_000.0)) > 10.0
