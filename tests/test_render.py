"""Streaming a take through a circuit: what may not change a sample, and what the kernel's two rules must agree on."""

from __future__ import annotations

import threading
from types import SimpleNamespace

import numpy as np
import pytest
from numpy.testing import assert_array_equal

from tackbench import load_stage
from tackbench.circuit import Circuit, Part, Supply
from tackbench.errors import InputError, WorkError
from tackbench.kernel import plain
from tackbench.render.prepared import PreparedStage, Quality, prepare, prepare_with
from tackbench.render.whole import render

RATE = 48000


def clipper(ohms: float = 2200.0, farads: float = 1e-8) -> Circuit:
    (parameters,) = (part.parameters for part in drive(clip="silicon").parts if part.ref == "D1")
    return Circuit(
        "clipper",
        (
            Part("R1", "resistor", ("in", "out"), ohms),
            Part("C1", "capacitor", ("out", "0"), farads),
            Part("D1", "diode", ("out", "0"), parameters=parameters),
            Part("D2", "diode", ("0", "out"), parameters=parameters),
        ),
        "in",
        0.0,
        "out",
        1e6,
    )


def drive(**choices: object) -> Circuit:
    return load_stage("two-voice").variant(**choices).circuit


def chord(seconds: float, rate: int = RATE, peak: float = 0.4) -> np.ndarray:
    t = np.arange(int(seconds * rate)) / rate
    volts = sum(np.sin(2 * np.pi * f * t) * np.exp(-3 * t) for f in (110.0, 164.81, 220.0, 277.18))
    return np.asarray(peak / 4 * volts)[:, None]


def through(stage: PreparedStage, volts: np.ndarray, block: int = 4096) -> np.ndarray:
    stream = stage.stream(volts.shape[1])
    pieces = [stream.process(volts[start : start + block]) for start in range(0, len(volts), block)]
    return np.concatenate([*pieces, stream.finish()])


def decibels(error: np.ndarray, signal: np.ndarray) -> float:
    return float(20 * np.log10(np.std(error) / np.std(signal)))


@pytest.mark.parametrize("quality", ["draft", "standard", "best"])
@pytest.mark.parametrize("block", [1, 7, 999, 100000])
def test_the_blocks_do_not_change_a_sample(quality: str, block: int) -> None:
    stage, volts = prepare(drive(), RATE, quality), chord(0.03)
    assert_array_equal(through(stage, volts, block), through(stage, volts))


def test_channels_threads_and_company_do_not_change_a_sample() -> None:
    stage, volts = prepare(drive(), RATE, "standard"), chord(0.05)
    alone = through(stage, volts)
    company = through(stage, np.hstack([volts, -2 * volts, volts]))
    assert_array_equal(company[:, :1], alone)
    assert_array_equal(company[:, 2:], alone)
    results: list[np.ndarray] = []
    workers = [threading.Thread(target=lambda: results.append(through(stage, volts, 300))) for _ in range(4)]
    for worker in workers:
        worker.start()
    for worker in workers:
        worker.join()
    assert len(results) == 4
    for result in results:
        assert_array_equal(result, alone)


@pytest.mark.parametrize(("title", "circuit"), [("clipper", clipper()), ("drive", drive(clip="silicon"))])
def test_two_rules_agree(title: str, circuit: Circuit) -> None:
    """The trapezoid, corrected for its error, and the exact linear rule are two derivations of one curve."""
    volts = chord(0.05)
    exact = through(prepare_with(circuit, RATE, Quality("exact", 4, 8, 1e-7)), volts)
    corrected = through(prepare_with(circuit, RATE, Quality("trapezoid", 4, 8, 1e-7)), volts)
    bare = through(prepare_with(circuit, RATE, Quality("trapezoid", 6, 6, np.inf)), volts)
    assert decibels(exact - corrected, corrected) < -125
    assert decibels(bare - corrected, corrected) < -95


@pytest.mark.parametrize(("quality", "limit"), [("draft", -60.0), ("standard", -100.0), ("best", -115.0)])
def test_qualities_keep_their_distance_from_a_fine_solution(quality: str, limit: float) -> None:
    circuit, volts = drive(), chord(0.06)
    fine = through(prepare_with(circuit, RATE, Quality("trapezoid", 4, 9, 1e-8)), volts)
    assert decibels(through(prepare(circuit, RATE, quality), volts) - fine, fine) < limit


