"""The shipped op-amp stages against hand formulas: gain and corners, where they clip, what their rails are."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from scipy.optimize import brentq

from reference.solver import ReferenceSolver
from stage_formulas import (
    CHIPS,
    FREQUENCIES,
    THERMAL_VOLTS,
    Branch,
    audio,
    decibels,
    nodal,
    noninverting,
    parallel,
)
from tackbench.network import operating_point, response
from tackbench.stage import load_stage

S = 2j * np.pi * FREQUENCIES


def solved(name: str, **choices: Any) -> np.ndarray:
    return np.asarray(response(load_stage(name).variant(choices).circuit, FREQUENCIES))


def rest(name: str, **choices: Any) -> dict[str, float]:
    return dict(operating_point(load_stage(name).variant(choices).circuit).node_volts)


def swing(name: str, node: str, amplitude: float, hertz: float = 1_000.0, **choices: Any) -> tuple[float, float]:
    """Lowest and highest volts of a node over the 20th period of a sine, by the independent solver."""
    circuit = load_stage(name).variant(choices).circuit
    times = np.arange(20 * 128 + 1) / (128.0 * hertz)
    solver = ReferenceSolver(circuit, relative=1e-5, absolute=1e-7)
    moved = solver.transient(lambda t: amplitude * np.sin(2.0 * np.pi * hertz * t), times, nodes=[node])
    last = moved.nodes[node][-128:]
    return float(last.min()), float(last.max())


# ------------------------------------------------------------------ flat boost


@pytest.mark.parametrize(("boost", "c1", "c4"), [(0.0, 47e-9, 47e-12), (0.7, 47e-9, 47e-12), (1.0, 1e-9, 1e-9)])
def test_flat_boost_gain_and_corners(boost: float, c1: float, c4: float) -> None:
    leg = 4.7e3 + max(50e3 * audio(1.0 - boost), 1.0) + 1.0 / (S * 10e-6)
    load = 1.0 / (S * 1e-6) + parallel(100e3, 1e6)
    gain = noninverting(S, "TL072", parallel(47e3, 1.0 / (S * c4)), leg, 470.0 + load)
    hand = 1e6 / (1e6 + 1.0 / (S * c1)) * gain * parallel(100e3, 1e6) / (470.0 + load)
    tone = {"bass": "tight", "top": "soft"} if c1 == 1e-9 else {}
    assert np.abs(decibels(solved("flat-boost", boost=boost, **tone) / hand)).max() < 0.02


def test_flat_boost_reaches_from_five_to_twenty_one_decibels() -> None:
    least, most = (decibels(solved("flat-boost", boost=boost))[4] for boost in (0.0, 1.0))
    assert least == pytest.approx(20 * np.log10(1 + 47 / 54.7), abs=0.1)
    assert most == pytest.approx(20 * np.log10(1 + 47 / 4.7), abs=0.1)


# ------------------------------------------------------------------ soft clipper


def soft_by_hand(drive: float, tone: float, diode_ohms: float, diode_farads: float) -> np.ndarray:
    feedback = parallel(22e3 + 250e3 * audio(drive), 1.0 / (S * (100e-12 + diode_farads)), diode_ohms)
    leg = 2.2e3 + 1.0 / (S * 150e-9)
    shade = max(20e3 * tone, 1.0) + 1.0 / (S * 33e-9)
    after = parallel(shade, 100e3, 1e6)
    onward = 1.0 / (S * 1e-6) + 3.3e3 + after
    gain = noninverting(S, "4558", feedback, leg, onward)
    return np.asarray(680e3 / (680e3 + 1.0 / (S * 47e-9)) * gain * after / onward)


@pytest.mark.parametrize(("drive", "tone"), [(0.6, 0.7), (1.0, 0.0), (0.3, 1.0)])
def test_soft_clipper_gain_and_corners(drive: float, tone: float) -> None:
    """The pair at rest is n·Vt / (2 IS): 10.2 megohm of silicon."""
    hand = soft_by_hand(drive, tone, 1.872 * THERMAL_VOLTS / (2 * 2.353e-9), 2 * 1.6e-12)
    full = solved("soft-clipper", drive=drive, tone=tone, level=1.0)
    assert np.abs(decibels(full / hand)).max() < 0.02


def test_germanium_diodes_take_gain_from_the_smallest_signal() -> None:
    """n·Vt / (2 IS) of the germanium pair is 15.6 kilohm, less than the feedback it stands across."""
    hand = soft_by_hand(0.6, 0.7, 1.5 * THERMAL_VOLTS / (2 * 1.239e-6), 2 * 0.8e-12)
    full = solved("soft-clipper", clip="germanium", level=1.0)
    assert np.abs(decibels(full / hand)).max() < 0.05


@pytest.mark.parametrize(("clip", "up", "down"), [("silicon", 1, 1), ("asymmetric", 1, 2)])
def test_soft_clipper_adds_a_diode_voltage_to_the_dry_signal(clip: str, up: int, down: int) -> None:
    """At the crest, where no capacitor's current matters: amp - inv is the diodes' voltage at the leg's current."""
    amplitude = 0.3
    leg = abs(2.2e3 + 1.0 / (2j * np.pi * 2_000.0 * 150e-9))
    current = amplitude / leg
    one = 1.872 * THERMAL_VOLTS * np.log1p(current / 2.353e-9) + 0.84 * current
    low, high = swing("soft-clipper", "amp", amplitude, 2_000.0, clip=clip, drive=1.0)
    assert high - 4.5 == pytest.approx(amplitude + up * one, abs=0.06)
    assert 4.5 - low == pytest.approx(amplitude + down * one, abs=0.09)


