"""A second integrator on the same equations, to check the first: the BDF code IDA of SUNDIALS."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from sksundae.ida import IDA

from .drive import fit, slope, volts
from .residual import evaluate
from .solver import NotSolvedError, ReferenceSolver


def march(
    solver: ReferenceSolver,
    drive: Callable[[np.ndarray], np.ndarray],
    times: np.ndarray,
    relative: float = 1e-10,
    absolute: float = 1e-11,
) -> np.ndarray:
    """The output (V) at ``times`` (s, from 0 or later, rising) by variable-order BDF. Raises NotSolvedError."""
    take, system, n = fit(drive, float(times[-1])), solver.equations.transient, solver.equations.size
    empty = np.zeros((1, 1))

    def residual(t: float, y: np.ndarray, yp: np.ndarray, res: np.ndarray) -> None:
        F = np.empty(n)
        evaluate(system, y, volts(take, t), 1.0, F, empty, False)
        res[:] = system.mass @ yp + system.mass_load * slope(take, t) - F

    def jacobian(t: float, y: np.ndarray, yp: np.ndarray, res: np.ndarray, cj: float, JJ: np.ndarray) -> None:
        F, J = np.empty(n), np.empty((n, n))
        evaluate(system, y, volts(take, t), 1.0, F, J, True)
        JJ[:] = cj * system.mass - J

    start = 0.0 if times[0] > 0.0 else times[0]
    span = np.concatenate([[start], times[times > start]])
    algebraic = np.flatnonzero(~system.mass.any(axis=0))
    ida = IDA(
        residual,
        jacfn=jacobian,
        rtol=relative,
        atol=np.full(n, absolute),
        max_num_steps=50_000_000,
        algebraic_idx=algebraic if len(algebraic) else None,
        max_step=2e-5,
    )
    found = ida.solve(span, solver.standing, np.zeros(n))
    if not found.success:
        raise NotSolvedError(f"IDA: {found.message}")
    u = np.array([volts(take, t) for t in found.t])
    output = np.asarray(solver._node(solver.circuit.output_node, found.y, u))
    return output[len(span) - len(times) :]
