"""Choosing a variant: what mods, controls, supply and part values make of the circuit, and what is refused."""

from __future__ import annotations

from pathlib import Path

import pytest

from stage_examples import FULL, stage_from
from tackbench.circuit import Part
from tackbench.errors import InputError
from tackbench.stage import Stage, Variant

MORE = (
    FULL
    + """
[mods.later]
at = "no"
[mods.later.positions.no]
[mods.later.positions.clash]
C1 = "22n"
[mods.later.positions.lifts]
lift = ["C1"]
link = [["in", "a"]]
[mods.later.positions.bare]
lift = ["R1"]
"""
)


@pytest.fixture
def stage(tmp_path: Path) -> Stage:
    return stage_from(MORE, tmp_path)


def part(variant: Variant, ref: str) -> Part:
    return next(item for item in variant.circuit.parts if item.ref == ref)


def refs(variant: Variant) -> set[str]:
    return {item.ref for item in variant.circuit.parts}


def test_positions_change_lift_link_and_fit(stage: Stage) -> None:
    assert part(stage.variant({"low-cut": "tight"}), "C1").value == 1e-8
    off = stage.variant(clip="off")
    assert refs(stage.variant()) - refs(off) == {"D1", "D2"}
    one = stage.variant(clip="one-sided")
    assert {"D3", "R9", "link x-y"} <= refs(one)
    assert (part(one, "D1").model, part(one, "D1").count) == ("T-GER", 1)
    assert (part(one, "D2").model, part(one, "D2").parameters["ideality"]) == ("in place", 2.0)
    assert part(stage.variant(clip="germanium"), "D1").count == 2


def test_edits_of_several_mods_apply_in_the_files_order(stage: Stage) -> None:
    both = stage.variant(clip="one-sided", third="silicon")
    assert part(both, "D3").model == "T-SIL"


def test_part_values_apply_last(stage: Stage) -> None:
    both = stage.variant({"low-cut": "tight", "C1": "33n", "D1+D2": "T-GER"})
    assert part(both, "C1").value == 33e-9
    assert [part(both, ref).model for ref in ("D1", "D2")] == ["T-GER", "T-GER"]
    assert part(stage.variant(R1=1e6), "R1").value == 1e6
    assert part(stage.variant(D1={"saturation_current": "1n", "ideality": 1.5}), "D1").model == "in place"


def test_controls_supply_and_temperature_are_set(stage: Stage) -> None:
    chosen = stage.variant(gain="7/10", level="20 %", supply="18V", temperature=-5)
    assert chosen.settings["gain"] == 0.7
    assert chosen.settings["level"] == 0.2
    assert chosen.circuit.supply is not None
    assert chosen.circuit.supply.volts == 18.0
    assert chosen.circuit.temperature == pytest.approx(268.15)
    assert chosen.choices == {"gain": 0.7, "level": 0.2, "supply": 18.0, "temperature": -5.0}


