"""Well-formed stage files: every table and key of format 1 arrives in the flat circuit with the right value."""

from __future__ import annotations

from pathlib import Path

import pytest

from stage_examples import FULL, PARTS, stage_from
from tackbench.circuit import Circuit, Part
from tackbench.errors import InputError
from tackbench.stage import Stage, load_stage, shipped_stages
from tackbench.stage.tapers import halves

MINIMAL = """
format = 1
[input]
node = "in"
[output]
node = "out"
[parts]
R1 = { resistor = 1000, pins = ["in", "out"] }
"""


@pytest.fixture
def stage(tmp_path: Path) -> Stage:
    return stage_from(FULL, tmp_path)


def part(circuit: Circuit, ref: str, section: str = "") -> Part:
    (found,) = [item for item in circuit.parts if item.ref == ref and item.section == section]
    return found


def test_the_circuit_as_built(stage: Stage) -> None:
    circuit = stage.variant().circuit
    assert (circuit.title, circuit.input_node, circuit.input_ohms) == ("Test stage", "in", 1e4)
    assert (circuit.output_node, circuit.output_load_ohms, circuit.temperature) == ("out", 1e6, 298.15)
    assert circuit.supply is not None
    assert (circuit.supply.node, circuit.supply.volts, circuit.supply.ohms) == ("vcc", 9.0, 1.5)
    assert circuit.supply.rails == (("vee", -1.0),)
    c1 = part(circuit, "C1")
    assert (c1.kind, c1.pins, c1.value, c1.rated_volts, c1.tolerance) == ("capacitor", ("in", "a"), 1e-7, 25.0, 0.1)
    assert part(circuit, "R2").value == 0.0
    l1 = part(circuit, "L1")
    assert (l1.kind, l1.value, l1.series_ohms) == ("inductor", 2.2, 5600.0)
    bt1 = part(circuit, "BT1")
    assert (bt1.kind, bt1.value, bt1.pin("plus"), bt1.pin("minus")) == ("source", 4.5, "half", "0")
    u1 = part(circuit, "U1")
    assert u1.pins == ("a", "m", "o", "vcc", "vee")
    assert u1.parameters["slew_rate"] == 13e6
    d1, d2 = part(circuit, "D1"), part(circuit, "D2")
    assert (d1.pins, d1.count, d1.model) == (("x", "0"), 2, "T-SIL")
    assert (d2.pins, d2.count, d2.model, d2.parameters["series_ohms"]) == (("0", "x"), 1, "in place", 0.6)
    assert d2.parameters["band_gap"] == 1.11


def test_pots_become_two_resistors(stage: Stage) -> None:
    circuit = stage.variant().circuit
    base = (1 / 0.15 - 1) ** 2
    share = (base**0.7 - 1) / (base - 1)
    first, second = part(circuit, "VR1", "first"), part(circuit, "VR1", "second")
    assert (first.pins, second.pins) == (("m", "o"), ("o", "o"))
    assert first.value == pytest.approx(500e3 * share, rel=1e-12)
    assert second.value == pytest.approx(500e3 * (1 - share), rel=1e-12)
    assert part(circuit, "VR2", "first").value == pytest.approx(85e3, rel=1e-12)
    assert part(circuit, "VR3", "first").value == pytest.approx(30e3, rel=1e-12)
    assert part(circuit, "VR3", "second").pins == ("wiper", "open end")


@pytest.mark.parametrize(
    ("taper", "position", "first", "second"),
    [
        ("linear", 0.25, 25e3, 75e3),
        ("linear", 0.0, 1.0, 100e3),
        ("linear", 1.0, 100e3, 1.0),
        ("audio", 0.5, 15e3, 85e3),
        ("audio", 0.0, 1.0, 100e3),
        ("audio", 1.0, 100e3, 1.0),
        ("reverse audio", 0.5, 85e3, 15e3),
        ("reverse audio", 0.0, 1.0, 100e3),
        ("reverse audio", 1.0, 100e3, 1.0),
    ],
)
def test_tapers(taper: str, position: float, first: float, second: float) -> None:
    """Audio: 15 % at mid travel, by its definition; each half at least one ohm."""
    assert halves(100e3, taper, position) == pytest.approx((first, second), rel=1e-12)


def test_a_small_file_has_defaults_and_says_so(tmp_path: Path) -> None:
    stage = stage_from(MINIMAL, tmp_path)
    variant = stage.variant()
    assert (stage.title, stage.about, stage.supply, dict(stage.mods)) == ("my", "", None, {})
    assert (variant.circuit.input_ohms, variant.circuit.output_load_ohms) == (0.0, None)
    assert sum("none is assumed" in note for note in variant.notes) == 2
    assert variant.settings == {"temperature": 25.0}


