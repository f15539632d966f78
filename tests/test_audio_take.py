"""Loading takes: every legal format and rate, every kind of bad file, notes, and a fuzz over real headers."""

from __future__ import annotations

import os
import struct
import threading

import numpy as np
import pytest
import soundfile
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from tackbench.audio import Calibration, Take, load_take, load_takes
from tackbench.audio.amplitudes import AmplitudeHistogram
from tackbench.errors import InputError, WorkError


def noise(frames, channels=1, peak=0.5, seed=0):
    return np.random.default_rng(seed).uniform(-peak, peak, (frames, channels))


def written(path, samples, rate=48000, subtype="PCM_24", **options):
    soundfile.write(path, samples, rate, subtype, **options)
    return path


@pytest.mark.parametrize(
    ("name", "format", "subtype", "step"),
    [
        ("a.wav", "WAV", "PCM_16", 2**-15),
        ("a.wav", "WAV", "PCM_24", 2**-23),
        ("a.wav", "WAVEX", "PCM_24", 2**-23),
        ("a.wav", "WAV", "PCM_32", 2**-31),
        ("a.wav", "WAV", "FLOAT", 2**-24),
        ("a.wav", "WAV", "DOUBLE", 2**-52),
        ("a.rf64", "RF64", "PCM_24", 2**-23),
        ("a.flac", "FLAC", "PCM_16", 2**-15),
        ("a.flac", "FLAC", "PCM_24", 2**-23),
        ("a.aiff", "AIFF", "PCM_24", 2**-23),
        ("a.aiff", "AIFF", "FLOAT", 2**-24),
        ("a.wav", "WAV", "PCM_U8", 2**-7),
    ],
)
def test_formats_are_read_in_full_and_in_any_block_size(tmp_path, name, format, subtype, step):
    samples = noise(2345, 3)
    take = load_take(written(tmp_path / name, samples, 44100, subtype, format=format))
    assert (take.rate, take.channels, take.frames, take.format, take.subtype) == (44100, 3, 2345, format, subtype)
    for size in (1, 1000, 5000):
        whole = np.concatenate(list(take.blocks(size)))
        assert whole.dtype == np.float64
        assert whole.shape == (2345, 3)
        assert np.max(np.abs(whole - samples)) <= 1.01 * step
    assert take.peak == np.max(np.abs(whole))
    assert take.notes == ()
    assert take.seconds == 2345 / 44100


@pytest.mark.parametrize("rate", [8000, 11025, 22050, 96000, 192000, 384000])
def test_rates_and_lengths_down_to_one_sample(tmp_path, rate):
    take = load_take(written(tmp_path / "one.wav", noise(1), rate))
    assert (take.rate, take.frames) == (rate, 1)


def test_sixty_four_channels(tmp_path):
    assert load_take(written(tmp_path / "many.wav", noise(10, 64))).channels == 64
    with pytest.raises(InputError, match="65 channels"):
        load_take(written(tmp_path / "more.wav", noise(10, 65)))


def test_assumed_calibration_is_shared_by_a_set(tmp_path):
    quiet = written(tmp_path / "quiet.wav", np.array([0.1, -0.05]), subtype="FLOAT")
    loud = written(tmp_path / "loud.wav", np.array([0.1, -0.5]), subtype="FLOAT")
    takes = load_takes([quiet, loud])
    assert [take.volts_per_full_scale for take in takes] == pytest.approx([1.4, 1.4])
    assert all(take.calibration_assumed and "0.7 V" in take.calibration_words for take in takes)
    (alone,) = load_takes([quiet])
    assert alone.volts_per_full_scale == pytest.approx(7.0)
    stated = load_take(quiet, Calibration.full_scale_volts(3))
    assert (stated.volts_per_full_scale, stated.calibration_assumed) == (3.0, False)


def test_blocks_run_in_several_threads_at_once(tmp_path):
    take = load_take(written(tmp_path / "a.flac", noise(30000, 2)))
    results = []
    readers = [
        threading.Thread(target=lambda size=size: results.append(np.concatenate(list(take.blocks(size)))))
        for size in (17, 64, 1000, 4096)
    ]
    for reader in readers:
        reader.start()
    for reader in readers:
        reader.join()
    assert len(results) == 4
    assert all(np.array_equal(result, results[0]) for result in results)
    first, second = take.blocks(10), take.blocks(10)
    assert np.array_equal(next(first), next(second))


def test_the_fingerprint_is_that_of_the_samples(tmp_path):
    samples = np.round(noise(500) * 2**15) / 2**15
    wave = load_take(written(tmp_path / "a.wav", samples, subtype="PCM_16"))
    flac = load_take(written(tmp_path / "b.flac", samples, subtype="PCM_24"))
    other = load_take(written(tmp_path / "c.wav", samples, 44100, "PCM_16"))
    assert wave.fingerprint() == flac.fingerprint() != other.fingerprint()


