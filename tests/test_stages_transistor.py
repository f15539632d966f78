"""The shipped transistor stages against hand formulas: resting voltages, gain and corners, heat and leakage."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import pytest
from scipy.optimize import brentq, fsolve

from stage_formulas import FREQUENCIES, THERMAL_VOLTS, Branch, audio, decibels, nodal
from tackbench.network import operating_point, response
from tackbench.stage import load_stage

S = 2j * np.pi * FREQUENCIES


def solved(name: str, **choices: Any) -> tuple[dict[str, float], np.ndarray]:
    """Resting voltages with the supply's side turned up (a positive-ground stage is mirrored), and the gains."""
    circuit = load_stage(name).variant(choices).circuit
    assert circuit.supply is not None
    sign = np.sign(circuit.supply.volts)
    volts = {node: sign * value for node, value in operating_point(circuit).node_volts.items()}
    return volts, np.asarray(response(circuit, FREQUENCIES))


@dataclass(frozen=True)
class Bipolar:
    """The parameters that the textbook transport model needs, at 25 degrees C."""

    saturation: float
    forward: float
    reverse: float
    early: float
    leakage: float
    base_emitter: float
    base_collector: float

    def currents(self, vbe: float, vbc: float) -> tuple[float, float]:
        """(collector, base) current in the active region, the collector junction well in reverse."""
        forward = self.saturation * np.exp(vbe / THERMAL_VOLTS)
        backward = self.saturation / self.reverse * np.expm1(vbc / THERMAL_VOLTS)
        backward += self.leakage * np.tanh(vbc / (2.0 * THERMAL_VOLTS))
        transport = (forward - self.saturation * np.exp(vbc / THERMAL_VOLTS)) * (1.0 - vbc / self.early)
        return transport - backward, (forward - self.saturation) / self.forward + backward

    def small_signal(self, base: str, collector: str, emitter: str, vbe: float, vbc: float) -> list[Branch]:
        """The hybrid-pi branches at a resting point in the active region."""
        forward = self.saturation * np.exp(vbe / THERMAL_VOLTS)
        slope, output = forward * (1.0 - vbc / self.early) / THERMAL_VOLTS, forward / self.early
        return [
            ((base, emitter), forward / (self.forward * THERMAL_VOLTS) + S * self.base_emitter),
            ((base, collector), S * self.base_collector),
            ((collector, emitter, base), slope - output),
            ((collector, emitter), output),
        ]


N2N5088 = Bipolar(5.911e-15, 520.0, 1.271, 62.37, 0.0, 4.973e-12, 4.017e-12)
BC549A = Bipolar(1.39e-14, 156.0, 4.0, 80.0, 0.0, 9e-12, 3.5e-12)
BC549C = Bipolar(1.39e-14, 580.0, 4.0, 80.0, 0.0, 9e-12, 3.5e-12)
AC128 = Bipolar(1.5e-6, 98.0, 10.0, 35.0, 2e-6, 1e-9, 1e-10)
AC128_HIGH = Bipolar(1.5e-6, 175.0, 10.0, 35.0, 10e-6, 1e-9, 1e-10)


def divider_bias(
    device: Bipolar, supply: float, upper: float, lower: float, emitter: float, collector: float
) -> tuple[float, float, float]:
    """(base, emitter, collector) volts of the common-emitter stage with a base divider."""

    def faults(volts: np.ndarray) -> list[float]:
        vb, ve, vc = volts
        ic, ib = device.currents(vb - ve, vb - vc)
        drawn = (supply - vb) / upper - vb / lower
        return [1e6 * (drawn - ib), 1e3 * (ve / emitter - ic - ib), 1e3 * ((supply - vc) / collector - ic)]

    vbe = 0.6 if device.saturation < 1e-9 else 0.15
    base = supply * lower / (upper + lower)
    found = fsolve(faults, [base, base - vbe, supply / 2.0], xtol=1e-12)
    return float(found[0]), float(found[1]), float(found[2])


# ------------------------------------------------------------------ one-transistor booster


