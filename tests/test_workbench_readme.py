"""The README's worked example is a sound stage, and the figures printed beside it are the ones that come out."""

from __future__ import annotations

import re
import shlex
from pathlib import Path

import pytest

from tackbench.cli.edge import run
from tackbench.network import operating_point
from tackbench.stage import load_stage

README = (Path(__file__).resolve().parents[1] / "README.md").read_text(encoding="utf-8")
BLOCKS = re.findall(r"```toml\n(.*?)```", README, re.DOTALL)


@pytest.fixture(autouse=True)
def _in_a_folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)


@pytest.mark.parametrize("text", BLOCKS, ids=range(len(BLOCKS)))
def test_every_stage_file_in_the_readme_is_sound(text: str) -> None:
    Path("x.toml").write_text(text, encoding="utf-8")
    assert load_stage("x.toml").position_faults() == ()


def test_the_worked_example_gives_what_is_printed(capsys: pytest.CaptureFixture[str]) -> None:
    (text,) = [block for block in BLOCKS if "Paper boost" in block]
    Path("paper-boost.toml").write_text(text, encoding="utf-8")
    assert run(["check", "--stage", "paper-boost.toml"]) == 0
    said = capsys.readouterr().out
    printed = re.search(r"```\n(  b .*?)```", README, re.DOTALL)
    assert printed is not None
    for line in printed[1].splitlines():
        assert line in said
    sunk = operating_point(load_stage("paper-boost.toml").variant(R1="820k").circuit).node_volts["c"]
    assert sunk == pytest.approx(4.1, abs=0.05)


def test_the_bench_commands_in_the_readme_run() -> None:
    lines = re.findall(r"^    tackbench (\S+-from-meter .*)$", README, re.MULTILINE)
    assert len(lines) >= 4
    for line in lines:
        assert run(shlex.split(line)) == 0, line
    assert len(list(Path("parts").iterdir())) == len(lines)


def test_the_choices_in_the_readme_can_be_made() -> None:
    for battery in ("fresh", "half", "tired", "tired carbon-zinc", "adapter"):
        load_stage("charge-pump").variant(battery=battery)
    for volume in (1, 0.7, 0.5, 0.3):
        load_stage("fuzz-germanium").variant({"guitar": "humbucker", "guitar-volume": volume})
    load_stage("two-voice").variant({"D1+D2": "1N4148 low"})
