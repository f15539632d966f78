"""What the parts library knows beyond the laws: ends of a spread as models, limits, and what is not modelled."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from stage_examples import library
from tackbench.errors import InputError
from tackbench.network import operating_point
from tackbench.parts import load_parts
from tackbench.stage import load_stage

SHIPPED = load_parts()


def notes(name: str, **choices: object) -> str:
    variant = load_stage(name).variant(choices)
    return " | ".join((*variant.notes, *operating_point(variant.circuit).warnings))


@pytest.mark.parametrize("bound", ["low", "high"])
def test_the_ends_of_a_spread_are_models(bound: str) -> None:
    entry = SHIPPED.find("1N4148", "diode")
    name, parameters, found = SHIPPED.model(f" 1n4148 {bound.upper()}", "diode")
    assert (name, parameters, found) == (f"1N4148 {bound}", entry.at_bound(bound), entry)
    assert parameters != entry.parameters
    assert SHIPPED.model("1N4148 typical", "diode") == ("1N4148", entry.parameters, entry)


def test_an_alias_of_two_words_keeps_its_bound() -> None:
    assert SHIPPED.model("germanium PNP high", "pnp")[0] == "AC128 high"
    assert SHIPPED.model("germanium PNP", "pnp")[0] == "AC128"
    assert SHIPPED.model("RED led", "diode")[0] == "red LED"


def test_a_bound_that_is_not_there_is_said(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="BAT85 has no low bound; write BAT85, its typical self"):
        SHIPPED.model("BAT85 low", "diode")
    with pytest.raises(InputError, match="no diode 'T-XYZ low'"):
        library(tmp_path).model("T-XYZ low", "diode")
    with pytest.raises(InputError, match="1N4148 is of kind diode, not opamp"):
        SHIPPED.model("1N4148 low", "opamp")


def test_a_variant_with_a_bound_says_so_in_words_and_in_its_record() -> None:
    variant = load_stage("two-voice").variant({"D1+D2": "1N4148 low"})
    assert variant.words() == "D1+D2 1N270 → 1N4148 low"
    parts = {item["ref"]: item for item in variant.record()["parts"]}
    assert parts["D1"]["model"] == "1N4148 low"
    assert parts["D1"]["parameters"]["saturation_current"] == 6.455e-9
    assert "1N4148 low" in variant.record()["provenance"]


@pytest.mark.parametrize("chip", [entry.name for entry in SHIPPED.entries("opamp")])
def test_the_largest_supply_is_enforced_and_warned_of(chip: str) -> None:
    """Over its limit an error, within 10 % of it a note, below neither (one op-amp between supply and 0)."""
    limit = SHIPPED.find(chip, "opamp").parameters["max_supply"]
    stage = load_stage("flat-boost")

    def said(volts: float) -> tuple[bool, bool]:
        variant = stage.variant(supply=volts, U1=chip)
        return any("U1" in text for text in variant.over_limits), any("U1 (" in text for text in variant.notes)

    assert said(1.01 * limit)[0]
    over, near = said(0.95 * limit)
    assert not over
    assert near
    assert f"largest supply {limit:g} V" in " ".join(stage.variant(supply=1.01 * limit, U1=chip).over_limits)
    quiet = [text for text in stage.variant(supply=0.85 * limit, U1=chip).notes if "within 10 %" in text]
    assert not any("U1" in text for text in quiet)


def test_an_eighteen_volt_supply_on_a_sixteen_volt_part_names_both() -> None:
    variant = load_stage("rail-clipper").variant(supply=18)
    assert "U1 (TLC2272, largest supply 16 V) stands at 18 V" in variant.over_limits


def test_inputs_near_a_rail_are_warned_of() -> None:
    assert "its plus input rests 2.5 V from the negative rail, nearer than the 3 V" in notes(
        "rail-clipper", chip="TL072"
    )
    assert "rests" not in notes("rail-clipper", chip="TL072", supply=9)
    assert "rests" not in notes("rail-clipper", chip="LM358")
    assert "1.25 V from the positive rail, nearer than the 1.5 V" in notes("rail-clipper", chip="LM358", supply=2.5)


def test_a_crossover_prone_output_is_told() -> None:
    assert "U1 (LM358): the real output stage crosses over audibly" in notes("rail-clipper", chip="LM358")
    assert "crosses over" not in notes("rail-clipper", chip="TL072")


def test_report_only_keys_change_no_voltage() -> None:
    stage = load_stage("rail-clipper")
    model = dict(SHIPPED.find("LM358", "opamp").parameters)
    bare = {key: value for key, value in model.items() if key not in ("input_margin_low", "input_margin_high")}
    bare |= {"crossover_prone": False, "max_supply": 99.0}
    one, other = (operating_point(stage.variant(U1=table).circuit) for table in (model, bare))
    assert one.node_volts == other.node_volts


def test_a_mosfet_used_as_a_diode_asks_for_its_threshold() -> None:
    said = notes("hard-clipper", clip="mosfet")
    assert "Q1 serves as a diode: it clips at its threshold, anywhere from 800 mV to 3 V in its type" in said
    assert "serves as a diode" not in notes("mosfet-booster")
    own = {"threshold_volts": 1.9, "transconductance": 0.06}
    assert "Q1 serves" not in notes("hard-clipper", clip="mosfet", Q1=own)


def test_a_transistor_below_the_supplys_span_is_told() -> None:
    assert "Q1 (2N5457) stands 25 V and the supply spans 30 V" in notes("jfet-booster", supply=30)
    assert "stands 25 V" not in notes("jfet-booster", supply=24)


@pytest.mark.parametrize(
    ("name", "kind"), [("2N3904", "npn"), ("2N5087", "pnp"), ("AC128", "pnp"), ("2N1308", "npn")]
)
def test_base_emitter_voltage_falls_with_heat(name: str, kind: str) -> None:
    """About -2 mV/K of silicon and -1.5 to -2.2 of germanium at 1 mA (from memory), by IS(T) with n = 1."""
    p = SHIPPED.find(name, kind).parameters
    volts = []
    for kelvin in (288.15, 308.15):
        thermal = 1.380649e-23 * kelvin / 1.602176634e-19
        gap = p["band_gap"] * 1.602176634e-19 / 1.380649e-23 * (1.0 / 298.15 - 1.0 / kelvin)
        saturation = p["saturation_current"] * (kelvin / 298.15) ** p["temperature_exponent"] * np.exp(gap)
        volts.append(thermal * np.log1p(1e-3 / saturation))
    assert -2.3e-3 < (volts[1] - volts[0]) / 20.0 < -1.4e-3


def test_every_kind_that_a_stage_may_need_is_in_the_drawer() -> None:
    least = {"diode": 15, "opamp": 10, "npn": 6, "pnp": 3, "n-jfet": 2, "p-jfet": 1, "n-mosfet": 2, "p-mosfet": 1}
    for kind, count in least.items():
        assert len(SHIPPED.entries(kind)) >= count
    for kind in ("npn", "pnp", "n-jfet", "p-jfet", "n-mosfet", "p-mosfet"):
        assert all(entry.low is not None and entry.high is not None for entry in SHIPPED.entries(kind))