@pytest.mark.parametrize("boost", [0.0, 0.7, 1.0])
def test_transistor_booster(boost: float) -> None:
    volts, gains = solved("transistor-booster", boost=boost, level=1.0)
    vb, ve, vc = divider_bias(N2N5088, 9.0, 330e3, 82e3, 2e3 + (boost in (0.0, 1.0)), 6.8e3)
    assert (volts["base"], volts["emit"], volts["coll"]) == pytest.approx((vb, ve, vc), abs=2e-3)
    share = 1.0 - audio(1.0 - boost)
    branches = [
        (("jack", "drive"), 1.0 / 10e3),
        (("jack", "b"), S * 47e-9),
        (("b", "0"), 1.0 / 330e3 + 1.0 / 82e3),
        (("wipe", "0"), 1.0 / max(2e3 * share, 1.0) + S * 47e-6),
        (("e", "wipe"), 1.0 / max(2e3 * (1.0 - share), 1.0)),
        (("c", "0"), 1.0 / 6.8e3),
        (("c", "send"), S * 2.2e-6),
        (("send", "0"), 1.0 / 50e3 + 1e-6),
        *N2N5088.small_signal("b", "c", "e", vb - ve, vb - vc),
    ]
    assert np.abs(decibels(gains / nodal(branches, "drive", "send"))).max() < 0.02


def test_transistor_booster_range_in_plain_figures() -> None:
    """About R3 over the emitter pot at the bottom, and gm R3 times what the source leaves at the top."""
    _, least = solved("transistor-booster", boost=0.0, level=1.0)
    _, most = solved("transistor-booster", boost=1.0, level=1.0)
    assert np.abs(least[4]) == pytest.approx(6.8e3 / 2e3 * 65.7 / 75.7 * 47.6 / 54.4, rel=0.06)
    assert np.abs(most[4]) == pytest.approx(75.0, rel=0.03)


# ------------------------------------------------------------------ field-effect boosters


def drain_rest(
    gate: float, supply: float, drain: float, source: float, law: Any, vds_least: float = 0.05
) -> tuple[float, float]:
    """(source, drain) volts where the square law's current meets the two resistors'."""

    def fault(current: float) -> float:
        vs, vd = current * source, supply - current * drain
        return float(law(gate - vs, vd - vs) - current)

    most = (supply - vds_least) / (drain + source)
    current = brentq(fault, 1e-9, most, xtol=1e-15)
    return current * source, supply - current * drain


@pytest.mark.parametrize(
    ("transistor", "idss", "pinch", "drain"),
    [("2N5457", 3e-3, -2.0, 5.6e3), ("low", 1e-3, -0.5, 5.6e3), ("J201", 0.5e-3, -0.8, 22e3)],
)
@pytest.mark.parametrize("boost", [0.0, 1.0])
def test_jfet_booster(transistor: str, idss: float, pinch: float, drain: float, boost: float) -> None:
    volts, gains = solved("jfet-booster", transistor=transistor, boost=boost, level=1.0)

    def law(vgs: float, vds: float) -> float:
        return idss * max(1.0 - vgs / pinch, 0.0) ** 2 * (1.0 + 0.01 * vds)

    vs, vd = drain_rest(0.0, 9.0, drain, 1.2e3, law)
    assert (volts["source"], volts["drain"]) == pytest.approx((vs, vd), abs=2e-3)
    beta, over = idss / pinch**2, -vs - pinch
    farads = (3e-12, 1.3e-12) if transistor == "J201" else (3e-12, 1.5e-12)
    pass_ohms = max(5e3 * audio(1.0 - boost), 1.0)
    branches = [
        (("drive", "g"), S * 33e-9),
        (("g", "0"), 1e-6),
        (("g", "s"), S * farads[0]),
        (("g", "d"), S * farads[1]),
        (("d", "s", "g"), 2.0 * beta * over * (1.0 + 0.01 * (vd - vs))),
        (("d", "s"), beta * over**2 * 0.01),
        (("s", "0"), 1.0 / 1.2e3 + 1.0 / (pass_ohms + 1.0 / (S * 47e-6))),
        (("d", "0"), 1.0 / drain),
        (("d", "send"), S * 1e-6),
        (("send", "0"), 1.0 / 500e3 + 1e-6),
    ]
    assert np.abs(decibels(gains / nodal(branches, "drive", "send"))).max() < 0.02