@pytest.mark.parametrize(
    ("choices", "sentence"),
    [
        (
            {"low-cut": "tight", "later": "clash"},
            "my.toml, mods.later.positions.clash, C1: mods.later.positions.clash changes C1, which "
            "mods.low-cut.positions.tight changes too; two chosen positions cannot edit the same part",
        ),
        (
            {"low-cut": "tight", "later": "lifts"},
            "my.toml, mods.later.positions.lifts, lift: mods.later.positions.lifts lifts C1, which "
            "mods.low-cut.positions.tight changes too; two chosen positions cannot edit the same part",
        ),
        ({"third": "silicon"}, "my.toml, mods.third.positions.silicon, D3: there is no part 'D3' in this variant"),
        ({"later": "bare"}, "my.toml, U1, plus: the node 'a' has no direct-current path to ground: it needs a bias"),
        ({"clip": "off", "D1": "T-GER"}, "my, D1: mods.clip.positions.off lifts D1; choose a position in which D1"),
        ({"D3": "T-GER"}, "my, D3: no chosen position fits D3; choose a position in which D3 is there"),
        ({"clip": "germanum"}, "my, clip: 'germanum' is no position of this mod; did you mean 'germanium'?"),
        ({"clpi": "off"}, "my: 'clpi' is no mod, control or part of this stage; did you mean 'clip'?"),
        ({"D9": "T-GER"}, "my: 'D9' is no mod, control or part of this stage; known: BT1, C1"),
        ({"gain": 1.1}, "my, gain: 1.1 is outside 0 to 1; write 0 to 1, a percentage such as 70%, or 7/10"),
        ({"gain": "11/10"}, "my, gain: '11/10' is outside 0 to 1"),
        ({"VR1": 0.3}, "my, VR1: 0.3 is no resistance for the pot VR1; turn the control 'gain'"),
        ({"VR3": "30%"}, "my, VR3: '30%' is no resistance for the pot VR3; it is a trimmer: its position is in"),
        ({"VR1": "A250k"}, "my, VR1: the letter 'A' on a pot means different tapers in different regions"),
        ({"C1": "10k"}, "my, C1: '10k' would be an absurd capacitor"),
        ({"C1": "0"}, "my, C1: a capacitor of '0' is not allowed"),
        ({"D1": "T-AMP"}, "my, D1: T-AMP is of kind opamp, not diode"),
        ({"D1": "T-SILL"}, "my, D1: the parts library has no diode 'T-SILL'; did you mean 'T-SIL'?"),
        ({"supply": "-9"}, "my, supply: '-9' would feed the stage backwards; its supply lies above ground"),
        ({"supply": 0}, "my, supply: 0 is not allowed; expected volts other than zero"),
        (
            {"supply": "1.5"},
            "my.toml, U1, power: its rails are 3 V apart (positive less negative); a T-AMP stays 3 V",
        ),
        ({"temperature": 300}, "my, temperature: 300 is outside -55 to 125 °C; choose degrees Celsius within it"),
        ({"temperature": "20 F"}, "my, temperature: '20 F' is in farads, which does not fit here"),
        ({"D1": "T-GER", "D1+D2": "T-SIL"}, "my, D1: it is chosen twice; choose it once"),
    ],
    ids=lambda value: str(value)[:60],
)
def test_what_cannot_be_chosen_is_said(stage: Stage, choices: dict[str, object], sentence: str) -> None:
    with pytest.raises(InputError) as caught:
        stage.variant(choices)
    assert str(caught.value).startswith(sentence)


def test_typed_choices_come_back_in_normal_form(stage: Stage) -> None:
    assert stage.parse_choice("D1 + D2", "t-ger") == {"D1": "T-GER", "D2": "T-GER"}
    assert stage.parse_choice("gain", "7/10") == {"gain": 0.7}
    assert stage.parse_choice("C1", "22n") == {"C1": 22e-9}
    with pytest.raises(InputError, match="a name stands twice"):
        stage.parse_choice("D1+D1", "T-GER")


def test_a_positive_ground_stage_takes_the_supplys_sign(tmp_path: Path) -> None:
    text = """
format = 1
input = { node = "in", series = "1k" }
output = { node = "out", load = "1M" }
supply = { node = "vee", volts = -9 }
[parts]
R1 = { resistor = "1M", pins = ["in", "vee"] }
R2 = { resistor = "1k", pins = ["out", "0"] }
Q1 = { pnp = "T-PNP", collector = "vee", base = "in", emitter = "out" }
"""
    stage = stage_from(text, tmp_path)
    assert [stage.variant(supply=raw).settings["supply"] for raw in (12, "12V", "-12")] == [-12.0] * 3
    with pytest.raises(InputError, match=r"'\+12' would feed the stage backwards; its supply lies below ground"):
        stage.variant(supply="+12")


