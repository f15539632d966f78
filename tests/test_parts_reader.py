"""Part files: what is read, what fills in, what replaces what, and what is refused with a sentence."""

from __future__ import annotations

from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from tackbench.errors import InputError
from tackbench.parts import load_parts, models_root, parse_toml
from tackbench.parts.entries import read_entries

DIODE = """
["X100"]
family = "diode"
saturation_current = "2.5n"
ideality = 1.75
series_ohms = "R6"
aliases = ["X100A", "test diode"]
about = "A diode for tests."
source = "none"
basis = "typical"
from_memory = true
fit_error_millivolts = 3
points = [[0.5, "100u"], ["0.6 V", 1e-3]]
low = { saturation_current = 5e-9, about = "hot bag" }
high = { saturation_current = 1e-9 }
"""
JFET = '["X200"]\nfamily = "jfet"\npolarity = "p"\ndrain_current = "1m"\npinch_off_volts = 1.5\n'


def folder(place: Path, **files: str) -> Path:
    place.mkdir(exist_ok=True)
    for name, text in files.items():
        (place / f"{name}.toml").write_text("format = 1\n" + text, encoding="utf-8")
    return place


def test_an_entry_is_read_in_full(tmp_path: Path) -> None:
    entry = load_parts(folder(tmp_path / "p", own=DIODE)).find("x100", "diode")
    assert (entry.name, entry.kind, entry.family, entry.polarity) == ("X100", "diode", "diode", "")
    assert entry.parameters["saturation_current"] == 2.5e-9
    assert entry.parameters["series_ohms"] == 0.6
    assert entry.parameters["material"] == "silicon"
    assert entry.parameters["band_gap"] == 1.11
    assert entry.parameters["temperature_exponent"] == 3.0
    assert "breakdown_volts" not in entry.parameters
    assert entry.points == ((0.5, 100e-6), (0.6, 1e-3))
    assert entry.low is not None
    assert entry.high is not None
    assert (entry.low["saturation_current"], entry.low["ideality"]) == (5e-9, 1.75)
    assert (entry.high["saturation_current"], entry.low_about) == (1e-9, "hot bag")
    assert entry.from_memory
    assert entry.own
    assert entry.provenance()["fit_error_millivolts"] == 3.0


def test_names_and_aliases_are_found_in_any_case(tmp_path: Path) -> None:
    library = load_parts(folder(tmp_path / "p", own=DIODE + JFET))
    assert library.find("TEST Diode", "diode") is library.find("x100a", "diode")
    assert library.find("x200", "p-jfet").polarity == "p"
    assert [entry.name for entry in library.entries("p-jfet") if entry.own] == ["X200"]


def test_a_misspelt_name_gets_the_nearest_and_a_wrong_kind_the_right_one(tmp_path: Path) -> None:
    library = load_parts(folder(tmp_path / "p", own=DIODE + JFET))
    with pytest.raises(InputError, match="no diode 'X10O'; did you mean 'X100'"):
        library.find("X10O", "diode")
    with pytest.raises(InputError, match="X200 is of kind p-jfet, not n-jfet"):
        library.find("X200", "n-jfet")