# ------------------------------------------------------------------ rail clipper


def test_rail_clipper_gain_and_corners() -> None:
    for drive, top in ((0.7, "soft"), (1.0, "open")):
        feedback = parallel(4.7e3 + 250e3 * audio(drive), 1.0 / (S * 22e-12))
        leg = 2.2e3 + 1.0 / (S * 470e-9)
        after = parallel(100e3, 1e6, *([1.0 / (S * 2.2e-9)] if top == "soft" else []))
        onward = 1.0 / (S * 1e-6) + 10e3 + after
        hand = 1e6 / (1e6 + 1.0 / (S * 10e-9)) * noninverting(S, "TLC2272", feedback, leg, onward) * after / onward
        full = solved("rail-clipper", drive=drive, top=top, level=1.0)
        assert np.abs(decibels(full / hand)).max() < 0.03


@pytest.mark.parametrize("chip", ["TLC2272", "LM358", "TL072"])
def test_rail_clipper_meets_each_chips_rails(chip: str) -> None:
    """Far overdriven, the output stands at the rails less what the chip loses to them (and a soft knee of 0.1 V)."""
    *_, high_loss, low_loss = CHIPS[chip]
    low, high = swing("rail-clipper", "amp", 0.5, 300.0, chip=chip, drive=1.0)
    assert high == pytest.approx(5.0 - high_loss, abs=0.12)
    assert low == pytest.approx(low_loss, abs=0.12)


# ------------------------------------------------------------------ zener and MOSFET clipper


def test_hard_clipper_gain_and_corners() -> None:
    feedback = 3.3e3 + 100e3 * audio(0.7)
    leg = 1e3 + 1.0 / (S * 2.2e-6)
    after = parallel(50e3, 1e6)
    onward = 1.0 / (S * 4.7e-6) + 1e3 + after
    hand = 1e6 / (1e6 + 1.0 / (S * 22e-9)) * noninverting(S, "TL072", feedback, leg, onward) * after / onward
    full = solved("hard-clipper", clip="off", level=1.0)
    assert np.abs(decibels(full / hand)).max() < 0.01


def zener_pair(current: float) -> float:
    """One zener broken down, the other forward: the list's 5.1 V at 49 mA, and Shockley's law."""
    return float(5.1 + 13.35 * THERMAL_VOLTS * np.log(current / 49e-3) + 1.8 * THERMAL_VOLTS * np.log(current / 1e-9))


def mosfet_pair(current: float) -> float:
    """A MOSFET with gate on drain in saturation, and the other one's body diode."""
    return float(2.0 + np.sqrt(2.0 * current / 0.06) + THERMAL_VOLTS * np.log(current / 1e-14))


def led(current: float) -> float:
    return float(2.0 * THERMAL_VOLTS * np.log(current / 2.175e-16) + 15.39 * current)


@pytest.mark.parametrize(
    ("clip", "ceiling"),
    [("zener", zener_pair), ("mosfet", mosfet_pair), ("led", led)],
    ids=lambda value: str(value)[:9],
)
def test_hard_clipper_stands_at_its_ceiling(clip: str, ceiling: Any) -> None:
    """The op-amp stands 7.5 V above its middle; what R6 and the pot let through fixes current and volts."""
    volts = brentq(lambda v: ceiling((7.5 - v) / 1e3 - v / 47.6e3) - v, 0.1, 7.0)
    low, high = swing("hard-clipper", "clip", 0.6, 400.0, clip=clip, drive=1.0)
    assert high == pytest.approx(volts, abs=0.12)
    assert -low == pytest.approx(volts, abs=0.12)


# ------------------------------------------------------------------ charge pump


