"""State equations: the least set of capacitor voltages and inductor currents, and how the devices act on them.

Capacitor loops, capacitors across ideal sources and inductor cutsets hold fewer independent voltages and currents
than parts; ranks of the connection matrices (whole numbers, so no rounding decides) say how many. With the state
X = (capacitor voltages less what the sources impose, inductor currents, op-amp internals), s = (c, j) the devices'
control voltages and currents, and U = (take, 1):

    dX/dt = A X + B s + E U,    F s = R X + S U    (one row of F per control).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from tackbench.network.assembly import Assembly
from tackbench.network.elimination import eliminate, null_space, row_echelon

_SMALLEST_PIVOT = 1e-7
_AMPERE_UNIT = 1e-3  # a milliampere weighs as much as a volt when pivots are chosen


@dataclass(frozen=True)
class StateEquations:
    """The matrices above, and the linear maps from (X, s, U) to all node voltages, shape (N, …).

    ``scales`` (n of X) turns each state into volts for error control. ``charge_map`` (states, n) and
    ``charge_map_drive`` give the capacitor states from node voltages, ``independent`` the independent inductors.
    """

    A: np.ndarray
    B: np.ndarray
    E: np.ndarray
    F: np.ndarray
    R: np.ndarray
    S: np.ndarray
    nodes_X: np.ndarray
    nodes_s: np.ndarray
    nodes_U: np.ndarray
    scales: np.ndarray
    energy: np.ndarray
    charge_map: np.ndarray
    charge_map_drive: np.ndarray
    independent: tuple[int, ...]
    controls: int
    currents: int

    @property
    def states(self) -> int:
        return len(self.A)


@dataclass(frozen=True)
class _Basis:
    """Independent capacitor voltages x, floating voltages q: v = tree x + floating q; inductors i = loops · i_x."""

    tree: np.ndarray
    floating: np.ndarray
    test_rows: np.ndarray
    loops: np.ndarray
    independent: list[int]


def _choose_basis(assembly: Assembly) -> _Basis:
    nodes = assembly.G.shape[0]
    order = np.argsort(-assembly.farads, kind="stable")
    _, chosen = row_echelon(assembly.capacitor_nodes, order=list(order)) if nodes else (None, [])
    reduced, pivots = row_echelon(np.hstack([assembly.capacitor_nodes[:, chosen].T, np.eye(len(chosen))])[:, :])
    pivots = [pivot for pivot in pivots if pivot < nodes]
    free = [node for node in range(nodes) if node not in pivots]
    tree, floating = np.zeros((nodes, len(chosen))), np.zeros((nodes, len(free)))
    tree[pivots] = reduced[:, nodes:]
    floating[free, range(len(free))] = 1.0
    floating[pivots] = -reduced[:, free]
    test_rows = floating.T
    cutsets, loose = _inductor_cutsets(assembly, test_rows)
    keep = [row for row in range(len(test_rows)) if row not in loose]
    reduced, dependent = row_echelon(cutsets)
    inductors = cutsets.shape[1]
    independent = [k for k in range(inductors) if k not in dependent]
    loops = np.zeros((inductors, len(independent)))
    loops[independent, range(len(independent))] = 1.0
    loops[dependent] = -reduced[:, independent]
    return _Basis(tree, floating, test_rows[keep], loops, independent)


def _inductor_cutsets(assembly: Assembly, test_rows: np.ndarray) -> tuple[np.ndarray, list[int]]:
    """Sums of inductor currents that must vanish, and which node rows say nothing beyond them."""
    others = test_rows @ np.hstack([assembly.conductor_nodes, assembly.current_nodes])
    silent = null_space(others.T)
    _, loose = row_echelon(silent.T)
    return silent.T @ test_rows @ assembly.inductor_nodes, loose


def state_equations(assembly: Assembly) -> StateEquations:
    """Reduce ``assembly`` to state equations."""
    a, basis = assembly, _choose_basis(assembly)
    nx, nq, ni = basis.tree.shape[1], basis.floating.shape[1], len(basis.independent)
    nw, controls, currents = len(a.elements.internals), a.control_nodes.shape[0], a.current_nodes.shape[1]
    states = nx + ni + nw
    mass = basis.tree.T @ a.charge @ basis.tree
    imposed = np.linalg.solve(mass, basis.tree.T @ a.charge_drive) if nx else np.zeros((0, 2))
    width = nq + ni + states + 2 + controls + currents
    column = np.cumsum([0, nq, ni, nx, ni, nw, 2, controls, currents])
    q, di, x, i, w, U, c, j = (slice(column[k], column[k + 1]) for k in range(8))

    volts = np.zeros((a.G.shape[0], width))  # free node voltages in terms of everything
    volts[:, q], volts[:, x], volts[:, U] = basis.floating, basis.tree, -basis.tree @ imposed
    leaving = a.G @ volts
    leaving[:, U] += a.Gu
    leaving[:, w] += a.Gw
    leaving[:, i] += a.inductor_nodes @ basis.loops
    leaving[:, j] += a.current_nodes
    windings = -a.inductor_nodes.T @ volts
    windings[:, U] -= a.inductor_drive
    windings[:, di] += a.henries[:, None] * basis.loops
    control = a.control_nodes @ volts
    control[:, U] += a.control_drive
    control[:, w] += a.control_internals
    control[:, c] -= np.eye(controls)

    preferred = np.vstack([basis.test_rows @ leaving, windings])
    units = np.ones(width)
    units[i] = units[j] = _AMPERE_UNIT
    rows = np.vstack([preferred, control])
    solved, left, _ = eliminate(rows, nq + ni, len(preferred), units, _SMALLEST_PIVOT)
    known = slice(nq + ni, width)

    def substitute(matrix: np.ndarray) -> np.ndarray:
        return matrix[:, known] + matrix[:, : nq + ni] @ solved

    slope = np.zeros((states, width - nq - ni))
    slope[:nx] = -np.linalg.solve(mass, substitute(basis.tree.T @ leaving)) if nx else 0.0
    slope[nx : nx + ni] = solved[nq : nq + ni]
    slope[nx + ni :, states + 2 + controls :] = a.rates
    nodes = a.T @ substitute(volts)
    nodes[:, states : states + 2] += a.Tu
    X_, U_, s_ = slice(0, states), slice(states, states + 2), slice(states + 2, None)
    energy = np.zeros((states, states))
    energy[:nx, :nx] = mass
    energy[nx : nx + ni, nx : nx + ni] = (basis.loops.T * a.henries) @ basis.loops
    charge_map = np.linalg.solve(mass, basis.tree.T @ a.charge) if nx else np.zeros((0, a.G.shape[0]))
    return StateEquations(
        A=slope[:, X_],
        B=slope[:, s_],
        E=slope[:, U_],
        F=left[:, s_],
        R=-left[:, X_],
        S=-left[:, U_],
        nodes_X=nodes[:, X_],
        nodes_s=nodes[:, s_],
        nodes_U=nodes[:, U_],
        scales=np.concatenate([np.ones(nx), 2e3 * np.pi * a.henries[basis.independent], np.ones(nw)]),
        energy=energy,
        charge_map=charge_map,
        charge_map_drive=imposed,
        independent=tuple(basis.independent),
        controls=controls,
        currents=currents,
    )
