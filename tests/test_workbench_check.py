"""What ``check`` adds to the figures: the list of nodes, and the estimate of what clips first."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from reference.solver import ReferenceSolver
from tackbench.circuit import Circuit, Part, Supply
from tackbench.cli.edge import run
from tackbench.cli.nodes import node_lines, parts_at_nodes
from tackbench.network import operating_point, response
from tackbench.stage import load_stage
from tackbench.workbench.first_clip import bends


def first(name: str, **choices: Any) -> tuple[str, float]:
    bend = bends(load_stage(name).variant(choices).circuit)[0]
    return bend.ref, bend.take_volts


# ------------------------------------------------------------------ nodes


def test_every_pin_stands_at_its_node_once() -> None:
    circuit = load_stage("fuzz-germanium").variant().circuit
    found = parts_at_nodes(circuit)
    assert found["b1"] == ["C1", "Q1 base", "R2"]
    assert found["e2"] == ["Q2 emitter", "R2", "VR1 other end"]
    assert found["wipe"] == ["VR1 wiper", "C2"]
    assert found["vee"][0] == "supply"
    assert "VR1 end" in found["0"]
    assert set(found) == {*circuit.nodes(), "0"}


def test_pins_that_matter_have_their_names() -> None:
    parts = (
        Part("U1", "opamp", ("a", "b", "b", "v", "w"), model="x", parameters={}),
        Part("D1", "diode", ("a", "0"), model="x", parameters={}),
        Part("BT1", "source", ("w", "0"), -9.0),
        Part("Q1", "mosfet", ("v", "a", "0"), model="x", parameters={}),
    )
    found = parts_at_nodes(Circuit("x", parts, "a", 0.0, "b", None, Supply("v", 9.0, 0.0, (("w", -1.0),))))
    assert found["a"] == ["input", "U1 plus", "D1 anode", "Q1 gate"]
    assert found["b"] == ["output", "U1 minus", "U1 out"]
    assert found["v"] == ["supply", "U1 power +", "Q1 drain"]
    assert found["w"] == ["supply x -1", "U1 power -", "BT1 plus"]
    assert found["0"] == ["D1 cathode", "BT1 minus", "Q1 source"]


def test_long_lists_wrap_under_themselves() -> None:
    circuit = load_stage("two-voice").variant().circuit
    lines = list(node_lines(circuit, operating_point(circuit).node_volts, width=60))
    assert all(len(line) <= 60 for line in lines)
    assert lines[-1].startswith(" " * 20)
    assert "ground" in " ".join(lines)


# ------------------------------------------------------------------ what clips first


@pytest.mark.parametrize(
    ("name", "choices", "refs"),
    [
        ("two-voice", {}, {"D1", "D2"}),
        ("two-voice", {"clip": "off"}, {"U1"}),
        ("soft-clipper", {"clip": "led", "drive": 1.0}, {"U1", "D1", "D2"}),
        ("hard-clipper", {}, {"D1+D2"}),
        ("hard-clipper", {"clip": "mosfet"}, {"Q1+Q2"}),
        ("charge-pump", {}, {"U1"}),
        ("charge-pump", {"clip": "silicon"}, {"D1", "D2"}),
        ("fuzz-silicon", {}, {"Q2"}),
        ("jfet-booster", {}, {"Q1"}),
    ],
)
def test_the_right_part_clips_first(name: str, choices: dict[str, Any], refs: set[str]) -> None:
    assert first(name, **choices)[0] in refs


def test_an_opamp_clips_where_a_sine_says_it_does() -> None:
    """Below the estimate the independent solver finds a clean sine at the output, above it a flat top."""
    circuit = load_stage("flat-boost").variant().circuit
    (bend,) = [item for item in bends(circuit) if item.ref == "U1"]
    times = np.arange(20 * 128 + 1) / 128e3

    def swing(amplitude: float) -> float:
        solver = ReferenceSolver(circuit, relative=1e-5, absolute=1e-7)
        moved = solver.transient(lambda t: amplitude * np.sin(2e3 * np.pi * t), times)
        return float(np.ptp(moved.output[-128:]) / amplitude)

    small = swing(0.02)
    assert swing(0.85 * bend.take_volts) == pytest.approx(small, rel=0.005)
    assert swing(1.5 * bend.take_volts) < 0.75 * small


@pytest.mark.parametrize(
    ("chip", "room", "words"), [("OPA2134", 3.3, "upper"), ("LM358", 3.0, "upper"), ("TL072", 3.0, "both")]
)
def test_an_opamps_nearer_rail_counts(chip: str, room: float, words: str) -> None:
    """Half of 9 V less what the chip loses to the nearer rail, over the gain to its output."""
    circuit = load_stage("flat-boost").variant(U1=chip).circuit
    (bend,) = [item for item in bends(circuit) if item.ref == "U1"]
    gain = np.abs(response(circuit, [bend.hertz]))[0] * (1.0 + 0.47 / 90.9)
    assert bend.take_volts == pytest.approx(room / gain, rel=0.01)
    assert words in bend.words


def test_zeners_in_a_row_count_as_one() -> None:
    """At 0.1 mA: one broken down, 5.1 V at 49 mA with its soft knee, the other forward; over the gain to the pair."""
    circuit = load_stage("hard-clipper").variant(level=1.0).circuit
    (one, other) = [item for item in bends(circuit) if item.ref == "D1+D2"]
    assert one.take_volts == pytest.approx(other.take_volts, rel=1e-6)
    thermal = 1.380649e-23 * 298.15 / 1.602176634e-19
    volts = 5.1 + 13.35 * thermal * np.log(0.1 / 49.0) + 1.8 * thermal * np.log(1e-4 / 1e-9)
    gain = np.abs(response(circuit, [one.hertz]))[0]
    assert one.take_volts == pytest.approx(volts / gain, rel=0.01)


def test_a_dead_stage_is_told() -> None:
    found = bends(load_stage("jfet-booster").variant(transistor="high").circuit)
    assert found[0].take_volts == 0.0
    assert "drain too near its source" in found[0].words


def test_check_prints_both(capsys: pytest.CaptureFixture[str]) -> None:
    assert run(["check", "--stage", "soft-clipper"]) == 0
    said = capsys.readouterr().out
    assert "Nodes: resting voltage (take silent), and the parts that meet there" in said
    assert "inv" in said
    assert "U1 minus, R4, VR1 end, C4, D1 cathode, D2 anode" in said
    assert "What clips first (peak of the take; an estimate from small-signal gains)" in said
    assert "D1  conducts, from 15 mV at 2.9 kHz" in said
    assert run(["check", "--stage", "jfet-booster", "--with", "transistor=high"]) == 0
    assert "at rest already" in capsys.readouterr().out


def test_a_passive_stage_without_devices_has_nothing_to_clip() -> None:
    circuit = Circuit("x", (Part("R1", "resistor", ("a", "b"), 1e3),), "a", 0.0, "b", 1e6)
    assert bends(circuit) == []
