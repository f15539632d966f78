"""Graph checks on flat circuits: shorted sources, sources across coils, missing bias, rails too close."""

from __future__ import annotations

from typing import Any

import pytest

from tackbench.circuit import Circuit, Part, Supply
from tackbench.circuit.checks import faults, first_fault
from tackbench.circuit.graph import Groups, nominal_volts

OPAMP = {"swing_high": 1.0, "swing_low": 1.0}


def resistor(ref: str, a: str, b: str, ohms: float = 1e3) -> Part:
    return Part(ref, "resistor", (a, b), ohms)


def capacitor(ref: str, a: str, b: str) -> Part:
    return Part(ref, "capacitor", (a, b), 1e-7)


def coil(ref: str, a: str, b: str, winding: float = 0.0) -> Part:
    return Part(ref, "inductor", (a, b), 1.0, series_ohms=winding)


def battery(ref: str, plus: str, minus: str, volts: float = 9.0) -> Part:
    return Part(ref, "source", (plus, minus), volts)


def wire(a: str, b: str) -> Part:
    return Part(f"link {a}-{b}", "wire", (a, b))


def opamp(
    plus: str = "p", minus: str = "m", out: str = "o", power: tuple[str, str] = ("vcc", "0"), **more: Any
) -> Part:
    return Part("U1", "opamp", (plus, minus, out, *power), model="test", parameters={**OPAMP, **more})


def circuit(*parts: Part, supply: Supply | None = None, series: float = 1e3, load: float | None = 1e6) -> Circuit:
    return Circuit("t", parts, "in", series, "out", load, supply)


NINE = Supply("vcc", 9.0)


def test_groups_join_once() -> None:
    groups = Groups()
    assert groups.join("a", "b")
    assert groups.join("c", "b")
    assert not groups.join("a", "c")
    assert groups.same("c", "a")
    assert not groups.same("a", "d")


@pytest.mark.parametrize(
    ("parts", "options", "named"),
    [
        ([wire("vcc", "0")], {"supply": NINE}, "supply"),
        ([wire("vcc", "x"), wire("x", "0")], {"supply": Supply("vcc", 9.0, 10.0)}, "supply"),
        ([wire("vee", "0")], {"supply": Supply("vcc", 9.0, 0.0, (("vee", -1.0),))}, "supply rail vee"),
        ([battery("BT1", "a", "b"), wire("a", "b")], {}, "source BT1"),
        ([wire("in", "0")], {"series": 0.0}, "take"),
    ],
)
def test_a_link_may_not_short_a_source(parts: list[Part], options: dict[str, Any], named: str) -> None:
    fault = first_fault(circuit(resistor("R1", "in", "out"), *parts, **options))
    assert fault is not None
    assert fault.part.startswith("link ")
    assert named in fault.found


def test_a_link_that_mutes_an_input_with_series_resistance_is_fine() -> None:
    assert first_fault(circuit(resistor("R1", "in", "out"), wire("in", "0"), series=1e3)) is None


@pytest.mark.parametrize(
    ("parts", "options", "part", "words"),
    [
        ([battery("BT1", "a", "0"), battery("BT2", "a", "0")], {}, "BT2", "parallel"),
        ([battery("BT1", "a", "0"), battery("BT2", "b", "a"), battery("BT3", "b", "0")], {}, "BT3", "parallel"),
        ([battery("BT1", "vcc", "0")], {"supply": NINE}, "BT1", "parallel"),
        ([battery("BT1", "vcc", "x"), resistor("R2", "x", "0", 0.0)], {"supply": NINE}, "BT1", "parallel"),
        ([battery("BT1", "in", "0")], {"series": 0.0}, "BT1", "parallel"),
        ([battery("BT1", "a", "a")], {}, "BT1", "shorted"),
        ([battery("BT1", "a", "0"), resistor("R2", "a", "0", 0.0)], {}, "BT1", "shorted"),
        ([battery("BT1", "vcc", "vee", 18.0)], {"supply": Supply("vcc", 9.0, 5.0, (("vee", -1.0),))}, None, ""),
        ([battery("BT1", "vcc", "0")], {"supply": Supply("vcc", 9.0, 1.0)}, None, ""),
        ([wire("vcc", "v2")], {"supply": Supply("vcc", 9.0, 1.0, (("v2", 1.0),))}, "supply rail v2", "joined"),
        ([wire("vcc", "v2")], {"supply": Supply("vcc", 9.0, 0.0, (("v2", 1.0),))}, "supply rail v2", "parallel"),
        ([battery("BT1", "a", "b")], {}, None, ""),
    ],
)
def test_sources_without_resistance_form_no_loop(
    parts: list[Part], options: dict[str, Any], part: str | None, words: str
) -> None:
    """Kirchhoff's voltage law leaves the current of such a loop undetermined, or contradicts itself."""
    fault = first_fault(circuit(resistor("R1", "in", "out"), *parts, **options))
    assert (fault.part if fault else None) == part
    assert fault is None or words in fault.found


