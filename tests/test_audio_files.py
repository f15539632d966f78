"""Writing audio: round trips, the same bytes twice, RF64, dither, and nothing left behind when it fails."""

from __future__ import annotations

import errno
import os
import subprocess
import sys
import textwrap
import wave

import numpy as np
import pytest
import soundfile

from tackbench.audio import ScratchAudio, check_output, check_room, load_take, size_words, write_audio, written_beside
from tackbench.audio.files import audio_bytes
from tackbench.audio.quantize import Quantizer
from tackbench.audio.wave import WaveWriter
from tackbench.errors import InputError, WorkError


def noise(frames, channels=1, peak=0.9, seed=0):
    return np.random.default_rng(seed).uniform(-peak, peak, (frames, channels))


def pieces(samples, size=700):
    return (samples[start : start + size] for start in range(0, len(samples), size))


FORMATS = [
    ("a.wav", "PCM_24", 2**-23),
    ("a.wav", "PCM_16", 2**-15),
    ("a.WAV", "FLOAT", 2**-25),
    ("a.flac", "PCM_24", 2**-23),
    ("a.flac", "PCM_16", 2**-15),
    ("a.aiff", "PCM_24", 2**-23),
    ("a.aif", "PCM_16", 2**-15),
]


@pytest.mark.parametrize(("name", "subtype", "step"), FORMATS)
@pytest.mark.parametrize(("frames", "channels"), [(1, 1), (2001, 1), (1501, 3)])
def test_round_trip(tmp_path, name, subtype, step, frames, channels):
    samples = noise(frames, channels)
    result = write_audio(tmp_path / name, pieces(samples), 44100, channels, subtype)
    back, rate = soundfile.read(tmp_path / name, always_2d=True)
    assert rate == 44100
    assert back.shape == samples.shape
    assert np.max(np.abs(back - samples), initial=0) <= 1.5 * step  # half for rounding, one for the dither
    assert soundfile.info(tmp_path / name).subtype == subtype
    assert (result.frames, result.subtype, result.size) == (frames, subtype, (tmp_path / name).stat().st_size)
    assert result.peak == np.max(np.abs(samples), initial=0)
    assert result.size <= audio_bytes(frames, channels, subtype) or "flac" in name
    assert os.listdir(tmp_path) == [name]
    assert load_take(tmp_path / name).frames == frames


@pytest.mark.parametrize(("name", "subtype", "step"), FORMATS)
def test_two_runs_and_any_blocks_give_the_same_bytes(tmp_path, name, subtype, step):
    samples = noise(5000, 2)
    contents = set()
    for run, size in enumerate((1, 999, 5000, 5000)):
        write_audio(tmp_path / name, pieces(samples, size), 48000, 2, subtype, overwrite=run > 0)
        contents.add((tmp_path / name).read_bytes())
    assert len(contents) == 1


def test_a_plain_reader_of_the_standard_library_reads_it(tmp_path):
    codes = np.round(noise(101) * 2**15) / 2**15
    write_audio(tmp_path / "a.wav", [codes], 48000, 1, "PCM_16")
    with wave.open(str(tmp_path / "a.wav")) as file:
        assert (file.getnframes(), file.getframerate(), file.getsampwidth()) == (101, 48000, 2)
        assert np.array_equal(np.frombuffer(file.readframes(101), "<i2"), codes[:, 0] * 2**15)


def test_float_files_may_exceed_full_scale(tmp_path):
    samples = noise(100, peak=40.0)
    write_audio(tmp_path / "a.wav", [samples], 48000, 1, "FLOAT")
    assert np.array_equal(soundfile.read(tmp_path / "a.wav", dtype="float32")[0], samples[:, 0].astype("f4"))


# ------------------------------------------------------------------ dither