def test_later_folders_replace_entries_of_earlier_ones(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    by_variable = folder(tmp_path / "variable", a=DIODE)
    neighbour = folder(tmp_path / "neighbour", a=DIODE.replace("1.75", "1.8"))
    by_option = folder(tmp_path / "option", a=DIODE.replace("1.75", "1.9"))
    monkeypatch.setenv("TACKBENCH_PARTS", str(by_variable))
    assert load_parts().find("X100", "diode").parameters["ideality"] == 1.75
    assert load_parts(neighbour=neighbour).find("X100", "diode").parameters["ideality"] == 1.8
    assert load_parts(by_option, neighbour).find("X100", "diode").parameters["ideality"] == 1.9
    assert load_parts(neighbour=tmp_path / "absent").find("X100", "diode").parameters["ideality"] == 1.75


@pytest.mark.parametrize("absent", ["absent", "file.toml"])
def test_a_parts_folder_that_is_none_is_an_error(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, absent: str
) -> None:
    (tmp_path / "file.toml").write_text("format = 1\n", encoding="utf-8")
    with pytest.raises(InputError, match="names no folder"):
        load_parts(tmp_path / absent)
    monkeypatch.setenv("TACKBENCH_PARTS", str(tmp_path / absent))
    with pytest.raises(InputError, match="TACKBENCH_PARTS names no folder"):
        load_parts()


def test_two_entries_of_one_name_in_a_folder_are_an_error(tmp_path: Path) -> None:
    second = DIODE.replace('"X100"', '"Y1"').replace("X100A", "x100")
    with pytest.raises(InputError, match=r"b\.toml, Y1: the name 'x100' is taken by X100"):
        load_parts(folder(tmp_path / "p", a=DIODE, b=second))


@pytest.mark.parametrize(
    ("change", "key", "words"),
    [
        (("ideality = 1.75", "idealty = 1.75"), "idealty", "did you mean 'ideality'"),
        (("ideality = 1.75", ""), "ideality", "missing"),
        (("ideality = 1.75", "ideality = -1"), "ideality", "above zero"),
        (('"2.5n"', '"2.5 nF"'), "saturation_current", "farads"),
        (('"2.5n"', "nan"), "saturation_current", "finite"),
        (('family = "diode"', 'family = "dyode"'), "family", "did you mean 'diode'"),
        (('family = "diode"', ""), "family", "missing"),
        (('family = "diode"', 'family = "diode"\npolarity = "n"'), "polarity", "no polarity"),
        (('family = "diode"', 'family = "jfet"'), "polarity", "missing"),
        (("ideality = 1.75", 'ideality = 1.75\nmaterial = "led"'), "band_gap", "band gap"),
        (("ideality = 1.75", 'ideality = 1.75\nmaterial = "silicn"'), "material", "did you mean 'silicon'"),
        (("ideality = 1.75", "ideality = 1.75\nbreakdown_volts = 5"), "breakdown_current", "both or neither"),
        (("ideality = 1.75", "ideality = 1.75\nbreakdown_current = 5"), "breakdown_volts", "both or neither"),
        (("ideality = 1.75", "ideality = 1.75\nbreakdown_ideality = 5"), "breakdown_ideality", "without a breakdown"),
        (("from_memory = true", 'from_memory = "yes"'), "from_memory", "true or false"),
        (("points = [[0.5, ", "points = [[0.5, 1, "), "points", "pairs"),
        (("low = {", "low = { idealty = 2,"), "idealty", "did you mean 'ideality'"),
        (("low = { saturation_current = 5e-9", "low = { saturation_current = 0"), "saturation_current", "above zero"),
        (('aliases = ["X100A", "test diode"]', "aliases = 5"), "aliases", "list of names"),
        (('source = "none"', "source = 5"), "source", "no text"),
    ],
)
def test_a_wrong_entry_is_refused_by_file_entry_and_key(
    tmp_path: Path, change: tuple[str, str], key: str, words: str
) -> None:
    assert change[0] in DIODE
    with pytest.raises(InputError) as caught:
        load_parts(folder(tmp_path / "p", own=DIODE.replace(*change)))
    message = str(caught.value)
    for expected in ("own.toml", "X100", key, words):
        assert expected in message


@pytest.mark.parametrize(("polarity", "volts"), [("n", 1.5), ("p", -1.5), ("n", 0)])
def test_the_sign_of_a_pinch_off_voltage_goes_with_the_polarity(polarity: str, volts: float) -> None:
    text = JFET.replace('"p"', f'"{polarity}"').replace("1.5", str(volts))
    with pytest.raises(InputError, match="pinch_off_volts"):
        list(read_entries(parse_toml(f"format = 1\n{text}".encode(), "part file", "f"), "f"))


@pytest.mark.parametrize(
    "text", ["", "format = 2\n", "a = 1\n", "format = 1\nx = 5\n", "format = 1\n[x]\n", "format = true\n"]
)
def test_files_that_are_no_part_files(tmp_path: Path, text: str) -> None:
    (tmp_path / "own.toml").write_text(text, encoding="utf-8")
    with pytest.raises(InputError, match=r"own\.toml"):
        load_parts(tmp_path)


def test_the_shipped_files_are_where_they_should_be() -> None:
    assert (models_root() / "parts").is_dir()
    assert (models_root() / "stages").is_dir()


def test_every_shipped_entry_reads_and_says_where_its_figures_come_from() -> None:
    entries = load_parts().entries()
    assert entries
    for entry in entries:
        assert entry.source or entry.from_memory, entry.name
        assert not entry.own


@given(st.data())
def test_an_entry_with_anything_swapped_is_an_entry_or_an_input_error(data: st.DataObject) -> None:
    document = parse_toml(f"format = 1\n{DIODE}{JFET}".encode(), "part file", "f")
    table = document[data.draw(st.sampled_from(["X100", "X200"]))]
    key = data.draw(st.sampled_from([*table, "polarity", "band_gap", "x"]))
    junk = st.one_of(st.none(), st.text(max_size=5), st.floats(), st.integers(), st.lists(st.integers(), max_size=2))
    table[key] = data.draw(st.one_of(junk, st.dictionaries(st.text(max_size=3), junk, max_size=2), st.booleans()))
    try:
        entries = list(read_entries(document, "f"))
    except InputError:
        return
    assert len(entries) == 2
