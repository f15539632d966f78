"""The two-voice stage: its gain and corners by hand formulas, its clip levels, every position it offers."""

from __future__ import annotations

import itertools

import numpy as np
import pytest

from reference.solver import ReferenceSolver
from tackbench.stage import load_stage

STAGE = load_stage("two-voice")
FULL_UP = {"gain": 1.0, "level": 1.0}
FEEDBACK = 6.8e3 + 100e3
GAIN_BANDWIDTH, OPEN_LOOP = 3e6, 3e5  # the 4558's


def decibels(ratio: complex | np.ndarray) -> np.ndarray:
    return 20.0 * np.log10(np.abs(ratio))


def solver(**choices: object) -> ReferenceSolver:
    return ReferenceSolver(STAGE.variant({**FULL_UP, **choices}).circuit, relative=1e-6, absolute=1e-8)


def parallel(*impedances: complex | np.ndarray) -> np.ndarray:
    return np.asarray(1.0 / sum(1.0 / np.asarray(z, dtype=complex) for z in impedances))


def by_hand(
    frequency: np.ndarray, drive: bool, chip: tuple[float, float] = (GAIN_BANDWIDTH, OPEN_LOOP)
) -> np.ndarray:
    """Textbook formula of the non-inverting amplifier of finite gain and output resistance, its input and output."""
    s = 2j * np.pi * frequency
    source = 1e6 / (1e6 + 1e3 + 1.0 / (s * 22e-9))
    ground = 470.0 + 1.0 / (s * 330e-9) + 1.0 / (s * 10e-6) if drive else 470.0 + 3.9e3 + 1.0 / (s * 10e-6)
    returned = ground / (ground + FEEDBACK)
    open_loop = 2.0 * np.pi * GAIN_BANDWIDTH / (s + 2.0 * np.pi * GAIN_BANDWIDTH / OPEN_LOOP)
    shunt = parallel(100e3, 1e6, *([1.0 / (s * 6.8e-9)] if drive else []))
    onward = 4.7e3 + 1.0 / (s * 4.7e-6) + shunt
    load = parallel(onward, ground + FEEDBACK)
    loaded = open_loop * load / (load + 75.0)
    return source * loaded / (1.0 + loaded * returned) * shunt / onward


def output_swing(amplitude: float, **choices: object) -> float:
    """Volts peak to peak of the output on a 1 kHz sine, the 30th period: coupling capacitors have moved by then."""
    times = np.arange(2880) / 96_000.0
    moved = solver(**choices).transient(lambda t: amplitude * np.sin(2e3 * np.pi * t), times)
    return float(np.ptp(moved.output[-96:]))


@pytest.mark.parametrize("drive", [False, True])
def test_response_follows_the_hand_formula(drive: bool) -> None:
    frequency = np.array([20.0, 30.0, 100.0, 400.0, 1_000.0, 2_300.0, 5_000.0, 15_000.0])
    solved = solver(voice="drive" if drive else "flat", clip="off").response(frequency)
    assert np.abs(decibels(solved / by_hand(frequency, drive))).max() < 0.005


def test_flat_voice_is_flat() -> None:
    """1 + (R5 + VR1) / (R6 + R7) times what R8 leaves of it: 24 times; within 1 dB from 30 Hz to 15 kHz."""
    frequency = np.geomspace(30.0, 15e3, 60)
    solved = np.abs(solver(voice="flat", clip="off").response(frequency))
    expected = (1.0 + FEEDBACK / 4.37e3) * 90.909e3 / (90.909e3 + 4.7e3)
    assert solved.max() == pytest.approx(expected, rel=0.005)
    assert decibels(solved.max()) == pytest.approx(28.0, abs=0.5)
    assert np.ptp(decibels(solved)) < 1.0


def test_drive_voice_peaks_between_one_and_three_kilohertz() -> None:
    frequency = np.geomspace(100.0, 15e3, 200)
    solved = np.abs(solver(clip="off").response(frequency))
    best = int(np.argmax(solved))
    assert 1_000.0 < frequency[best] < 3_000.0
    assert decibels(solved[best]) == pytest.approx(46.0, abs=0.6)
    low, high = solved[frequency < 300.0], solved[frequency > 8_000.0]
    assert decibels(solved[best] / low.max()) > 8.0
    assert decibels(solved[best] / high.max()) > 5.0


