"""Shapes that break solvers, by hand: each against a closed form or the independent solver."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from reference.compare import in_band
from reference.solver import ReferenceSolver
from tackbench.circuit import Circuit, Part, Supply
from tackbench.devices.schema import fill_defaults
from tackbench.network import natural_frequencies, operating_point, response
from tackbench.network.operating_point import SEVERAL
from tackbench.render.prepared import prepare

RATE = 48000
AMP = fill_defaults(
    "opamp",
    {"gain_bandwidth": 3e6, "slew_rate": 1.5e6, "open_loop_gain": 2e5}
    | {"swing_high": 1.0, "swing_low": 1.0, "output_ohms": 75.0},
)


def part(name: str, kind: str, *pins: str, value: float | None = None, **more: Any) -> Part:
    return Part(name, kind, pins, value, **more)


def make(*parts: Part, supply: Supply | None = None, series: float = 0.0, load: float | None = 1e6) -> Circuit:
    return Circuit("shape", parts, "in", series, "out", load, supply)


def zener(volts: float) -> dict[str, Any]:
    given = {"saturation_current": 1e-14, "ideality": 1.0, "breakdown_volts": volts, "breakdown_current": 1e-4}
    return fill_defaults("diode", given)


SHAPES = {
    "two groups that float": make(
        part("C1", "capacitor", "in", "a", value=1e-8),
        part("C2", "capacitor", "a", "b", value=2e-8),
        part("C3", "capacitor", "b", "out", value=3e-8),
        part("C4", "capacitor", "b", "0", value=1e-9),
    ),
    "a loop of capacitors at a jack without resistance": make(
        part("C1", "capacitor", "in", "0", value=1e-7),
        part("C2", "capacitor", "in", "out", value=1e-8),
        part("C3", "capacitor", "out", "0", value=2e-8),
        part("R1", "resistor", "out", "0", value=1e4),
    ),
    "coils in a star": make(
        part("R1", "resistor", "in", "a", value=1e3),
        part("L1", "inductor", "a", "s", value=0.1),
        part("L2", "inductor", "s", "out", value=0.2),
        part("L3", "inductor", "s", "0", value=0.3),
        part("R2", "resistor", "out", "0", value=2e3),
    ),
    "a ring of ideal coils": make(
        part("R1", "resistor", "in", "a", value=1e3),
        part("L1", "inductor", "a", "b", value=0.1),
        part("L2", "inductor", "b", "out", value=0.2),
        part("L3", "inductor", "a", "out", value=0.3),
        part("R2", "resistor", "out", "0", value=2e3),
        part("R3", "resistor", "b", "0", value=5e3),
    ),
    "parts of no resistance": make(
        part("R1", "resistor", "in", "a", value=0.0),
        part("R2", "resistor", "a", "b", value=1e3),
        part("R3", "resistor", "b", "out", value=0.0),
        part("R4", "resistor", "b", "out", value=0.0),
        part("C1", "capacitor", "out", "0", value=1e-8),
    ),
    "a pot at its end between two capacitors": make(
        part("C1", "capacitor", "in", "a", value=1e-7),
        part("VR1", "resistor", "a", "out", value=1.0, section="first"),
        part("VR1", "resistor", "out", "0", value=1e6, section="second"),
        part("C2", "capacitor", "out", "0", value=1e-10),
        part("R1", "resistor", "in", "0", value=1e4),
    ),
    "a capacitor across an ideal supply": make(
        part("C1", "capacitor", "vcc", "0", value=1e-4),
        part("R1", "resistor", "vcc", "out", value=1e4),
        part("R2", "resistor", "out", "0", value=1e4),
        part("C2", "capacitor", "in", "out", value=1e-7),
        supply=Supply("vcc", 9.0, 0.0),
    ),
    "a node that hangs on two junctions": make(
        part("R1", "resistor", "in", "out", value=4.7e3),
        part("D1", "diode", "out", "m", parameters=zener(0.3)),
        part("D2", "diode", "0", "m", parameters=zener(0.2)),
    ),
}


def take(t: np.ndarray) -> np.ndarray:
    rise = np.sin(0.5 * np.pi * np.sin(0.5 * np.pi * np.clip(t / 0.004, 0, 1)) ** 4) ** 4
    return 0.8 * np.sin(2 * np.pi * 330 * t) * rise + 0.3 * np.sin(2 * np.pi * 2100 * t) * rise


@pytest.mark.parametrize("name", SHAPES)
def test_shape_against_the_independent_solver(name: str) -> None:
    circuit = SHAPES[name]
    reference = ReferenceSolver(circuit)
    point = operating_point(circuit)
    for node, volts in reference.operating_point().items():
        assert point.node_volts[node] == pytest.approx(volts, abs=1e-6)
    hertz = np.array([50.0, 700.0, 9000.0])
    ratio = response(circuit, hertz) / reference.response(hertz)
    assert np.all(np.abs(20 * np.log10(np.abs(ratio))) < 0.01)
    assert np.all(np.abs(np.degrees(np.angle(ratio))) < 0.1)
    frames = 960
    expected, _ = reference.render(take, frames, RATE)
    stream = prepare(circuit, RATE, "standard").stream(1)
    volts = take(np.arange(frames + 120) / RATE)[:, None]
    got = np.concatenate([stream.process(volts), stream.finish()])[:frames, 0]
    assert np.std(in_band(got - expected, RATE)) < 1e-4 * np.std(in_band(expected, RATE))


def latch(feedback_ohms: float) -> Circuit:
    """An op-amp whose output drives its own plus input, between plus and minus 9 V."""
    return make(
        part("R1", "resistor", "in", "p", value=1e4),
        part("R2", "resistor", "out", "p", value=feedback_ohms),
        part("R3", "resistor", "m", "0", value=1e3),
        part("R4", "resistor", "m", "out", value=1e5),
        part("U1", "opamp", "p", "m", "out", "vcc", "vee", parameters=AMP),
        supply=Supply("vcc", 9.0, 0.0, (("vee", -1.0),)),
    )


def test_positive_feedback_rests_where_a_rising_supply_leaves_it_and_says_so() -> None:
    """From a supply of zero the balanced state is never left: 0 V, though the rails would hold it as well."""
    point = operating_point(latch(2e4))
    assert abs(point.node_volts["out"]) < 1e-3
    assert SEVERAL in point.warnings
    assert float(np.max(natural_frequencies(latch(2e4)).real)) > 1.0
    assert any("tips over" in warning for warning in prepare(latch(2e4), RATE, "standard").warnings)


def test_weak_positive_feedback_has_one_operating_point() -> None:
    point = operating_point(latch(1e9))
    assert point.warnings == ()
    assert float(np.max(natural_frequencies(latch(1e9)).real)) < 0.0


def test_an_oscillator_is_told_from_its_eigenvalues_and_still_renders() -> None:
    """A Wien network in positive feedback, gain 3.3: near 1 / (2 pi R C) = 1592 Hz, limited by the rails."""
    circuit = make(
        part("R1", "resistor", "out", "s", value=1e4),
        part("C1", "capacitor", "s", "p", value=1e-8),
        part("R2", "resistor", "p", "0", value=1e4),
        part("C2", "capacitor", "p", "0", value=1e-8),
        part("R3", "resistor", "m", "0", value=1e3),
        part("R4", "resistor", "m", "out", value=2.3e3),
        part("R5", "resistor", "in", "p", value=1e6),
        part("U1", "opamp", "p", "m", "out", "vcc", "vee", parameters=AMP),
        supply=Supply("vcc", 9.0, 0.0, (("vee", -1.0),)),
    )
    poles = natural_frequencies(circuit)
    worst = poles[np.argmax(poles.real)]
    assert worst.real > 1.0
    assert abs(worst.imag) / (2 * np.pi) == pytest.approx(1592.0, rel=0.05)
    stage = prepare(circuit, RATE, "standard")
    assert any("oscillates by itself" in warning for warning in stage.warnings)
    stream = stage.stream(1)
    touch = np.zeros((4800, 1))
    touch[10:60] = 0.1
    out = np.concatenate([stream.process(touch), stream.finish()])[:, 0]
    assert np.all(np.isfinite(out))
    spectrum = np.abs(np.fft.rfft(out[2400:] * np.hanning(2400)))
    assert np.argmax(spectrum) * RATE / 2400 == pytest.approx(1500.0, rel=0.1)
    assert np.max(np.abs(out)) == pytest.approx(8.0, abs=0.5)
