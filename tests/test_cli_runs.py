"""The commands as a shell runs them: what they print and write, and how they end when they are interrupted."""

from __future__ import annotations

import json
import os
import re
import shlex
import signal
import subprocess
import sys
import time
import tomllib
from pathlib import Path

import numpy as np
import pytest
import soundfile

from tackbench.cli.edge import run
from tackbench.cli.registry import COMMANDS
from tackbench.stage import shipped_stages

RATE = 48000
ROOT = Path(__file__).resolve().parents[1]
README = (ROOT / "README.md").read_text(encoding="utf-8")


@pytest.fixture
def here(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    monkeypatch.chdir(tmp_path)
    t = np.arange(2400) / RATE
    soundfile.write("mytake.wav", 0.5 * np.sin(2 * np.pi * 220 * t) * np.exp(-9 * t), RATE, subtype="PCM_24")
    return tmp_path


def readme_commands() -> list[str]:
    """The indented lines of the README that are command lines of ours."""
    found = re.findall(r"^    (tackbench .+)$", README, flags=re.MULTILINE)
    assert len(found) > 8
    return found


@pytest.mark.parametrize("line", readme_commands())
def test_every_command_of_the_readme_runs(here: Path, line: str, capsys: pytest.CaptureFixture[str]) -> None:
    own = [block for block in re.findall(r"```toml\n(.*?)```", README, flags=re.DOTALL) if "[parts]" in block]
    for name, block in zip(("FILE.toml", "paper-boost.toml"), own, strict=False):
        Path(name).write_text(block, encoding="utf-8")
    assert run(shlex.split(line)[1:]) == 0, capsys.readouterr().err


def test_the_stage_files_of_the_readme_are_sound(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    blocks = [block for block in re.findall(r"```toml\n(.*?)```", README, flags=re.DOTALL) if "[parts]" in block]
    assert blocks
    for block in blocks:
        tomllib.loads(block)
        Path("own.toml").write_text(block, encoding="utf-8")
        assert run(["check", "--stage", "own.toml"]) == 0, capsys.readouterr().err


def test_the_python_of_the_readme_runs(here: Path) -> None:
    (block,) = re.findall(r"```python\n(.*?)```", README, flags=re.DOTALL)
    done = subprocess.run([sys.executable, "-c", block], capture_output=True, text=True)
    assert done.returncode == 0, done.stderr
    assert (here / "out" / "shootout.json").is_file()


def test_every_command_explains_itself_with_its_units(capsys: pytest.CaptureFixture[str]) -> None:
    assert run(["--help"]) == 0
    listed = capsys.readouterr().out
    for name in COMMANDS:
        assert name in listed
        assert run([name, "--help"]) == 0
        assert "Usage: tackbench" in capsys.readouterr().out


def test_a_shootout_says_what_a_user_must_know(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    loud = np.clip(1.5 * np.sin(2 * np.pi * 110 * np.arange(9600) / RATE), -1, 1)
    soundfile.write("hot.wav", loud, RATE, subtype="PCM_16")
    words = ["shootout", "hot.wav", "--try", "supply=24", "--try", "D2=1N4148", "--try", "U1=TLC2272", "-o", "out"]
    assert run([*words, "--with", "supply=15"]) == 0
    out, err = capsys.readouterr()
    text = " ".join((out + err).split())
    for said in ("calibration assumed", "full scale", "above the stage's own 9 V", "solver (standard)"):
        assert said in text
    assert re.search(r"D1 stays \S+: asymmetric", text)
    assert "5 files" in text
    assert " MB" in text
    assert max(len(line) for line in out.splitlines()) <= 100
    data = json.loads(Path("out/shootout.json").read_text(encoding="utf-8"))
    assert data["schema"] == "tackbench.shootout"


def test_over_limit_cells_are_marked_and_left_out(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert run(["shootout", "mytake.wav", "--with", "supply=18", "--try", "U1=TL072,TLC2272", "-o", "out"]) == 0
    out = capsys.readouterr().out
    assert "TLC2272" in out
    assert "16 V" in out
    data = json.loads(Path("out/shootout.json").read_text(encoding="utf-8"))
    assert [bool(entry["file"]) for entry in data["variants"]] == [True, True, False]


@pytest.mark.parametrize("name", shipped_stages())
def test_check_is_sound_for_every_stage(name: str, capsys: pytest.CaptureFixture[str]) -> None:
    assert run(["check", "--stage", name]) == 0
    out = capsys.readouterr().out
    for said in (" V", "Supply current", "Small-signal gain", "-3 dB"):
        assert said in out


def test_lists_name_everything(capsys: pytest.CaptureFixture[str]) -> None:
    assert run(["stages"]) == 0
    listed = capsys.readouterr().out
    assert all(name in listed for name in shipped_stages())
    for words in (["stages", "two-voice"], ["parts"], ["parts", "diode"], ["parts", "1N4148"]):
        assert run(words) == 0
    assert "source" in capsys.readouterr().out.lower()


@pytest.mark.parametrize("rate", [8000, 44100, 384000])
@pytest.mark.parametrize("channels", [1, 8])
def test_render_keeps_rate_channels_and_length(here: Path, rate: int, channels: int) -> None:
    samples = 0.3 * np.sin(2 * np.pi * 200 * np.arange(rate // 50) / rate)[:, None] * np.ones(channels)
    soundfile.write("in.wav", samples, rate, subtype="FLOAT")
    assert run(["render", "in.wav", "-o", "out.wav", "--level", "as-built", "--full-scale-volts", "1"]) == 0
    got, got_rate = soundfile.read("out.wav", always_2d=True)
    assert (got_rate, got.shape) == (rate, samples.shape)
    assert np.all(np.isfinite(got))
    assert np.all(got == got[:, :1])


def test_the_installed_program_runs_and_version_is_told() -> None:
    done = subprocess.run([sys.executable, "-m", "tackbench.cli", "--version"], capture_output=True, text=True)
    assert done.stdout.startswith("tackbench ")


@pytest.mark.skipif(sys.platform == "win32", reason="an interrupt is sent as POSIX has it")
@pytest.mark.parametrize("words", [["shootout", "long.wav", "-o", "out"], ["render", "long.wav", "-o", "out.wav"]])
@pytest.mark.parametrize(("number", "status"), [(signal.SIGINT, 130), (signal.SIGTERM, 143)])
def test_an_interrupt_leaves_nothing_behind(here: Path, words: list[str], number: int, status: int) -> None:
    rng = np.random.default_rng(1)
    soundfile.write("long.wav", 0.5 * rng.uniform(-1, 1, 60 * RATE), RATE, subtype="PCM_16")
    before = set(here.rglob("*"))
    environment = {**os.environ, "TACKBENCH_TRACEBACK": ""}
    process = subprocess.Popen(
        [sys.executable, "-m", "tackbench.cli", *words, "--quality", "best"],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        env=environment,
    )
    assert process.stderr is not None
    while "Two-voice" not in process.stderr.readline():  # said just before the work begins
        assert process.poll() is None
    time.sleep(0.5)
    process.send_signal(number)
    _, err = process.communicate(timeout=60)
    assert process.returncode == status, err
    assert "Traceback" not in err
    assert set(here.rglob("*")) == before