LEGAL = """
format = 1
input = { node = "in", series = "0" }
output = { node = "out", load = "none" }
supply = { node = "vcc", volts = 9 }
[parts]
R1 = { resistor = 0, pins = ["in", "a"] }
C1 = { capacitor = "1u", pins = ["a", "b"] }
C2 = { capacitor = "1u", pins = ["b", "out"] }
C3 = { capacitor = "1u", pins = ["vcc", "0"] }
C4 = { capacitor = "1u", pins = ["b", "0"] }
C5 = { capacitor = "1u", pins = ["a", "0"] }
L1 = { inductor = 1, pins = ["out", "c"] }
L2 = { inductor = 1, pins = ["c", "d"] }
R2 = { resistor = "1k", pins = ["d", "0"] }
VR1 = { pot = "10k", pins = ["out", "0", "open"], control = "turn" }
[controls]
turn = { at = 1 }
"""


def test_oddities_that_the_format_allows(tmp_path: Path) -> None:
    """Zero ohms, capacitor loops, a capacitor across the supply, an inductor cutset, a pot at its ends."""
    stage = stage_from(LEGAL, tmp_path)
    for turn in (0, 1):
        assert stage.variant(turn=turn).circuit.parts


def test_notes_name_what_the_user_must_know(stage: Stage) -> None:
    assert "D2 stays own model: asymmetric; for both write D1+D2=T-GER" in stage.variant(D1="T-GER").notes
    assert not any("asymmetric" in note for note in stage.variant({"D1+D2": "T-GER"}).notes)
    raised = " ".join(stage.variant(supply=15).notes)
    assert "15 V is above the stage's own 9 V" in raised
    assert "figures of T-GER (D1, D2) are from memory" in " ".join(stage.variant(clip="germanium").notes)


def test_limits_and_missing_ratings(stage: Stage, tmp_path: Path) -> None:
    assert stage.variant(supply=14.5).over_limits == ()
    assert any("C5" in note and "within 10 %" in note for note in stage.variant(supply=15).notes)
    (over,) = stage.variant(supply=17).over_limits
    assert over == "C5 (capacitor, rated 16 V) stands at 17 V"
    bare = stage_from(FULL.replace('"0"], rated = "16V" }', '"0"] }'), tmp_path)
    assert "no rating given for C5, which sees the supply: look at the part itself" in bare.variant().notes
    small = stage_from(
        FULL.replace('opamp = "T-AMP"', 'opamp = "T-LOW"').replace("vee = -1.0", "vee = -0.5"), tmp_path
    )
    assert small.variant(supply=9).over_limits == ()
    assert any("U1 (T-LOW, largest supply 16 V)" in note for note in small.variant(supply=10).notes)
    assert small.variant(supply=12).over_limits[0] == "U1 (T-LOW, largest supply 16 V) stands at 18 V"


def test_words_say_what_differs(stage: Stage) -> None:
    assert stage.variant().words() == "as built"
    chosen = stage.variant({"clip": "germanium", "gain": 0.3, "supply": 12, "C1": "22n", "temperature": 10})
    assert chosen.words() == "clip two germanium, Gain 30 %, 12 V, 10 °C, C1 100 nF → 22 nF"
    assert stage.variant({"clip": "germanium"}).words(stage.variant({"clip": "germanium", "supply": 12})) == "9 V"


def test_a_record_holds_the_circuit_in_full(stage: Stage) -> None:
    record = stage.variant(clip="germanium").record()
    by_ref = {item["ref"]: item for item in record["parts"]}
    assert by_ref["D1"]["parameters"]["saturation_current"] == 1e-6
    assert by_ref["D1"]["parameters"]["band_gap"] == 0.67
    assert record["provenance"]["T-GER"]["from_memory"] is True
    assert record["settings"]["clip"] == "germanium"
    assert record["supply"] == {"node": "vcc", "volts": 9.0, "ohms": 1.5, "rails": {"vee": -1.0}}