@pytest.mark.parametrize("bits", [16, 24])
def test_the_dither_is_triangular(bits):
    """Error of mean 0 and variance 1/4 of a squared step, whatever the value (1/12 rounding, 2/12 triangular)."""
    for value in (0.1, 0.25, 0.5, 0.73):
        codes = Quantizer(bits).codes(np.full((200000, 1), (100 + value) / 2 ** (bits - 1)))
        error = codes - (100 + value)
        assert np.mean(error) == pytest.approx(0, abs=0.006)  # five standard errors
        assert np.var(error) == pytest.approx(0.25, abs=0.006)
        assert np.max(np.abs(error)) <= 1.5


def test_samples_on_the_grid_pass_exactly_and_silence_stays_silent(tmp_path):
    codes = np.random.default_rng(1).integers(-(2**23), 2**23, (5000, 2)) / 2**23
    codes[:100] = 0.0
    write_audio(tmp_path / "a.wav", pieces(codes), 48000, 2)
    assert np.array_equal(soundfile.read(tmp_path / "a.wav")[0], codes)


def test_without_dither_samples_are_rounded_and_seeds_differ(tmp_path):
    samples = noise(3000)
    write_audio(tmp_path / "a.wav", [samples], 48000, 1, "PCM_16", dither=False)
    assert np.max(np.abs(soundfile.read(tmp_path / "a.wav")[0] - samples[:, 0])) <= 2**-16
    first, second = Quantizer(16, seed=1).codes(samples), Quantizer(16, seed=2).codes(samples)
    assert np.any(first != second)


# ------------------------------------------------------------------ RF64


@pytest.mark.parametrize("subtype", ["PCM_24", "FLOAT"])
def test_a_file_past_the_plain_limit_is_rf64(tmp_path, monkeypatch, subtype):
    samples = noise(1001, 3)
    monkeypatch.setattr("tackbench.audio.wave._is_long", lambda size: size > 5000)
    write_audio(tmp_path / "small.wav", [samples[:300]], 48000, 3, subtype)
    assert (tmp_path / "small.wav").read_bytes()[:4] == b"RIFF"
    write_audio(tmp_path / "long.wav", pieces(samples), 48000, 3, subtype)
    content = (tmp_path / "long.wav").read_bytes()
    assert content[:4] == b"RF64"
    info = soundfile.info(tmp_path / "long.wav")
    assert (info.format, info.frames, info.subtype) == ("RF64", 1001, subtype)
    assert load_take(tmp_path / "long.wav").frames == 1001
    (tmp_path / "cut.wav").write_bytes(content[:-20])
    with pytest.raises(InputError, match="cut short"):
        load_take(tmp_path / "cut.wav")


@pytest.mark.slow
def test_five_gibibytes(tmp_path):
    """A real file past 4 GiB, its silence a hole where the file system has holes."""
    path = tmp_path / "long.wav"
    with WaveWriter(path, 48000, 1, 2, is_float=False) as writer:
        writer._file.seek(5 << 30, os.SEEK_CUR)
        writer._data += 5 << 30
        writer.write(b"\x01\x02")
    assert soundfile.info(path).frames == (5 << 29) + 1
    take = load_take(path)
    assert (take.format, take.frames, take.peak) == ("RF64", (5 << 29) + 1, 0x201 / 2**15)


# ------------------------------------------------------------------ refusals


def refused(folder, error, match, *arguments, **options):
    before = {name: (folder / name).read_bytes() for name in os.listdir(folder) if (folder / name).is_file()}
    with pytest.raises(error, match=match) as caught:
        write_audio(*arguments, **options)
    assert "\n" not in str(caught.value)
    after = {name: (folder / name).read_bytes() for name in os.listdir(folder) if (folder / name).is_file()}
    assert after == before