@pytest.mark.parametrize("load", ['"none"', '"None"'])
def test_a_load_of_none(tmp_path: Path, load: str) -> None:
    stage = stage_from(MINIMAL.replace('node = "out"', f'node = "out"\nload = {load}'), tmp_path)
    assert stage.output.ohms is None
    assert not stage.output.assumed


def test_mods_controls_and_supply_are_there_to_choose_from(stage: Stage) -> None:
    assert list(stage.mods) == ["low-cut", "clip", "third"]
    assert stage.mods["low-cut"].label == "Low cut"
    assert stage.mods["clip"].positions["germanium"].about == "Softer."
    assert stage.mods["clip"].positions["off"].lift == ("D1", "D2")
    assert (stage.controls["gain"].label, stage.controls["gain"].at) == ("Gain", 0.7)
    assert (stage.controls["level"].label, stage.controls["level"].at) == ("level", 0.5)
    assert stage.supply is not None
    assert stage.supply.try_volts == (9.0, 12.0, 18.0)


DEVICES = """
format = 1
[input]
node = "in"
series = "0"
[output]
node = "out"
load = "none"
[supply]
node = "vee"
volts = -9
[parts]
R1 = { resistor = "1M", pins = ["in", "0"] }
R2 = { resistor = "1k", pins = ["out", "0"] }
Q1 = { npn = "T-NPN", collector = "0", base = "in", emitter = "out" }
Q2 = { pnp = "T-PNP", collector = "vee", base = "in", emitter = "out" }
Q3 = { n-jfet = "T-NJ", drain = "0", gate = "in", source = "out" }
Q4 = { p-jfet = "T-PJ", drain = "vee", gate = "in", source = "out" }
Q5 = { n-mosfet = "T-NM", drain = "0", gate = "in", source = "out" }
Q6 = { p-mosfet = "T-PM", drain = "vee", gate = "in", source = "out" }
"""


def test_transistors_of_every_kind(tmp_path: Path) -> None:
    circuit = stage_from(DEVICES, tmp_path).variant().circuit
    found = {item.ref: (item.kind, item.polarity, item.model) for item in circuit.parts if item.model}
    assert found == {
        "Q1": ("bipolar", 1, "T-NPN"),
        "Q2": ("bipolar", -1, "T-PNP"),
        "Q3": ("jfet", 1, "T-NJ"),
        "Q4": ("jfet", -1, "T-PJ"),
        "Q5": ("mosfet", 1, "T-NM"),
        "Q6": ("mosfet", -1, "T-PM"),
    }
    assert part(circuit, "Q1").pins == ("0", "in", "out")
    assert part(circuit, "Q3").parameters["gate_current"] == 1e-14


def test_try_voltages_take_the_sign_of_the_supply(tmp_path: Path) -> None:
    stage = stage_from(DEVICES.replace("volts = -9", "volts = -9\ntry = [9, '18V', -24]"), tmp_path)
    assert stage.supply is not None
    assert stage.supply.try_volts == (-9.0, -18.0, -24.0)


def test_a_file_is_read_from_its_path_with_the_parts_folder_beside_it(tmp_path: Path) -> None:
    (tmp_path / "parts").mkdir()
    (tmp_path / "parts" / "mine.toml").write_text(PARTS, encoding="utf-8")
    path = tmp_path / "two words.toml"
    path.write_bytes(b"\xef\xbb\xbf" + FULL.replace("\n", "\r\n").encode())
    stage = load_stage(str(path))
    assert (stage.name, stage.file) == ("two words", path)
    assert load_stage(path).variant().circuit == stage.variant().circuit
    assert any("your own" in note for note in stage.variant().notes)


def test_the_parts_folder_may_be_given(tmp_path: Path) -> None:
    (tmp_path / "elsewhere").mkdir()
    (tmp_path / "elsewhere" / "mine.toml").write_text(PARTS, encoding="utf-8")
    (tmp_path / "my.toml").write_text(FULL, encoding="utf-8")
    assert load_stage(tmp_path / "my.toml", tmp_path / "elsewhere").title == "Test stage"
    with pytest.raises(InputError, match="T-AMP"):
        load_stage(tmp_path / "my.toml")


@pytest.mark.parametrize("name", shipped_stages())
def test_every_shipped_stage_loads_and_each_position_is_sound(name: str) -> None:
    stage = load_stage(name)
    assert stage.name == name
    assert stage.file is None
    assert stage.position_faults() == ()
    assert stage.variant().over_limits == ()


def test_a_misspelt_shipped_name_gets_the_nearest() -> None:
    with pytest.raises(InputError, match="did you mean 'two-voice'"):
        load_stage("two-vioce")