def test_low_cut_lies_where_its_capacitors_put_it() -> None:
    """3 dB under the uncut leg at 1 / (2 pi R6 C), C = C4 and C2 in series, where the amplifier has gain to spare."""
    for bass, farads in (("tight", 330e-9), ("full", 2.2e-6)):
        corner = 1.0 / (2.0 * np.pi * 470.0 * farads * 10e-6 / (farads + 10e-6))
        cut = solver(clip="off", gain=0.5, bass=bass).response([corner])[0]
        uncut = solver(clip="off", gain=0.5, bass=bass, C4="470u", C2="4700u").response([corner])[0]
        assert decibels(cut / uncut) == pytest.approx(-3.01, abs=0.25)


def test_the_node_between_the_series_capacitors_holds_no_charge() -> None:
    """C4 and C2 share half the supply in inverse proportion; no resistor reaches the node between them."""
    volts = solver().operating_point()
    assert volts["bias"] == pytest.approx(4.5, abs=1e-6)
    assert volts["amp"] == pytest.approx(4.5, abs=1e-3)
    assert volts["low"] == pytest.approx(volts["inv"] * 330.0 / 10_330.0, rel=1e-6)


@pytest.mark.parametrize("supply", [9.0, 24.0])
@pytest.mark.parametrize(
    ("clip", "least", "most"), [("germanium", 0.45, 0.70), ("silicon", 1.1, 1.4), ("led", 2.4, 3.6)]
)
def test_clip_levels_of_the_trade(clip: str, least: float, most: float, supply: float) -> None:
    """Volts peak to peak at the jack, level full up (common practice, no source; the LED row from memory)."""
    assert least < output_swing(0.35, clip=clip, supply=supply) < most


@pytest.mark.parametrize(("model", "least", "most"), [("germanium point contact", 0.45, 0.70), ("1N34A", 0.45, 0.85)])
def test_other_germanium_entries_clip_alike(model: str, least: float, most: float) -> None:
    assert least < output_swing(0.35, supply=24.0, **{"D1+D2": model}) < most


@pytest.mark.parametrize(("supply", "least", "most"), [(24.0, 15.0, 20.0), (9.0, 5.0, 8.0)])
def test_the_flat_voice_has_headroom_at_24_volts_only(supply: float, least: float, most: float) -> None:
    """A 1 kHz sine of 0.35 V peak, gain and level full up (common practice, no source)."""
    assert least < output_swing(0.35, voice="flat", clip="off", supply=supply) < most


def test_gain_at_its_lowest() -> None:
    """The pot at its end keeps 1 ohm: 1 + (R5 + 1) / (R6 + R7)."""
    solved = np.abs(solver(voice="flat", clip="off", gain=0.0).response([1_000.0]))[0]
    assert solved == pytest.approx((1.0 + 6.801e3 / 4.37e3) * 90.909e3 / (90.909e3 + 4.7e3), rel=0.005)


@pytest.mark.parametrize("supply", STAGE.supply.try_volts)
def test_every_combination_of_positions_builds_within_its_ratings(supply: float) -> None:
    names = list(STAGE.mods)
    for positions in itertools.product(*(STAGE.mods[name].positions for name in names)):
        variant = STAGE.variant({**dict(zip(names, positions, strict=True)), "supply": supply})
        assert variant.circuit.parts
        assert variant.over_limits == ()


def test_values_are_of_the_preferred_series() -> None:
    """Resistors of E12, capacitors of E6, pots of 1-2-5 and 1.0 (IEC 60063; the lists from memory)."""
    twelve = {10, 12, 15, 18, 22, 27, 33, 39, 47, 56, 68, 82}
    series = {"resistor": twelve, "capacitor": {10, 15, 22, 33, 47, 68}}
    for part in STAGE.variant().circuit.parts:
        if part.kind in series and not part.section:
            assert part.value is not None
            digits = part.value / 10.0 ** (np.floor(np.log10(part.value)) - 1.0)
            assert min(abs(digits - known) for known in series[part.kind]) < 1e-6, part.ref


def test_every_part_that_needs_a_rating_has_one() -> None:
    for part in STAGE.variant().circuit.parts:
        if part.kind == "capacitor":
            assert part.rated_volts is not None, part.ref
