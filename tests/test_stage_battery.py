"""Batteries and adapters: the volts and ohms they bring, sag, and what they cannot feed."""

from __future__ import annotations

import pytest

from tackbench.errors import InputError
from tackbench.network import operating_point
from tackbench.parts import load_parts
from tackbench.stage import load_stage

LIBRARY = load_parts()
BATTERIES = LIBRARY.entries("battery")


@pytest.mark.parametrize("entry", BATTERIES, ids=[entry.name for entry in BATTERIES])
def test_each_battery_feeds_a_stage(entry: object) -> None:
    name = entry.name  # type: ignore[attr-defined]
    volts, ohms = entry.parameters["open_volts"], entry.parameters["internal_ohms"]  # type: ignore[attr-defined]
    variant = load_stage("flat-boost").variant(battery=name)
    assert variant.circuit.supply is not None
    assert (variant.circuit.supply.volts, variant.circuit.supply.ohms) == (volts, ohms)
    assert variant.settings["supply"] == volts
    assert name in variant.record()["provenance"]
    assert variant.words() == f"battery {name}"
    assert any(f"{volts:g} V without load behind" in note for note in variant.notes)
    assert not any("above the stage's own" in note for note in variant.notes)


@pytest.mark.parametrize("name", ["half alkaline", "tired alkaline"])
def test_alkaline_states_lie_on_the_makers_discharge_curve(name: str) -> None:
    """Energizer 522 at 270 ohm: 7.3 V after 12 h, 6.4 V after 18 h; the open volts add what it drops inside."""
    entry = LIBRARY.find(name, "battery")
    ((volts, amperes),) = entry.points
    assert amperes == pytest.approx(volts / 270.0, rel=0.01)
    inside = entry.parameters["open_volts"] - amperes * entry.parameters["internal_ohms"]
    assert inside == pytest.approx(volts, abs=0.01)


def test_a_battery_runs_down_in_order() -> None:
    for kind in ("alkaline", "carbon-zinc"):
        states = [LIBRARY.find(f"{state} {kind}", "battery").parameters for state in ("fresh", "half", "tired")]
        volts, ohms = ([state[key] for state in states] for key in ("open_volts", "internal_ohms"))
        assert volts == sorted(volts, reverse=True)
        assert ohms == sorted(ohms)


def test_short_names_mean_the_alkaline_one() -> None:
    assert load_stage("flat-boost").variant(battery="Tired").settings["battery"] == "tired alkaline"


def test_the_battery_sags_under_the_charge_pump() -> None:
    """16 mA through 180 ohm of a tired carbon-zinc battery: 2.88 V are lost inside it."""
    rest = operating_point(load_stage("charge-pump").variant(battery="tired carbon-zinc").circuit)
    assert rest.supply_current == pytest.approx(16e-3, rel=0.01)
    assert rest.node_volts["vcc"] == pytest.approx(6.8 - 16e-3 * 180.0, rel=0.005)


def test_two_in_series_for_eighteen_volts_and_the_sign_of_positive_ground() -> None:
    two = load_stage("hard-clipper").variant(battery="fresh").circuit.supply
    assert two is not None
    assert (two.volts, two.ohms) == (19.0, 3.4)
    ground = load_stage("fuzz-germanium").variant(battery="half").circuit.supply
    assert ground is not None
    assert ground.volts == -LIBRARY.find("half", "battery").parameters["open_volts"]


@pytest.mark.parametrize(
    ("stage", "choices", "sentence"),
    [
        ("two-voice", {"battery": "fresh", "supply": 9}, "battery: the supply is chosen too; choose one of them"),
        (
            "rail-clipper",
            {"battery": "fresh"},
            "the stage is built for 5 V, which is no number of 9 V batteries",
        ),
        ("two-voice", {"battery": "freesh"}, "no battery 'freesh'; did you mean 'fresh"),
        ("two-voice", {"battery": "TL072"}, "TL072 is of kind opamp, not battery"),
    ],
)
def test_what_a_battery_cannot_do_is_said(stage: str, choices: dict[str, object], sentence: str) -> None:
    with pytest.raises(InputError) as caught:
        load_stage(stage).variant(choices)
    assert sentence in str(caught.value)
