"""Random legal circuits against the independent solver: operating point, small-signal response, a transient.

Three hundred seeds by default; ``-m slow`` runs five thousand. A failing one is printed whole. What once failed is
kept in ``CASES``.
"""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np
import pytest

from circuit_generator import listing, random_circuit
from reference.compare import in_band
from reference.solver import ABSOLUTE_TOLERANCE_VOLTS, RELATIVE_TOLERANCE, NotSolvedError, ReferenceSolver
from tackbench.circuit import Circuit
from tackbench.network import natural_frequencies, operating_point, response
from tackbench.render.prepared import prepare

RATE, FRAMES = 48000, 256
FREQUENCIES = np.array([20.0, 200.0, 1000.0, 5000.0, 15000.0])
FASTEST = 1e15
"""Radians per second: above it an eigenvalue of the reference's pencil is an infinite one that rounding has moved."""

CHUNK = 10
CASES = (17, 63, 134, 292, 857)
"""Seeds that once were worth a look: a slewing amplifier, two oscillators, a MOSFET that switches, and two
transistors without capacitances that jump from branch to branch (the reference gives up on those)."""


def take(t: np.ndarray) -> np.ndarray:
    """Two tones of 0.9 V together, risen within 3 ms."""
    rise = np.sin(0.5 * np.pi * np.sin(0.5 * np.pi * np.clip(t / 0.003, 0, 1)) ** 4) ** 4
    return (0.5 * np.sin(2 * np.pi * 220 * t) + 0.4 * np.sin(2 * np.pi * 1310 * t)) * rise


def solved(circuit: Circuit) -> np.ndarray | None:
    """The reference's samples; where junctions carry so much that rounding hides 1e-9 of it, at a wider tolerance.

    None where the reference gives up at every tolerance (one circuit in some hundred): then only the operating point
    and the response are compared.
    """
    for widening in (1.0, 100.0, 1000.0):
        try:
            relative, absolute = widening * RELATIVE_TOLERANCE, widening * ABSOLUTE_TOLERANCE_VOLTS
            return ReferenceSolver(circuit, relative=relative, absolute=absolute).render(take, FRAMES, RATE)[0]
        except NotSolvedError:
            continue
    return None


def compare(circuit: Circuit) -> None:
    reference = ReferenceSolver(circuit)
    point, expected = operating_point(circuit), reference.operating_point()
    for name, volts in expected.items():
        assert point.node_volts[name] == pytest.approx(volts, abs=1e-6), name
    got, true = response(circuit, FREQUENCIES), reference.response(FREQUENCIES)
    heard = np.abs(true) > 1e-7
    assert np.all(np.abs(got[~heard]) < 1e-6)
    ratio = got[heard] / true[heard]
    assert np.all(np.abs(20 * np.log10(np.abs(ratio))) < 0.01)
    assert np.all(np.abs(np.degrees(np.angle(ratio))) < 0.1)
    theirs = reference.natural_frequencies()
    growth = float(np.max(theirs[np.abs(theirs) < FASTEST].real, initial=-np.inf))
    own = float(np.max(natural_frequencies(circuit).real, initial=-np.inf))
    if own > 1.0:  # the converse does not hold: the pencil's infinite eigenvalues may come out as anything
        assert growth > 1.0
    stream = prepare(circuit, RATE, "best").stream(1)
    volts = take(np.arange(FRAMES + 120) / RATE)
    out = np.concatenate([stream.process(volts[:, None]), stream.finish()])[:FRAMES, 0]
    assert np.all(np.isfinite(out))
    if own < 1.0:  # what oscillates by itself has no two equal renders
        samples = solved(circuit)
        if samples is None:
            return
        error, level = (float(np.std(in_band(x, RATE))) for x in (out - samples, samples))
        assert error < max(1e-4 * level, 1e-6), f"{20 * np.log10(error / max(level, 1e-12)):.1f} dB"


def compare_seeds(seeds: Iterable[int]) -> None:
    for seed in seeds:
        circuit = random_circuit(seed)
        try:
            compare(circuit)
        except Exception as trouble:
            raise AssertionError(f"seed {seed}: {trouble!r}\n{listing(circuit)}") from trouble


@pytest.mark.parametrize("start", range(0, 300, CHUNK))
def test_random_circuits_agree_with_the_reference(start: int) -> None:
    compare_seeds(range(start, start + CHUNK))


def test_cases_that_once_were_worth_a_look() -> None:
    compare_seeds(CASES)


@pytest.mark.slow
@pytest.mark.parametrize("seed", range(300, 5300))
def test_thousands_of_random_circuits_agree_with_the_reference(seed: int) -> None:
    compare_seeds((seed,))
