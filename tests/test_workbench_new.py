"""The stage file to start from: it is sound, explains itself, and never overwrites anything."""

from __future__ import annotations

import tomllib
from pathlib import Path

import pytest

from tackbench.cli.edge import run
from tackbench.network import response
from tackbench.stage import load_stage


@pytest.fixture(autouse=True)
def _in_a_folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)


def test_the_new_stage_is_sound_in_every_position(capsys: pytest.CaptureFixture[str]) -> None:
    assert run(["new", "my-first_boost"]) == 0
    assert (
        "written: my-first_boost.toml\nnext: tackbench check --stage my-first_boost.toml" in capsys.readouterr().out
    )
    stage = load_stage("my-first_boost.toml")
    assert stage.title == "My first boost"
    assert stage.position_faults() == ()
    assert stage.variant().over_limits == ()
    for mod in stage.mods.values():
        for position in mod.positions:
            assert abs(response(stage.variant({mod.name: position}).circuit, [1e3])[0]) > 2.0
    assert run(["check", "--stage", "my-first_boost.toml"]) == 0


def test_it_shows_every_table_and_most_lines_say_what_they_mean() -> None:
    assert run(["new", "x.toml"]) == 0
    text = Path("x.toml").read_text(encoding="utf-8")
    assert set(tomllib.loads(text)) == {
        "format",
        "title",
        "about",
        "input",
        "output",
        "supply",
        "parts",
        "controls",
        "mods",
    }
    assert text.count("#") > 25
    for word in ("lift", "link", "fit.", "count", "taper", "rails", "rated", "npn", "n-mosfet"):
        assert word in text


@pytest.mark.parametrize("name", ["x", "x.toml"])
def test_nothing_is_ever_overwritten(name: str, capsys: pytest.CaptureFixture[str]) -> None:
    Path("x.toml").write_text("mine", encoding="utf-8")
    assert run(["new", name]) == 2
    assert "x.toml: already exists; choose another name; nothing is ever overwritten" in capsys.readouterr().err
    assert Path("x.toml").read_text(encoding="utf-8") == "mine"


def test_a_dangling_link_is_not_written_through(capsys: pytest.CaptureFixture[str]) -> None:
    Path("x.toml").symlink_to("elsewhere")
    assert run(["new", "x"]) == 2
    assert not Path("elsewhere").exists()
    assert "already exists" in capsys.readouterr().err


@pytest.mark.parametrize(
    ("name", "sentence"),
    [
        (" ", "cannot name a stage file"),
        (".toml", "cannot name a stage file"),
        ("no/x", "there is no such folder"),
        ("a\0b", "cannot name a stage file"),
        ("x" * 300, "name"),
    ],
)
def test_names_that_cannot_be_used_are_said(name: str, sentence: str, capsys: pytest.CaptureFixture[str]) -> None:
    assert run(["new", name]) in (1, 2)
    assert sentence in capsys.readouterr().err
    assert list(Path().iterdir()) == []


@pytest.mark.parametrize("name", ['a "b"', "tab\\x", "x.y", "½ way", "a{b}"])
def test_odd_names_make_sound_files(name: str) -> None:
    assert run(["new", name]) == 0
    assert load_stage(Path(f"{name}.toml")).title