def test_a_file_that_changes_while_in_use_is_a_failure_of_the_work(tmp_path):
    path = written(tmp_path / "a.wav", noise(500))
    take = load_take(path)
    written(path, noise(400))
    with pytest.raises(WorkError, match="changed or went away"):
        list(take.blocks(100))
    path.unlink()
    with pytest.raises(WorkError, match="changed or went away"):
        list(take.blocks(100))


# ------------------------------------------------------------------ notes


def test_silent_and_constant_takes_are_legal(tmp_path):
    silent = load_take(written(tmp_path / "s.wav", np.zeros(100)))
    assert silent.notes == ("the take is silent",)
    assert (silent.peak, silent.volts_per_full_scale) == (0.0, 0.7)
    assert load_take(written(tmp_path / "d.wav", np.full(100, 0.25))).notes == ()


@pytest.mark.parametrize("subtype", ["PCM_16", "PCM_24", "FLOAT"])
@pytest.mark.parametrize("at", [0, 5000, 2**18 - 1, 2**18, 2**18 - 2])
def test_runs_at_full_scale_are_found_across_block_borders(tmp_path, subtype, at):
    samples = noise(2**18 + 1000, peak=0.8)[:, 0]
    samples[at : at + 4] = 1.0
    samples[900:902] = 1.0  # two are not a run
    samples[2000:2003] = -1.0
    take = load_take(written(tmp_path / "c.wav", samples, subtype=subtype))
    clip = [note for note in take.notes if note.startswith("clipped take")]
    assert len(clip) == 1
    assert "2 runs" in clip[0]
    assert f"the first at {min(at, 2000) / 48000:.3f} s" in clip[0]


def test_a_float_take_over_full_scale_is_no_clipped_take(tmp_path):
    hot = 1.5 * np.sin(np.arange(4800) / 30)
    assert load_take(written(tmp_path / "hot.wav", hot, subtype="FLOAT")).notes == ()
    flat = np.clip(hot, -1.2, 1.2)
    assert "clipped take" in load_take(written(tmp_path / "flat.wav", flat, subtype="FLOAT")).notes[0]


def test_a_knock_far_above_the_playing_is_pointed_out(tmp_path):
    samples = np.tile([0.1, -0.1], 2000)
    samples[1234] = 0.1 * 10 ** (6.5 / 20)
    (note,) = load_take(written(tmp_path / "k.wav", samples, subtype="FLOAT")).notes
    assert "99.9 %" in note
    assert "6.5 dB over" in note or "6.4 dB over" in note or "6.6 dB over" in note
    samples[1234] = 0.1 * 10 ** (5.5 / 20)
    assert load_take(written(tmp_path / "k.wav", samples, subtype="FLOAT")).notes == ()


def test_an_almost_silent_take_is_pointed_out_where_its_peak_sets_the_volts(tmp_path):
    path = written(tmp_path / "q.wav", noise(1000, peak=1e-4))
    assert "only -80 dBFS" in load_take(path).notes[0]
    assert load_take(path, Calibration.full_scale_dbu(12)).notes == ()


def test_the_histogram_level_against_the_sorted_samples():
    magnitudes = np.abs(np.random.default_rng(2).standard_cauchy(50000)) * 1e-3
    histogram = AmplitudeHistogram()
    for part in np.array_split(magnitudes, 7):
        histogram.add(part)
    due = np.sort(magnitudes)[int(0.999 * 50000)]
    assert 20 * np.log10(histogram.level() / due) == pytest.approx(0, abs=0.08)  # half a bin


# ------------------------------------------------------------------ bad files


def fails(path, match):
    with pytest.raises(InputError, match=match) as caught:
        load_take(path)
    text = str(caught.value)
    assert text.count("\n") == 0
    assert str(path) in text or "\0" in str(path)


def test_what_is_no_audio_file(tmp_path):
    fails(tmp_path / "none.wav", "there is no such file")
    fails(tmp_path / "none" / "none.wav", "there is no such file")
    fails(tmp_path, "is a folder")
    fails(tmp_path / ("x" * 5000), "cannot be opened")
    with pytest.raises(InputError):
        load_take("a\0b.wav")
    empty = tmp_path / "empty.wav"
    empty.touch()
    fails(empty, "is empty")
    text = tmp_path / "text.wav"
    text.write_text("a take? no.\n" * 50)
    fails(text, "cannot be read as audio")
    written(tmp_path / "a.ogg", noise(100), subtype="VORBIS", format="OGG")
    fails(tmp_path / "a.ogg", "is OGG.*a take is a WAV")
    fails(written(tmp_path / "law.wav", noise(100), subtype="ULAW"), "Law samples; PCM or float")
    if hasattr(os, "mkfifo"):
        os.mkfifo(tmp_path / "pipe.wav")
        fails(tmp_path / "pipe.wav", "not an ordinary file")


