"""Damped Newton iteration and pseudo-transient continuation for standing solutions F(x) = 0."""

from __future__ import annotations

import math

import numpy as np

from .compiled import jit
from .linear import factor, substitute
from .residual import evaluate, junction_volts, node_volts

CONVERGED, STALLED, DIVERGED = 0, 1, 2
_LARGEST_STEP_VOLTS = 2.0
_ENOUGH = 1e-12
_TOLERABLE = 1e-9


@jit
def _junction_share(v, change, n_vt, saturation):
    """The share of a junction's step that keeps its exponential tame (a step limit above the knee)."""
    knee = n_vt * math.log(n_vt / (1.4142 * saturation))
    if change <= 2.0 * n_vt or v + change <= knee:
        return 1.0
    if v > knee:
        allowed = n_vt * math.log(1.0 + change / n_vt)
    else:
        allowed = knee - v + 2.0 * n_vt
    return min(1.0, allowed / change)


@jit
def step_share(system, x, step, u, supply):
    """The share of a Newton step to take: no node moves over 2 V, no junction leaps up its exponential."""
    share = 1.0
    for i in range(x.shape[0]):
        if abs(step[i]) * share > _LARGEST_STEP_VOLTS:
            share = _LARGEST_STEP_VOLTS / abs(step[i])
    moved = x + step
    for k in range(system.junction_index.shape[0]):
        law = system.junction_law[k]
        v = junction_volts(system, k, x, u, supply)
        share = min(share, _junction_share(v, junction_volts(system, k, moved, u, supply) - v, law[1], law[0]))
    for k in range(system.bipolar_node.shape[0]):
        law = system.bipolar_law[k]
        for end in (0, 2):
            base, other = system.bipolar_node[k, 1], system.bipolar_node[k, end]
            v = law[0] * (node_volts(system, base, x, u, supply) - node_volts(system, other, x, u, supply))
            w = law[0] * (node_volts(system, base, moved, u, supply) - node_volts(system, other, moved, u, supply))
            share = min(share, _junction_share(v, w - v, law[6], law[1]))
    return share


@jit
def solve_standing(system, x, u, supply, damping, most):
    """Newton on F(x) = damping·(x − x at the start), in place; returns (code, iterations, last relative step)."""
    n = x.shape[0]
    F, J = np.zeros(n), np.zeros((n, n))
    scale, pivots = np.zeros(n), np.zeros(n, np.int64)
    start = x.copy()
    size = np.inf
    best = np.inf
    for iteration in range(most):
        evaluate(system, x, u, supply, F, J, True)
        for i in range(n):
            for j in range(n):
                J[i, j] -= damping * system.mass[i, j]
                F[i] -= damping * system.mass[i, j] * (x[j] - start[j])
        if not factor(J, scale, pivots):
            return DIVERGED, iteration, size
        substitute(J, scale, pivots, F)
        step = -F
        size = 0.0
        for i in range(n):
            if not abs(step[i]) < 1e30:
                return DIVERGED, iteration, size
            size = max(size, abs(step[i]) / (1.0 + abs(x[i])))
        share = step_share(system, x, step, u, supply)
        x += share * step
        if size <= _ENOUGH and share == 1.0:
            return CONVERGED, iteration, size
        if iteration > 8 and size >= best and size <= _TOLERABLE:
            return CONVERGED, iteration, size
        best = min(best, size)
    return STALLED, most, size