@pytest.mark.parametrize("pump", ["on", "plain"])
def test_charge_pump_gain(pump: str) -> None:
    leg = 2.2e3 + (1.0 / (S * 22e-6) if pump == "plain" else 0.0)
    half = parallel(47e3, 47e3, 1.0 / (S * 10e-6)) if pump == "plain" else 0.0
    after = parallel(50e3, 1e6)
    onward = 2.2e3 + after + (1.0 / (S * 4.7e-6) if pump == "plain" else 0.0)
    gain = noninverting(S, "5534", 4.7e3 + 100e3 * audio(0.6), leg, onward)
    hand = (470e3 + half) / (470e3 + half + 1.0 / (S * 47e-9)) * gain * after / onward
    assert np.abs(decibels(solved("charge-pump", pump=pump, level=1.0) / hand)).max() < 0.01


def test_charge_pump_rails_and_what_they_cost() -> None:
    """Rails at twice the supply either side; each draws 4 mA through its converter, so 16 mA from the battery, which
    falls by that much over its 2 ohm."""
    volts = rest("charge-pump")
    assert volts["vcc"] == pytest.approx(9.0 - 2.0 * 16e-3, abs=1e-3)
    assert volts["up"] == pytest.approx(2.0 * volts["vcc"], rel=1e-9)
    assert volts["down"] == pytest.approx(-2.0 * volts["vcc"], rel=1e-9)
    current = operating_point(load_stage("charge-pump").variant().circuit).supply_current
    assert current == pytest.approx(16e-3, rel=0.01)


def test_charge_pump_swings_four_times_as_far() -> None:
    """Rails less the 5534's 2 V either side: 31.9 V with the pump, 5 V on the battery alone."""
    wide = swing("charge-pump", "amp", 2.0, 300.0, boost=1.0)
    plain = swing("charge-pump", "amp", 2.0, 300.0, boost=1.0, pump="plain")
    assert wide[1] - wide[0] == pytest.approx(2 * (17.93 - 2.0), abs=0.4)
    assert plain[1] - plain[0] == pytest.approx(9.0 - 4.0, abs=0.25)


# ------------------------------------------------------------------ boost with a tone network


def network(treble: float, middle: float, bass: float, slope: float, top: float) -> tuple[np.ndarray, np.ndarray]:
    """(transfer, input impedance) of the three-band network into 1 megohm, by its node equations."""
    branches: list[Branch] = [
        (("drive", "high"), S * top),
        (("drive", "slope"), 1.0 / slope),
        (("slope", "bass"), S * 150e-9),
        (("slope", "middle"), S * 68e-9),
        (("bass", "out"), 1.0 / max(50e3 * treble, 1.0)),
        (("out", "high"), 1.0 / max(50e3 * (1.0 - treble), 1.0)),
        (("middle", "bass"), 1.0 / max(50e3 * audio(bass), 1.0)),
        (("middle", "0"), 1.0 / max(5e3 * middle, 1.0)),
        (("out", "0"), 1e-6),
    ]
    current = S * top * (1.0 - nodal(branches, "drive", "high"))
    current += (1.0 - nodal(branches, "drive", "slope")) / slope
    return nodal(branches, "drive", "out"), 1.0 / current


@pytest.mark.parametrize(
    ("treble", "middle", "bass", "slope", "top"),
    [(0.5, 0.5, 0.5, 8.2e3, 1.5e-9), (1.0, 0.0, 1.0, 22e3, 1.5e-9), (0.0, 1.0, 0.2, 3.3e3, 680e-12)],
)
def test_tone_network_follows_its_node_equations(
    treble: float, middle: float, bass: float, slope: float, top: float
) -> None:
    transfer, impedance = network(treble, middle, bass, slope, top)
    after = parallel(47e3, impedance)
    onward = 1.0 / (S * 4.7e-6) + after
    leg = 4.7e3 + 1.0 / (S * 10e-6)
    gain = noninverting(S, "TL072", max(100e3 * audio(0.8), 1.0), leg, onward)
    hand = 1e6 / (1e6 + 1.0 / (S * 22e-9)) * gain * after / onward * transfer
    names = {8.2e3: "8k2", 22e3: "22k", 3.3e3: "3k3"}
    choices = {"slope": names[slope], "treble-cap": "1n5" if top == 1.5e-9 else "680p"}
    full = solved("tone-boost", treble=treble, middle=middle, bass=bass, **choices)
    assert np.abs(decibels(full / hand)).max() < 0.02


def test_tone_knobs_turn_the_right_ends() -> None:
    """Each knob moves its own end by 6 dB or more and the far end by less than half of that."""
    low, high = 1, 7  # 50 Hz, 15 kHz
    bass = decibels(solved("tone-boost", bass=1.0) / solved("tone-boost", bass=0.0))
    treble = decibels(solved("tone-boost", treble=1.0) / solved("tone-boost", treble=0.0))
    assert bass[low] > 6.0
    assert abs(bass[high]) < 0.5 * bass[low]
    assert treble[high] > 6.0
    assert abs(treble[low]) < 0.5 * treble[high]
