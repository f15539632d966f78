"""Energy: with the take silent, what a passive circuit stores never grows."""

from __future__ import annotations

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from tackbench.circuit import Circuit, Part
from tackbench.devices.schema import fill_defaults
from tackbench.kernel.lanes import LaneBlock, LaneProblem
from tackbench.render.prepared import Quality, prepare_with

RATE = 48000
DIODE = fill_defaults("diode", {"saturation_current": 2.5e-9, "ideality": 1.75})


@st.composite
def passive(draw: st.DrawFn) -> Circuit:
    """A ladder of resistors, capacitors, coils and diodes: every state is one part's voltage or current."""
    parts: list[Part] = []
    here = "in"
    for section in range(draw(st.integers(1, 4))):
        there = f"n{section}"
        ohms = 10.0 ** draw(st.floats(1.0, 5.0))
        parts.append(Part(f"R{section}", "resistor", (here, there), ohms))
        kind = draw(st.sampled_from(["capacitor", "inductor", "capacitor"]))
        size = 10.0 ** (draw(st.floats(-10.0, -6.0)) if kind == "capacitor" else draw(st.floats(-3.0, 0.5)))
        parts.append(Part(f"X{section}", kind, (there, "0"), size))
        if draw(st.booleans()):
            ends = (there, "0") if draw(st.booleans()) else ("0", there)
            parts.append(Part(f"D{section}", "diode", ends, parameters=DIODE))
        here = there
    return Circuit("passive", tuple(parts), "in", 0.0, here, 1e6)


def energies(circuit: Circuit, quality: Quality, drive: list[float], level: float, waves: bool) -> np.ndarray:
    """Joules stored after each base interval of silence, after the ``drive`` (volts).

    Of the voltages and currents, or of the ``waves`` that the ports keep: x + (h/2) dx/dt. It is the latter that a
    wave-digital network never lets grow (Fettweis, "Wave digital filters: theory and practice", 1986), also where a
    diode opens and closes from one step to the next.
    """
    stage = prepare_with(circuit, RATE, quality)
    half_step = 0.5 * stage.problem.base_step if waves else 0.0
    state, elements = stage.model.state, stage.model.assembly.elements
    n = state.states
    volts = {
        part.ref: np.concatenate([state.nodes_X[row], state.nodes_s[row]])
        for part in circuit.parts
        for row in [elements.node(part.pins[0])]
        if part.kind == "capacitor"
    }
    coils = [part for part in circuit.parts if part.kind == "inductor"]
    assert len(state.independent) == len(coils)
    block = LaneBlock([LaneProblem(stage.problem, stage.start, lambda: stage.plain_arrays)])
    kept = block._solver._state  # type: ignore[union-attr]
    block.advance([np.concatenate([[0.0, 0.0], level * np.array(drive), np.zeros(8)])])
    found = []
    for _ in range(200):
        block.advance([np.zeros(6)])
        size = n + state.controls + state.currents
        z = kept[:size, 0] + half_step * kept[size : 2 * size, 0]
        joules = sum(
            0.5 * float(part.value or 0) * (volts[part.ref] @ z) ** 2 for part in circuit.parts if part.ref in volts
        )
        first = n - len(coils)
        for place, index in enumerate(state.independent):
            joules += 0.5 * float(coils[index].value or 0) * z[first + place] ** 2
        found.append(float(joules))
    return np.array(found)


@settings(max_examples=40, deadline=None)
@given(passive(), st.lists(st.floats(-1.0, 1.0), min_size=3, max_size=20), st.floats(0.1, 30.0))
def test_the_uniform_trapezoid_never_stores_more(circuit: Circuit, drive: list[float], level: float) -> None:
    """Passive by construction; rounding and Newton's tolerance leave 1e-9 of the largest energy."""
    stored = energies(circuit, Quality("trapezoid", 0, 0, float("inf")), drive, level, waves=True)
    assert np.all(np.diff(stored) <= 1e-9 * np.max(stored) + 1e-24)


@settings(max_examples=25, deadline=None)
@given(passive(), st.lists(st.floats(-1.0, 1.0), min_size=3, max_size=20), st.floats(0.1, 30.0))
def test_standard_and_the_exact_rule_store_no_more_than_their_tolerance(
    circuit: Circuit, drive: list[float], level: float
) -> None:
    """Neither is passive by construction: a millionth of the largest energy, or what 50 uV in a part would hold."""
    sizes = sum(float(part.value or 0.0) for part in circuit.parts if part.ref.startswith("X"))
    for quality in (Quality("trapezoid", 0, 8, 5e-5), Quality("exact", 0, 0, float("inf"))):
        stored = energies(circuit, quality, drive, level, waves=False)
        floor = 0.5 * sizes * 1e-4**2
        assert np.all(np.diff(stored) <= 1e-6 * np.max(stored) + floor)


def test_a_negative_resistor_would_be_seen() -> None:
    parts = (Part("R0", "resistor", ("in", "n0"), -3000.0), Part("X0", "capacitor", ("n0", "0"), 1e-8))
    circuit = Circuit("active", parts, "in", 0.0, "n0", 1e6)
    stored = energies(circuit, Quality("trapezoid", 0, 0, float("inf")), [0.1, 0.2, 0.1], 1.0, True)
    assert np.any(np.diff(stored) > 0)
