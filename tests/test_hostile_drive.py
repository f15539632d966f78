"""Drives that no guitar gives: every sample finite and solved, or one error that names time and device."""

from __future__ import annotations

import numpy as np
import pytest

from circuit_generator import listing, random_circuit
from tackbench import load_stage
from tackbench.circuit import Circuit
from tackbench.errors import InputError, WorkError
from tackbench.render.prepared import prepare
from tackbench.stage import shipped_stages

RATE = 48000


def drives(frames: int, seed: int = 0) -> dict[str, np.ndarray]:
    rng, t = np.random.default_rng(seed), np.arange(frames) / RATE
    return {
        "silence": np.zeros(frames),
        "50 V square": 50.0 * np.sign(np.sin(2 * np.pi * 400 * t)),
        "1000 V square": 1000.0 * np.sign(np.sin(2 * np.pi * 900 * t)),
        "full-band noise": rng.uniform(-20, 20, frames),
        "spikes": np.clip(rng.standard_cauchy(frames), -1e4, 1e4),
    }


def survives(circuit: Circuit, quality: str, frames: int, seed: int = 0) -> int:
    """Frames that came out; raises AssertionError for anything but finite samples or a named WorkError."""
    stage, done = prepare(circuit, RATE, quality), 0
    for name, volts in drives(frames, seed).items():
        stream = stage.stream(1)
        try:
            out = np.concatenate([stream.process(volts[:, None]), stream.finish()])
        except WorkError as trouble:
            named = "did not settle at" in str(trouble)
            assert named, name
            continue
        assert np.all(np.isfinite(out)), name
        assert len(out) == frames
        assert stream.counts.steps > 0
        done += frames
    return done


@pytest.mark.parametrize("quality", ["draft", "standard"])
@pytest.mark.parametrize("name", shipped_stages())
def test_shipped_stages_survive(name: str, quality: str) -> None:
    stage = load_stage(name)
    for volts in (0.5, 9.0, 24.0):
        try:
            circuit = stage.variant(supply=volts).circuit
        except InputError:
            continue  # too little for its op-amp, or too much: refused with a reason
        assert survives(circuit, quality, 240) == 5 * 240


@pytest.mark.parametrize("seed", range(0, 50, 5))
def test_random_circuits_survive(seed: int) -> None:
    for one in range(seed, seed + 5):
        circuit = random_circuit(one)
        for quality in ("draft", "standard"):
            assert survives(circuit, quality, 96, one) == 5 * 96, listing(circuit)


@pytest.mark.parametrize("kernel", ["", "plain"])
def test_a_jump_to_another_branch_is_followed_around_the_fold(kernel: str, monkeypatch: pytest.MonkeyPatch) -> None:
    """Seed 857 is regenerative and has no capacitances: at 2.8 ms its solution ends, and the next lies 18 V away."""
    monkeypatch.setenv("TACKBENCH_KERNEL", kernel)
    t = np.arange(376) / RATE
    rise = np.sin(0.5 * np.pi * np.sin(0.5 * np.pi * np.clip(t / 0.003, 0, 1)) ** 4) ** 4
    volts = (0.5 * np.sin(2 * np.pi * 220 * t) + 0.4 * np.sin(2 * np.pi * 1310 * t)) * rise
    stream = prepare(random_circuit(857), RATE, "standard").stream(1)
    out = np.concatenate([stream.process(volts[:, None]), stream.finish()])
    assert np.all(np.isfinite(out))
    assert stream.counts.hard_steps > 0


@pytest.mark.slow
def test_ten_million_samples_without_a_silent_failure() -> None:
    total, asked = 0, 0
    for turn, name in enumerate(shipped_stages()):
        for volts in (0.5, 9.0, 24.0):
            for quality in ("draft", "standard"):
                try:
                    circuit = load_stage(name).variant(supply=volts).circuit
                except InputError:
                    continue
                total += survives(circuit, quality, 16000, turn)
                asked += 5 * 16000
    for seed in range(1000, 1050):
        for quality in ("draft", "standard"):
            total += survives(random_circuit(seed), quality, 10000, seed)
            asked += 5 * 10000
    print(f"{asked} samples asked, {total} rendered, the rest refused by name")
    assert asked >= 10_000_000
    assert total > 0.99 * asked
