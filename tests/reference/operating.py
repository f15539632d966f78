"""The operating point that a circuit reaches as its supply rises from zero."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from .newton import CONVERGED, solve_standing
from .system import Equations

_FIRST_RISE = 0.02
_LEAST_RISE = 1e-7
_MOST_ITERATIONS = 40
_NODE_FARADS = 1e-12


class NoOperatingPointError(RuntimeError):
    """Neither continuation nor a pseudo-transient found a standing solution."""


@dataclass
class Rise:
    """How the operating point was reached: continuation steps, and the supply factors at which it jumped."""

    steps: int = 0
    jumps: tuple[float, ...] = ()


def _start(equations: Equations) -> np.ndarray:
    """Everything at zero but the op-amps' internal voltages, which stand amid their limits."""
    x = np.zeros(equations.size)
    for k, (_, _, law) in enumerate(equations.parts.opamps):
        x[equations.first_opamp + k] = 0.5 * (law[4] - law[3])
    return x


def _scaled(system, factor: float):
    """The system with its constant sources scaled."""
    return system._replace(
        load=system.load * [factor, 1, 1],
        node_offset=system.node_offset * [factor, 1, 1],
        junction_offset=system.junction_offset * [factor, 1, 1],
        override_load=system.override_load * [factor, 1, 1],
    )


def _climb(solve, jump, x: np.ndarray, rise: Rise) -> np.ndarray:
    """Follow the solution of ``solve(x, factor)`` from factor 0 to 1 with a secant predictor."""
    at, ahead, slope = 0.0, _FIRST_RISE, np.zeros_like(x)
    while at < 1.0:
        target = min(1.0, at + ahead)
        guess = x + slope * (target - at)
        code, iterations = solve(guess, target)
        smooth = np.max(np.abs(guess - x - slope * (target - at))) < 1.0
        if code == CONVERGED and (smooth or ahead < 1e-3):
            slope = (guess - x) / (target - at)
            x, at = guess, target
            ahead *= 2.0 if iterations < 7 else 1.0
        elif ahead > _LEAST_RISE:
            ahead, slope = ahead / 4, slope * (code == CONVERGED)
        else:
            x, at, slope = jump(x, target), target, np.zeros_like(x)
            rise.jumps = (*rise.jumps, target)
            ahead = 1e-3
        rise.steps += 1
    return x


def settle(equations: Equations, system, x: np.ndarray, factor: float) -> np.ndarray:
    """Let the circuit fall from ``x`` to a standing solution by implicit Euler steps that grow without end.

    A picofarad stands at every node with no capacitance of its own.
    """
    mass = equations.transient.mass.copy()
    for k in range(equations.free_count):
        mass[k, k] += _NODE_FARADS
    moving = system._replace(mass=mass)
    h, x = 1e-9, x.copy()
    while h < 1e6:
        trial = x.copy()
        code, iterations, _ = solve_standing(moving, trial, 0.0, factor, 1.0 / h, _MOST_ITERATIONS)
        if code == CONVERGED:
            x = trial
            h *= 1.5 if iterations < 8 else 1.0
        else:
            h /= 4
            if h < 1e-18:
                raise NoOperatingPointError("the pseudo-transient stalled")
    code, _, size = solve_standing(system, x, 0.0, factor, 0.0, 100)
    if code != CONVERGED:
        raise NoOperatingPointError(f"no standing solution: last relative step {size:.1e}")
    return x


def operating_unknowns(equations: Equations) -> tuple[np.ndarray, Rise]:
    """The unknowns at the operating point with the take at zero: constant sources raised, then the supply."""
    rise = Rise()
    system = equations.standing
    x = _start(equations)

    def solve_sources(guess: np.ndarray, factor: float) -> tuple[int, int]:
        return solve_standing(_scaled(system, factor), guess, 0.0, 0.0, 0.0, _MOST_ITERATIONS)[:2]

    def solve_supply(guess: np.ndarray, factor: float) -> tuple[int, int]:
        return solve_standing(system, guess, 0.0, factor, 0.0, _MOST_ITERATIONS)[:2]

    if solve_sources(x, 0.0)[0] != CONVERGED:
        x = settle(equations, _scaled(system, 0.0), _start(equations), 0.0)
    if system.load[:, 0].any() or system.node_offset[:, 0].any():
        x = _climb(solve_sources, lambda x, f: settle(equations, _scaled(system, f), x, 0.0), x, rise)
    if equations.circuit.supply is not None:
        x = _climb(solve_supply, lambda x, f: settle(equations, system, x, f), x, rise)
    code, _, size = solve_standing(system, x, 0.0, 1.0, 0.0, 200)
    if code != CONVERGED:
        raise NoOperatingPointError(f"no standing solution: last relative step {size:.1e}")
    return x, rise