@pytest.mark.parametrize("name", ["a.wav", "a.flac", "a.aiff"])
@pytest.mark.parametrize("overwrite", [False, True])
def test_whatever_fails_leaves_nothing_and_keeps_the_old_file(tmp_path, name, overwrite):
    target = tmp_path / name
    if overwrite:
        target.write_bytes(b"the old one")

    def blocks(ending):
        yield noise(100)
        if isinstance(ending, BaseException):
            raise ending
        yield np.array([[ending]])

    for ending, error, match in [
        (np.nan, WorkError, "not a finite number"),
        (np.inf, WorkError, "not a finite number"),
        (
            1.3,
            InputError,
            r"2\.3 dB over full scale and would clip in 24 bits; write a 32-bit float .wav, or use --level",
        ),
        (-1.0001, InputError, "would clip"),
        (KeyboardInterrupt(), KeyboardInterrupt, None),
        (WorkError("no convergence"), WorkError, "no convergence"),
        (OSError(errno.ENOSPC, "No space left on device"), WorkError, "no room left"),
    ]:
        refused(tmp_path, error, match, target, blocks(ending), 48000, 1, overwrite=overwrite)


def test_full_scale_itself_does_not_clip(tmp_path):
    write_audio(tmp_path / "a.wav", [np.array([[1.0], [-1.0]])], 48000, 1, "PCM_16")
    assert soundfile.read(tmp_path / "a.wav", dtype="int16")[0].tolist() == [32767, -32768]


def test_float_beyond_single_precision_is_refused(tmp_path):
    refused(tmp_path, WorkError, "finite", tmp_path / "a.wav", [np.array([[1e39]])], 48000, 1, "FLOAT")


def test_places_that_will_not_do(tmp_path):
    samples = [noise(10)]
    (tmp_path / "old.wav").write_bytes(b"old")
    (tmp_path / "folder.wav").mkdir()
    for name, match in [
        ("old.wav", "already exists; .*--overwrite"),
        ("folder.wav", "is a folder"),
        ("none/a.wav", "there is no such folder"),
        ("old.wav/a.wav", "is not a folder"),
        ("a.mp3", "'.mp3' is no audio format"),
        ("a", "its name has no ending"),
        ("x" * 5000 + ".wav", "name too long|cannot be"),
    ]:
        refused(tmp_path, InputError, match, tmp_path / name, samples, 48000, 1)
    refused(tmp_path, InputError, "holds no 32-bit float", tmp_path / "a.flac", samples, 48000, 1, "FLOAT")
    refused(tmp_path, InputError, "no sample format", tmp_path / "a.wav", samples, 48000, 1, "PCM_20")
    refused(tmp_path, InputError, "at most 8 channels", tmp_path / "a.flac", [noise(3, 9)], 48000, 9)
    refused(tmp_path, InputError, "sample rate is 0", tmp_path / "a.wav", samples, 0, 1)
    refused(tmp_path, WorkError, "not one sample", tmp_path / "a.wav", [], 48000, 1)
    refused(tmp_path, WorkError, "not one sample", tmp_path / "a.flac", [noise(0)], 48000, 1)
    with pytest.raises(InputError, match="zero byte"):
        check_output("a\0b.wav")
    assert check_output(tmp_path / "old.wav", overwrite=True) == tmp_path / "old.wav"


def test_a_folder_that_may_not_be_written(tmp_path, monkeypatch):
    def refuse(*arguments):
        raise PermissionError(errno.EACCES, "Permission denied")

    monkeypatch.setattr("tackbench.audio.place.os.open", refuse)  # as root, permissions do not hold
    refused(tmp_path, InputError, "may not be written; choose a folder", tmp_path / "a.wav", [noise(4)], 48000, 1)


def test_a_file_that_appears_meanwhile_stays(tmp_path):
    def blocks():
        (tmp_path / "a.wav").write_bytes(b"somebody else's")
        yield noise(10)

    with pytest.raises(InputError, match="already exists"):
        write_audio(tmp_path / "a.wav", blocks(), 48000, 1)
    assert (tmp_path / "a.wav").read_bytes() == b"somebody else's"
    assert os.listdir(tmp_path) == ["a.wav"]