def test_a_file_without_permission(tmp_path, monkeypatch):
    path = written(tmp_path / "a.wav", noise(10))

    def refuse(self, *arguments, **options):
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr("pathlib.Path.open", refuse)  # as root, permissions do not hold
    fails(path, "may not be read")


@pytest.mark.parametrize("value", [np.nan, np.inf, -np.inf, 1e30])
@pytest.mark.parametrize("at", [0, 300000])
def test_samples_that_are_no_numbers_are_named(tmp_path, value, at):
    samples = noise(300001, 2)
    samples[at, 1] = value
    path = written(tmp_path / "nan.wav", samples, 8000, "FLOAT")
    fails(path, rf"sample {at} of channel 2 \(at {at / 8000:.3f} s\) is (not a number|infinite|1e\+30 times)")


def test_rates_that_cannot_be_worked_with(tmp_path):
    for rate in (4000, 768000):
        fails(written(tmp_path / "r.wav", noise(10), rate), f"sample rate is {rate} Hz")


@pytest.mark.parametrize("name", ["a.wav", "a.rf64", "a.aiff"])
def test_a_header_that_promises_more_than_the_file_holds(tmp_path, name):
    path = written(tmp_path / name, noise(5000, 2))
    content = path.read_bytes()
    for cut in (1, 6, 15000):
        path.write_bytes(content[:-cut])
        fails(path, r"is cut short: its header promises 3000\d bytes")


def test_a_damaged_flac(tmp_path):
    path = written(tmp_path / "a.flac", noise(20000))
    content = path.read_bytes()
    for changed in (content[:-1], content[: len(content) // 2], content[:9000] + b"\0" * 300 + content[9300:]):
        path.write_bytes(changed)
        fails(path, "damaged or cut short|is cut short")
    unknown = bytearray(content)
    unknown[21] &= 0xF0
    unknown[22:26] = bytes(4)
    path.write_bytes(unknown)
    fails(path, "gives no length")


def wave_with(path, frames=100, channels=1, data_size=None):
    """A 16-bit WAV with a header of our choice."""
    data = bytes(frames * 2)
    form = struct.pack("<HHIIHH", 1, channels, 48000, 96000, 2, 16)
    size = len(data) if data_size is None else data_size
    chunks = b"fmt " + struct.pack("<I", 16) + form + b"data" + struct.pack("<I", size) + data
    path.write_bytes(b"RIFF" + struct.pack("<I", 4 + len(chunks)) + b"WAVE" + chunks)
    return path


def test_odd_headers(tmp_path):
    path = tmp_path / "a.wav"
    fails(wave_with(path, channels=0), "0 channels")
    fails(wave_with(path, frames=0), "holds no audio")
    fails(wave_with(path, data_size=0), "not have been closed properly")
    streamed = load_take(wave_with(path, data_size=0xFFFFFFFF))
    assert streamed.frames == 100
    assert "no length" in streamed.notes[0]


# ------------------------------------------------------------------ fuzz


@pytest.fixture(scope="module")
def small_files(tmp_path_factory):
    folder = tmp_path_factory.mktemp("small")
    kinds = [("PCM_16", "WAV"), ("FLOAT", "WAV"), ("PCM_24", "WAVEX"), ("PCM_24", "RF64"), ("PCM_24", "AIFF")]
    kinds.append(("PCM_16", "FLAC"))
    return [
        written(folder / f"{n}.bin", noise(40, 2), subtype=subtype, format=form).read_bytes()
        for n, (subtype, form) in enumerate(kinds)
    ]


def only_take_or_input_error(path, content):
    path.write_bytes(content)
    try:
        take = load_take(path)
    except InputError:
        return
    assert isinstance(take, Take)
    assert sum(len(block) for block in take.blocks(64)) == take.frames >= 1
    assert np.isfinite(take.volts_per_full_scale)


@pytest.mark.parametrize("which", range(6))
def test_a_file_cut_at_every_byte_is_a_take_or_one_sentence(tmp_path, small_files, which):
    content = small_files[which]
    for end in range(len(content)):
        path = tmp_path / "cut.bin"
        path.write_bytes(content[:end])
        with pytest.raises(InputError):
            load_take(path)


@settings(max_examples=300, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(
    which=st.integers(0, 5),
    changes=st.lists(st.tuples(st.integers(0, 119), st.integers(0, 255)), min_size=1, max_size=4),
)
def test_a_header_with_changed_bytes_is_a_take_or_one_sentence(tmp_path, small_files, which, changes):
    content = bytearray(small_files[which])
    for position, value in changes:
        content[position % len(content)] = value
    only_take_or_input_error(tmp_path / "fuzz.bin", bytes(content))


@settings(max_examples=100, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(
    content=st.binary(max_size=200),
    start=st.sampled_from([b"", b"RIFF\x40\0\0\0WAVEfmt ", b"FORM", b"fLaC", b"RF64"]),
)
def test_any_bytes_are_a_take_or_one_sentence(tmp_path, content, start):
    only_take_or_input_error(tmp_path / "fuzz.bin", start + content)