def test_the_hottest_jfet_of_its_type_goes_dead_and_wakes_with_a_smaller_resistor() -> None:
    _, dead = solved("jfet-booster", transistor="high")
    _, awake = solved("jfet-booster", transistor="high", R2="1k5")
    assert decibels(dead[4]) < -10.0
    assert decibels(awake[4] / dead[4]) > 12.0


@pytest.mark.parametrize(
    ("transistor", "threshold", "transconductance", "farads"),
    [
        ("2N7000", 2.0, 0.06, (25e-12, 5e-12)),
        ("low", 0.8, 0.06, (25e-12, 5e-12)),
        ("high", 3.0, 0.06, (25e-12, 5e-12)),
        ("BS170", 2.0, 0.0694, (50e-12, 10e-12)),
    ],
)
@pytest.mark.parametrize("boost", [0.0, 1.0])
def test_mosfet_booster(
    transistor: str, threshold: float, transconductance: float, farads: tuple[float, float], boost: float
) -> None:
    volts, gains = solved("mosfet-booster", transistor=transistor, boost=boost, level=1.0)
    gate = 9.0 * 680.0 / 1680.0

    def law(vgs: float, vds: float) -> float:
        return 0.5 * transconductance * max(vgs - threshold, 0.0) ** 2 * (1.0 + 0.01 * vds)

    vs, vd = drain_rest(gate, 9.0, 2.2e3, 1e3, law)
    assert (volts["gate"], volts["source"], volts["drain"]) == pytest.approx((gate, vs, vd), abs=2e-3)
    over = gate - vs - threshold
    pass_ohms = max(10e3 * audio(1.0 - boost), 1.0)
    branches = [
        (("drive", "g"), S * 22e-9),
        (("g", "0"), 1e-6 + 1.0 / 680e3),
        (("g", "s"), S * farads[0]),
        (("g", "d"), S * farads[1]),
        (("d", "s", "g"), transconductance * over * (1.0 + 0.01 * (vd - vs))),
        (("d", "s"), 0.5 * transconductance * over**2 * 0.01),
        (("s", "0"), 1e-3 + 1.0 / (pass_ohms + 1.0 / (S * 47e-6))),
        (("d", "0"), 1.0 / 2.2e3),
        (("d", "send"), S * 4.7e-6),
        (("send", "0"), 1.0 / 50e3 + 1e-6),
    ]
    assert np.abs(decibels(gains / nodal(branches, "drive", "send"))).max() < 0.02


# ------------------------------------------------------------------ germanium treble booster


@pytest.mark.parametrize(
    ("transistor", "device", "range_", "farads"),
    [("germanium", AC128, "treble", 3.3e-9), ("leaky", AC128_HIGH, "full", 100e-9)],
)
def test_treble_booster(transistor: str, device: Bipolar, range_: str, farads: float) -> None:
    volts, gains = solved("treble-booster", transistor=transistor, range=range_, boost=1.0)
    vb, ve, vc = divider_bias(device, 9.0, 330e3, 56e3, 2.7e3, 8.2e3)
    assert (volts["base"], volts["emit"], volts["coll"]) == pytest.approx((vb, ve, vc), abs=2e-3)
    branches = [
        (("jack", "drive"), 1.0 / 10e3),
        (("jack", "b"), S * farads),
        (("b", "0"), 1.0 / 330e3 + 1.0 / 56e3),
        (("e", "0"), 1.0 / 2.7e3 + S * 33e-6),
        (("c", "0"), 1.0 / 8.2e3),
        (("c", "send"), S * 22e-9),
        (("send", "0"), 1.0 / 250e3 + 1e-6),
        *device.small_signal("b", "c", "e", vb - ve, vb - vc),
    ]
    assert np.abs(decibels(gains / nodal(branches, "drive", "send"))).max() < 0.02


def test_heat_and_leakage_pull_the_treble_boosters_collector_down() -> None:
    """Leakage doubles every 10 K; through the base divider it raises the current, so the collector falls."""
    cold, room, hot = (solved("treble-booster", temperature=celsius)[0]["coll"] for celsius in (5, 25, 45))
    leaky = solved("treble-booster", transistor="leaky")[0]["coll"]
    assert cold > room + 0.2
    assert hot < room - 0.6
    assert leaky < room - 0.6