@pytest.mark.parametrize("rule", ["trapezoid", "exact"])
def test_a_low_pass_against_its_step_response(rule: str) -> None:
    """First-order lag on a raised-cosine burst, by superposition of its two exact exponential responses."""
    ohms, farads = 10e3, 10e-9
    circuit = Circuit(
        "lag",
        (Part("R1", "resistor", ("in", "out"), ohms), Part("C1", "capacitor", ("out", "0"), farads)),
        "in",
        0.0,
        "out",
        None,
    )
    t, omega, tau = np.arange(2400) / RATE, 2 * np.pi * 500.0, ohms * farads
    volts = np.sin(omega * t) ** 3 * np.exp(-200 * t)  # smooth enough at zero to be band-limited to -130 dB

    def response(frequency: float) -> np.ndarray:
        s = -200 + 1j * frequency
        return np.imag((np.exp(s * t) - np.exp(-t / tau)) / (1 + s * tau))

    expected = 0.75 * response(omega) - 0.25 * response(3 * omega)
    got = through(prepare_with(circuit, RATE, Quality(rule, 0, 8, 1e-6)), volts[:, None])[:, 0]
    assert decibels((got - expected)[200:2200], expected) < -95


@pytest.mark.parametrize("rate", [8000, 11025, 44100, 96000, 192000, 384000])
def test_every_rate_gives_the_same_sound(rate: int) -> None:
    """A 440 Hz tone: the settled level of the fundamental and third harmonic do not depend on the take's rate."""
    level = {}
    for each in (48000, rate):
        t = np.arange(int(0.06 * each)) / each
        volts = np.sin(2 * np.pi * 440 * t)[:, None]
        out = through(prepare(clipper(), each, "standard"), volts)[:, 0]
        keep = (t > 0.015) & (t < 0.015 + 15 / 440)
        window = np.exp(-2j * np.pi * np.outer([440.0, 1320.0], t[keep])) @ (out[keep] * np.hanning(keep.sum()))
        level[each] = 20 * np.log10(np.abs(window) / keep.sum())
    assert level[rate] == pytest.approx(level[48000], abs=0.05)


@pytest.mark.parametrize("frames", [0, 1, 2, 100])
def test_as_many_frames_come_out_as_go_in(frames: int) -> None:
    stage = prepare(drive(), RATE, "standard")
    assert through(stage, np.full((frames, 2), 0.1)).shape == (frames, 2)


def test_silence_stays_at_the_operating_point() -> None:
    stage = prepare(drive(), RATE, "standard")
    out = through(stage, np.zeros((500, 1)))
    assert np.max(np.abs(out - stage.output_dc)) < 1e-9


def test_the_output_is_aligned_with_the_take() -> None:
    circuit = Circuit("wire", (Part("R1", "resistor", ("in", "out"), 0.0),), "in", 0.0, "out", 1e6)
    volts = chord(0.02)
    assert np.max(np.abs(through(prepare(circuit, RATE, "standard"), volts) - volts)[60:-60]) < 2e-6


def test_a_whole_render_is_the_stream(tmp_path: object) -> None:
    volts = chord(0.02)
    take = SimpleNamespace(rate=RATE, channels=1, volts_per_full_scale=2.0, blocks=lambda size: iter([volts / 2]))
    assert_array_equal(render(take, drive(), "draft"), through(prepare(drive(), RATE, "draft"), volts))


def test_what_does_not_settle_names_time_variant_and_device(monkeypatch: pytest.MonkeyPatch) -> None:
    def gives_up(*arguments: np.ndarray) -> int:
        arguments[-1 - len(plain.workspace(1, 1, 1))][:] = (500, 0.5, 1)  # the fault: interval, place, control
        return 1

    monkeypatch.setenv("TACKBENCH_KERNEL", "plain")
    stage = prepare(clipper(), RATE, "standard")
    monkeypatch.setattr(plain, "advance", gives_up)
    with pytest.raises(WorkError, match=r"clipper: the solver did not settle at 0\.000\d+ s, worst at D2"):
        through(stage, chord(0.01))


def test_what_is_not_finite_is_an_error_not_a_sample() -> None:
    stage = prepare(clipper(), RATE, "standard")
    with pytest.raises(WorkError, match="did not settle"):
        through(stage, np.full((100, 1), np.nan))


def test_a_quality_that_does_not_exist() -> None:
    with pytest.raises(InputError, match="standard"):
        prepare(clipper(), RATE, "standart")


def test_counts_are_those_of_the_solver() -> None:
    stage, volts = prepare(clipper(), RATE, "draft"), chord(0.05)
    stream = stage.stream(2)
    stream.process(np.hstack([volts, volts]))
    stream.finish()
    assert stream.counts.steps / 2 == pytest.approx(len(volts) * stage.factor, rel=0.25)
    assert stream.counts.iterations >= stream.counts.steps
    assert stream.counts.hard_steps == 0


def test_a_sagging_supply_moves_with_the_current() -> None:
    """Supply ohms times the current taken from it, at rest: a divider across 9 V behind 1 kilohm."""
    circuit = Circuit(
        "sag",
        (Part("R1", "resistor", ("vcc", "out"), 1e3), Part("R2", "resistor", ("out", "in"), 7e3)),
        "in",
        0.0,
        "out",
        None,
        Supply("vcc", 9.0, 1e3),
    )
    assert prepare(circuit, RATE, "standard").output_dc == pytest.approx(9.0 * 7 / 9, abs=1e-9)
