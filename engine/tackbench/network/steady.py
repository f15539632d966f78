"""The equations at rest: capacitors open, inductors shorted, floating groups without net charge."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from tackbench.errors import InputError
from tackbench.network.assembly import Assembly
from tackbench.network.elements import STEADY
from tackbench.network.elimination import eliminate, null_space, row_echelon

_SMALLEST_PIVOT = 1e-7
_AMPERE_UNIT = 1e-3


@dataclass(frozen=True)
class SteadyEquations:
    """Y c + N j = r · supply, shapes (K, K), (K, m), (K,); and (v, i, w) = maps of c, j and the supply factor.

    ``solved`` has the columns (supply factor, c, j) and the rows free node voltages, inductor currents, internals.
    """

    Y: np.ndarray
    N: np.ndarray
    r: np.ndarray
    solved: np.ndarray
    nodes: int
    inductors: int


def steady_equations(assembly: Assembly, leak: float = 0.0) -> SteadyEquations:
    """The resting equations; ``leak`` (siemens) from every free node to ground helps a hard circuit to be found."""
    a = assembly
    n, nl, nw = a.G.shape[0], len(a.henries), len(a.elements.internals)
    K, m = a.control_nodes.shape[0], a.current_nodes.shape[1]
    column = np.cumsum([0, n, nl, nw, 1, K, m])
    v, i, w, U, c, j = (slice(column[k], column[k + 1]) for k in range(6))
    width = int(column[-1])

    leaving = np.zeros((n, width))
    leaving[:, v], leaving[:, i], leaving[:, w] = a.G + leak * np.eye(n), a.inductor_nodes, a.Gw
    leaving[:, U], leaving[:, j] = a.Gu[:, [STEADY]], a.current_nodes
    windings = np.zeros((nl, width))
    windings[:, v], windings[:, U] = a.inductor_nodes.T, a.inductor_drive[:, [STEADY]]
    rates = np.zeros((nw, width))
    rates[:, j] = a.rates
    control = np.zeros((K, width))
    control[:, v], control[:, w] = a.control_nodes, a.control_internals
    control[:, U], control[:, c] = a.control_drive[:, [STEADY]], -np.eye(K)
    if leak == 0.0:
        _keep_charges(a, leaving, v, U)
    _keep_fluxes(a, windings, i)

    preferred = np.vstack([leaving, windings, rates])
    units = np.ones(width)
    units[i] = units[j] = _AMPERE_UNIT
    for row in range(n + nl, n + nl + nw):  # rates are in volts, their currents count fully
        preferred[row] /= max(float(np.max(np.abs(preferred[row]))), 1.0)
    solved, left, _ = eliminate(np.vstack([preferred, control]), n + nl + nw, len(preferred), units, _SMALLEST_PIVOT)
    start = n + nl + nw + 1
    shift = n + nl + nw
    return SteadyEquations(
        Y=left[:, start - shift : start - shift + K],
        N=left[:, start - shift + K :],
        r=-left[:, 0],
        solved=solved,
        nodes=n,
        inductors=nl,
    )


def _keep_charges(a: Assembly, leaving: np.ndarray, v: slice, U: slice) -> None:
    """Groups without a DC path keep their charge, zero: that replaces the node equations that say nothing."""
    closed = null_space(np.hstack([a.conductor_nodes, a.inductor_nodes, a.current_nodes]).T)
    if not closed.shape[1]:
        return
    reduced, replaced = row_echelon(closed.T)
    for row, place in zip(reduced, replaced, strict=True):
        leaving[place] = 0.0
        leaving[place, v] = row @ a.charge
        leaving[place, U] = row @ a.charge_drive[:, [STEADY]]


def _keep_fluxes(a: Assembly, windings: np.ndarray, i: slice) -> None:
    """Loops of ideal inductors keep their flux, zero; a steady source across one has no operating point."""
    loops = null_space(a.inductor_nodes)
    if not loops.shape[1]:
        return
    if np.any(np.abs(loops.T @ a.inductor_drive[:, STEADY]) > 1e-9):
        names = ", ".join(sorted({branch.ref for branch in a.elements.inductors}))
        raise InputError(
            "a steady ideal source lies across an ideal inductor, so that its current would rise for ever",
            part=names,
            expected="give the inductor its winding resistance (ohms) or the source its own",
        )
    reduced, replaced = row_echelon(loops.T)
    for row, place in zip(reduced, replaced, strict=True):
        windings[place] = 0.0
        windings[place, i] = row * a.henries