@pytest.mark.parametrize(
    ("parts", "options", "part"),
    [
        ([coil("L1", "vcc", "0")], {"supply": NINE}, "L1"),
        ([coil("L1", "vcc", "x"), coil("L2", "x", "0")], {"supply": NINE}, "L1"),
        ([coil("L1", "a", "b"), battery("BT1", "a", "0"), battery("BT2", "b", "0", 3.0)], {}, "L1"),
        ([coil("L1", "in", "a"), battery("BT1", "a", "0")], {"series": 0.0}, "L1"),
        ([coil("L1", "vcc", "0")], {"supply": Supply("vcc", 9.0, 10.0)}, None),
        ([coil("L1", "vcc", "0", 100.0)], {"supply": NINE}, None),
        ([coil("L1", "in", "0")], {"series": 0.0}, None),
        ([coil("L1", "a", "b"), coil("L2", "a", "b")], {}, None),
    ],
)
def test_a_source_across_coils_without_resistance_has_no_operating_point(
    parts: list[Part], options: dict[str, Any], part: str | None
) -> None:
    fault = first_fault(circuit(resistor("R1", "in", "out"), *parts, **options))
    assert (fault.part if fault else None) == part
    assert fault is None or "operating point" in fault.found


FEEDBACK = resistor("R9", "o", "m")


@pytest.mark.parametrize(
    ("parts", "pin"),
    [
        ([capacitor("C1", "in", "p"), opamp(), FEEDBACK], "plus"),
        ([capacitor("C1", "in", "p"), resistor("R1", "p", "0"), opamp(), FEEDBACK], None),
        ([capacitor("C1", "in", "p"), resistor("R1", "p", "0"), opamp(), capacitor("C2", "m", "o")], "minus"),
        ([capacitor("C1", "in", "p"), opamp(input_ohms=1e6), FEEDBACK], None),
        ([wire("in", "p"), opamp(), FEEDBACK], None),
        ([Part("D1", "diode", ("p", "0")), opamp(), FEEDBACK], None),
        ([battery("BT1", "p", "0"), opamp(), FEEDBACK], None),
        ([coil("L1", "p", "vcc"), opamp(), FEEDBACK], None),
        ([wire("out", "p"), opamp(), FEEDBACK], None),
        ([resistor("R1", "p", "x"), capacitor("C1", "x", "0"), opamp(), FEEDBACK], "plus"),
    ],
)
def test_an_op_amp_input_needs_a_direct_current_path(parts: list[Part], pin: str | None) -> None:
    found = [fault for fault in faults(circuit(*parts, supply=NINE)) if "bias path" in fault.found]
    assert [(fault.part, fault.key) for fault in found] == ([("U1", pin)] if pin else [])


def test_the_output_jack_is_a_path_only_through_its_load() -> None:
    parts = (wire("out", "p"), opamp(), FEEDBACK)
    assert first_fault(circuit(*parts, supply=NINE, load=None)) is not None


@pytest.mark.parametrize(
    ("kind", "pins", "pin"),
    [
        ("bipolar", ("vcc", "b", "e"), "base"),
        ("jfet", ("vcc", "b", "e"), "gate"),
        ("mosfet", ("vcc", "b", "e"), "gate"),
        ("bipolar", ("b", "b", "0"), None),
        ("mosfet", ("b", "b", "0"), None),
    ],
)
def test_a_base_or_gate_needs_a_path_beside_its_own_junctions(
    kind: str, pins: tuple[str, ...], pin: str | None
) -> None:
    device = Part("Q1", kind, pins)
    found = first_fault(circuit(capacitor("C1", "in", "b"), device, resistor("R1", "e", "0"), supply=NINE))
    assert (found.key if found else None) == pin


def test_a_base_fed_from_another_transistor_is_biased_through_its_channel() -> None:
    first = Part("Q1", "bipolar", ("vcc", "b", "c"))
    second = Part("Q2", "bipolar", ("vcc", "c", "0"))
    assert first_fault(circuit(first, second, resistor("R1", "b", "vcc"), supply=NINE)) is None


@pytest.mark.parametrize(("volts", "sound"), [(2.2, True), (2.19, False), (9.0, True)])
def test_rails_leave_room_for_the_swings_and_four_times_their_softness(volts: float, sound: bool) -> None:
    """Swings of 1 V and 1 V and 4 times 0.05 V: 2.2 V."""
    found = first_fault(circuit(opamp("in", "o"), supply=Supply("vcc", volts)))
    assert (found is None) == sound
    assert found is None or (found.part, found.key) == ("U1", "power")


def test_rails_the_wrong_way_round_are_too_close() -> None:
    assert first_fault(circuit(opamp("in", "o", power=("0", "vcc")), supply=NINE)) is not None
    assert first_fault(circuit(opamp("in", "o", power=("0", "vcc")), supply=Supply("vcc", -9.0))) is None


def test_rails_that_are_not_certain_are_left_to_the_operating_point() -> None:
    parts = (opamp("in", "o", power=("v", "0")), resistor("R1", "v", "vcc"))
    assert first_fault(circuit(*parts, supply=Supply("vcc", 1.0))) is None


def test_nominal_volts_follow_sources_wires_and_zero_ohms_only() -> None:
    parts = (
        wire("vcc", "a"),
        resistor("R0", "a", "b", 0.0),
        battery("BT1", "c", "b", 4.5),
        coil("L1", "c", "d"),
        resistor("R1", "d", "e"),
        coil("L2", "d", "f", 10.0),
    )
    volts = nominal_volts(circuit(*parts, supply=Supply("vcc", 9.0, 100.0, (("vee", -2.0),))))
    assert volts == {"0": 0.0, "vcc": 9.0, "vee": -18.0, "a": 9.0, "b": 9.0, "c": 13.5, "d": 13.5}