def test_a_file_system_without_hard_links(tmp_path, monkeypatch):
    def refuse(*arguments):
        raise OSError(errno.EPERM, "Operation not permitted")

    monkeypatch.setattr("tackbench.audio.place.os.link", refuse)
    write_audio(tmp_path / "a.wav", [noise(10)], 48000, 1)
    assert os.listdir(tmp_path) == ["a.wav"]
    with pytest.raises(InputError, match="already exists"), written_beside(tmp_path / "a.wav") as beside:
        beside.write_text("new")
    assert soundfile.info(tmp_path / "a.wav").frames == 10


@pytest.mark.skipif(sys.platform == "win32", reason="limits a process by POSIX means")
@pytest.mark.parametrize("name", ["a.wav", "a.flac", "a.aiff"])
def test_a_disk_that_fills_up(tmp_path, name):
    """A limit on the size of files stands for the full disk; it hits the compiled library's own writes as well."""
    script = f"""
        import resource, signal, numpy as np
        from tackbench.audio import write_audio
        from tackbench.errors import WorkError
        signal.signal(signal.SIGXFSZ, signal.SIG_IGN)
        resource.setrlimit(resource.RLIMIT_FSIZE, (100000, 100000))
        blocks = (np.random.default_rng(n).uniform(-1, 1, (5000, 1)) for n in range(40))
        try:
            write_audio({str(tmp_path / name)!r}, blocks, 48000, 1)
        except WorkError as error:
            print(error)
    """
    done = subprocess.run([sys.executable, "-c", textwrap.dedent(script)], capture_output=True, text=True, check=True)
    assert done.stdout.startswith(str(tmp_path / name))
    assert "no room left" in done.stdout or "could not be written" in done.stdout
    assert done.stderr == ""
    assert os.listdir(tmp_path) == []


def test_room_is_checked_before(tmp_path):
    check_room(tmp_path / "not" / "yet", 1000)
    with pytest.raises(WorkError, match=r"1e\+06 TB are needed|1000000 TB"):
        check_room(tmp_path, 10**18)
    assert [size_words(n) for n in (0, 999, 1500, 3.1e6, 5e9, 2e12)] == [
        "0 bytes",
        "999 bytes",
        "1.5 kB",
        "3.1 MB",
        "5 GB",
        "2 TB",
    ]
    assert audio_bytes(48000, 2, "PCM_24") == pytest.approx(288000, abs=5000)


# ------------------------------------------------------------------ scratch


def test_the_scratch_store_gives_back_what_it_took(tmp_path):
    samples = np.random.default_rng(3).standard_normal((5003, 2)) * 1e3
    with ScratchAudio(tmp_path, 2) as store:
        for part in pieces(samples, 701):
            store.append(part)
        assert store.frames == 5003
        for size in (1, 640, 9999):
            assert np.array_equal(np.concatenate(list(store.blocks(size))), samples)
        first, second = store.blocks(100), store.blocks(100)  # interleaved readers do not disturb each other
        assert np.array_equal(next(first), next(second))
        assert np.array_equal(next(first), samples[100:200])
        block = next(second)
        block *= 2  # writable, and its own
    assert os.listdir(tmp_path) == []


def test_the_scratch_store_goes_on_an_interrupt_and_refuses_what_is_no_number(tmp_path):
    def interrupted():
        with ScratchAudio(tmp_path, 1) as store:
            store.append(noise(10))
            raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        interrupted()
    assert os.listdir(tmp_path) == []
    with ScratchAudio(tmp_path, 1) as store:
        with pytest.raises(WorkError, match="not a finite number"):
            store.append(np.array([[np.nan]]))
        with pytest.raises(ValueError, match="shape"):
            store.append(np.zeros((3, 2)))
        store.append(np.zeros((0, 1)))
        assert list(store.blocks(10)) == []
    with pytest.raises(WorkError, match="could not be written"):
        ScratchAudio(tmp_path / "none", 1)