# ------------------------------------------------------------------ fuzzes


def pair_bias(
    device: Bipolar, first: float, back: float, emitter: float, collector: float
) -> tuple[float, float, float, float]:
    """(b1, c1, e2, c2) volts of the direct-coupled pair on 9 V with feedback bias from the second emitter."""

    def faults(volts: np.ndarray) -> list[float]:
        b1, c1, e2, c2 = volts
        ic1, ib1 = device.currents(b1, b1 - c1)
        ic2, ib2 = device.currents(c1 - e2, c1 - c2)
        return [
            1e3 * ((9.0 - c1) / first - ic1 - ib2),
            1e6 * ((e2 - b1) / back - ib1),
            1e3 * (ic2 + ib2 - e2 / emitter - (e2 - b1) / back),
            1e3 * ((9.0 - c2) / collector - ic2),
        ]

    one = 0.6 if device.saturation < 1e-9 else 0.15
    b1, c1, e2, c2 = fsolve(faults, [one, 2.0 * one + 0.3, one + 0.3, 4.5], xtol=1e-12)
    return float(b1), float(c1), float(e2), float(c2)


STARVED = {"top": "dark", "bias": "starved"}


@pytest.mark.parametrize(
    ("name", "choices", "device", "values"),
    [
        ("fuzz-germanium", {}, AC128, (12e3, 120e3, 1e-6, 0.0, 12e3, 1.2e3, 33e-9)),
        ("fuzz-silicon", {}, BC549A, (47e3, 150e3, 470e-9, 47e-12, 10e3, 1e3, 22e-9)),
        ("fuzz-silicon", {"gain-group": "C"}, BC549C, (47e3, 150e3, 470e-9, 47e-12, 10e3, 1e3, 22e-9)),
        (
            "fuzz-silicon",
            {"top": "dark", "bias": "starved"},
            BC549A,
            (47e3, 150e3, 470e-9, 470e-12, 18e3, 1e3, 22e-9),
        ),
    ],
    ids=["germanium", "silicon A", "silicon C", "silicon starved"],
)
@pytest.mark.parametrize("fuzz", [0.0, 1.0])
def test_fuzz_pair(
    name: str, choices: dict[str, Any], device: Bipolar, values: tuple[float, ...], fuzz: float
) -> None:
    first, back, input_farads, top, collector, tap, output_farads = values
    volts, gains = solved(name, fuzz=fuzz, level=1.0, **choices)
    b1, c1, e2, c2 = pair_bias(device, first, back, 2e3 + 1.0, collector + tap)
    assert [volts[node] for node in ("b1", "c1", "e2", "c2")] == pytest.approx([b1, c1, e2, c2], abs=2e-3)
    lower, upper = max(2e3 * fuzz, 1.0), max(2e3 * (1.0 - fuzz), 1.0)
    branches = [
        (("jack", "drive"), 1.0 / 10e3),
        (("jack", "b1"), S * input_farads),
        (("b1", "c1"), S * top),
        (("c1", "0"), 1.0 / first),
        (("b1", "e2"), 1.0 / back),
        (("e2", "wipe"), 1.0 / upper),
        (("wipe", "0"), 1.0 / lower + S * 33e-6),
        (("c2", "tap"), 1.0 / collector),
        (("tap", "0"), 1.0 / tap),
        (("tap", "send"), S * output_farads),
        (("send", "0"), 1.0 / 250e3 + 1e-6),
        *device.small_signal("b1", "c1", "0", b1, b1 - c1),
        *device.small_signal("c1", "c2", "e2", c1 - e2, c1 - c2),
    ]
    assert np.abs(decibels(gains / nodal(branches, "drive", "send"))).max() < 0.05


def test_heat_moves_the_germanium_fuzz_and_hardly_the_silicon_one() -> None:
    ge = [solved("fuzz-germanium", temperature=celsius)[0]["c2"] for celsius in (15, 25, 35)]
    si = [solved("fuzz-silicon", temperature=celsius)[0]["c2"] for celsius in (15, 25, 35)]
    assert max(ge) - min(ge) > 1.0
    assert max(si) - min(si) < 0.5
