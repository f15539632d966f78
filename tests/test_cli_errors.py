"""Every wrong command line ends in one sentence that names what is wrong and what would be right; nothing is left."""

from __future__ import annotations

import os
from pathlib import Path

import numpy as np
import pytest
import soundfile

from tackbench.cli.edge import run

RATE = 48000

STAGE = """
format = 1
title = "Own"
[input]
node = "in"
[output]
node = "out"
[supply]
node = "vcc"
volts = 9
[parts]
R1 = {{ resistor = "1k", pins = ["in", "out"] }}
{more}
"""


@pytest.fixture
def here(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A folder with a good take and a set of bad ones; the current directory."""
    monkeypatch.chdir(tmp_path)
    t = np.arange(4800) / RATE
    soundfile.write("take.wav", 0.5 * np.sin(2 * np.pi * 220 * t) * np.exp(-9 * t), RATE, subtype="PCM_24")
    Path("empty.wav").write_bytes(b"")
    Path("text.wav").write_text("this is no sound\n")
    Path("cut.wav").write_bytes(Path("take.wav").read_bytes()[:4000])
    soundfile.write("nan.wav", np.array([0.0, np.nan, 0.1]), RATE, subtype="FLOAT")
    Path("folder").mkdir()
    Path("taken.wav").write_bytes(b"mine")
    return tmp_path


def fails(capsys: pytest.CaptureFixture[str], words: list[str], *says: str, status: int = 2) -> str:
    """Run; exactly one sentence on stderr with these words in it, and the exit status."""
    before = {path: path.read_bytes() for path in Path.cwd().rglob("*") if path.is_file()}
    assert run(words) == status
    out, err = capsys.readouterr()
    lines = [line for line in err.splitlines() if line.startswith("tackbench: ")]
    assert len(lines) == 1, err
    assert "Traceback" not in out + err
    for word in says:
        assert word in lines[0], lines[0]
    after = {path: path.read_bytes() for path in Path.cwd().rglob("*") if path.is_file()}
    assert after == before
    return lines[0]


@pytest.mark.parametrize(
    ("take", "says"),
    [
        ("absent.wav", ["absent.wav", "no such file", "WAV"]),
        ("folder", ["folder", "is a folder"]),
        ("empty.wav", ["empty.wav"]),
        ("text.wav", ["text.wav", "cannot be read"]),
        ("cut.wav", ["cut.wav", "promises"]),
        ("nan.wav", ["nan.wav", "not a number"]),
    ],
)
@pytest.mark.parametrize("command", [["shootout"], ["render", "-o", "out.wav"]])
def test_takes_that_are_none(
    here: Path, capsys: pytest.CaptureFixture[str], command: list[str], take: str, says: list[str]
) -> None:
    fails(capsys, [command[0], take, *command[1:]], *says)


@pytest.mark.parametrize(
    ("choice", "says"),
    [
        ("clp=germanium", ["clp", "did you mean 'clip'"]),
        ("clip=germanum", ["germanum", "did you mean 'germanium'"]),
        ("gian=0.5", ["gian", "did you mean 'gain'"]),
        ("gain=1.5", ["gain", "0 to 1"]),
        ("gain=lots", ["gain", "lots"]),
        ("R88=1k", ["R88"]),
        ("D1=1N4184", ["D1", "did you mean '1N4148'"]),
        ("C5=banana", ["C5", "banana"]),
        ("C5=-4n7", ["C5"]),
        ("R5=4n7", ["R5"]),
        ("supply=abc", ["supply", "abc", "volts"]),
        ("supply=nan", ["supply", "nan"]),
        ("supply=0", ["supply"]),
        ("temperature=warm", ["temperature", "warm"]),
        ("temperature=-400", ["temperature"]),
        ("D1+R1=1N4148", ["R1"]),
        ("clip", ["clip", "="]),
        ("=5", ["="]),
        ("U1=TLC2272", ["TLC2272", "16 V"]),
    ],
)
@pytest.mark.parametrize("option", ["--with", "--try"])
def test_choices_that_cannot_be(
    here: Path, capsys: pytest.CaptureFixture[str], option: str, choice: str, says: list[str]
) -> None:
    more = ["--with", "supply=24"] if "TLC" in choice else []
    if option == "--try" and more:
        return  # a variant over its limits is a marked cell of a shootout, not an error
    fails(capsys, ["shootout", "take.wav", option, choice, *more, "-o", "out"], *says)


@pytest.mark.parametrize(
    ("options", "says"),
    [
        (["--full-scale-volts", "0"], ["--full-scale-volts", "above 0"]),
        (["--full-scale-volts", "nan"], ["--full-scale-volts"]),
        (["--full-scale-volts", "1", "--peak-volts", "1"], ["--full-scale-volts", "--peak-volts", "one calibration"]),
        (["--pickup", "hot", "--full-scale-dbu", "4"], ["--pickup", "one calibration"]),
        (["--input-gain-db", "3"], ["--input-gain-db", "--full-scale-dbu"]),
        (["--pickup", "scorching"], ["--pickup", "hot"]),
        (["--quality", "superb"], ["--quality", "standard"]),
        (["--threads", "0"], ["--threads"]),
        (["--stage", "two-voise"], ["two-voise", "did you mean 'two-voice'"]),
        (["--stage", "absent.toml"], ["absent.toml", "no such file"]),
        (["--stage", "folder"], ["folder"]),
        (["--loudness"], ["--loudness"]),
    ],
)
def test_options_that_cannot_be(
    here: Path, capsys: pytest.CaptureFixture[str], options: list[str], says: list[str]
) -> None:
    fails(capsys, ["shootout", "take.wav", "-o", "out", *options], *says)


@pytest.mark.parametrize(
    ("output", "options", "says"),
    [
        ("taken.wav", [], ["taken.wav", "--overwrite"]),
        ("take.wav", ["--overwrite"], ["take.wav"]),
        ("nowhere/out.wav", [], ["nowhere", "no such folder"]),
        ("folder", [], ["folder"]),
        ("out.mp3", [], ["out.mp3", ".wav"]),
        ("out", [], ["out", ".wav"]),
        (
            "out.flac",
            ["--level", "as-built", "--with", "clip=off", "--peak-volts", "0.05"],
            ["--level peak", "float"],
        ),
    ],
)
def test_outputs_that_cannot_be(
    here: Path, capsys: pytest.CaptureFixture[str], output: str, options: list[str], says: list[str]
) -> None:
    fails(capsys, ["render", "take.wav", "-o", output, *options], *says)


@pytest.mark.parametrize(
    ("more", "says"),
    [
        ('C1 = { capacitor = "1n", pins = ["out", "gate"] }\nQ1 = { n-jfet = "J201", drain = "vcc", gate = "gate", '
         'source = "0" }', ["Q1", "bias path"]),
        ("", ["supply", "vcc"]),
        ('D1 = { diode = "1N4184", anode = "out", cathode = "vcc" }', ["D1", "1N4148"]),
        ('R2 = { resistor = "1k", pins = ["out"] }', ["R2"]),
        ('R2 = { resistr = "1k", pins = ["out", "vcc"] }', ["R2", "resistor"]),
        ('R2 = { resistor = "1k", pins = ["out", "vcc"], colour = "red" }', ["R2", "colour"]),
        ('R2 = { resistor = "1k", pins = ["out", "vcc"] }\n[controls]\ngain = { label = "Gain" }', ["gain"]),
        ('R2 = { resistor = "1k", pins = ["out", "vcc"]', ["own.toml"]),
        ('R2 = { resistor = "1k", pins = ["out", "vcc"] }\n[mods.a]\nat = "x"\n[mods.a.positions.x]\n'
         'link = [["vcc", "0"]]', ["a"]),
    ],
)  # fmt: skip
def test_stage_files_that_cannot_be(
    here: Path, capsys: pytest.CaptureFixture[str], more: str, says: list[str]
) -> None:
    Path("own.toml").write_text(STAGE.format(more=more))
    for words in (["check", "--stage", "own.toml"], ["shootout", "take.wav", "--stage", "own.toml", "-o", "out"]):
        fails(capsys, words, "own.toml", *says)


@pytest.mark.parametrize("content", [b"", b"\x00\xff\xfe", b"format = 2\n", b"[parts]\n", b"format = 1\n" * 2])
def test_files_that_are_no_stage(here: Path, capsys: pytest.CaptureFixture[str], content: bytes) -> None:
    Path("own.toml").write_bytes(content)
    fails(capsys, ["check", "--stage", "own.toml"], "own.toml")


def test_a_folder_that_holds_something_is_left_alone(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    Path("folder/notes.txt").write_text("mine")
    fails(capsys, ["shootout", "take.wav", "-o", "folder"], "folder", "--overwrite")


def test_no_room_is_said_before_the_work(
    here: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    usage = type("Usage", (), {"total": 10**9, "used": 10**9, "free": 1000})
    monkeypatch.setattr("shutil.disk_usage", lambda path: usage)
    fails(capsys, ["shootout", "take.wav", "-o", "out"], "room", status=1)
    fails(capsys, ["render", "take.wav", "-o", "out.wav"], "room", status=1)


def test_an_unknown_command_names_the_nearest(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    fails(capsys, ["shootuot"], "shootuot", "shootout")
    fails(capsys, ["parts", "1N4184"], "1N4148")
    fails(capsys, ["stages", "two-voicee"], "two-voice")
    fails(capsys, ["shootout"], "TAKE")


def test_a_circuit_that_cannot_be_solved_is_a_failure_of_the_work(
    here: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    from tackbench.kernel import plain

    advance = plain.advance

    def gives_up(*arguments: np.ndarray) -> int:
        if len(arguments[2]) < 4:  # the small circuit that only warms up
            return int(advance(*arguments))
        arguments[-1 - len(plain.workspace(1, 1, 1))][:] = (500, 0.5, 1)
        return 1

    monkeypatch.setenv("TACKBENCH_KERNEL", "plain")
    monkeypatch.setattr(plain, "advance", gives_up)
    fails(capsys, ["render", "take.wav", "-o", "out.wav"], "did not settle", "U1", status=1)
    assert not Path("out.wav").exists()


@pytest.mark.skipif(os.name == "nt" or os.geteuid() == 0, reason="root may write anywhere")
def test_a_folder_that_may_not_be_written(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    Path("folder").chmod(0o500)
    fails(capsys, ["render", "take.wav", "-o", "folder/out.wav"], "folder", status=1)
