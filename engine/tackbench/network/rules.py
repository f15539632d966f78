"""Coefficient sets: the state equations turned into one step of a given length, by one of two rules.

Both rules make the same kernel step. With the history z = (X0, c0, j0, u0, u1, h u0', h u1', 1):

    Y c1 + N j1 = Hr z          (the root: solved with the devices' laws j1 = j(c1))
    X1 = Hx z + Q (c1, j1)

The *wave-digital trapezoid*: each capacitor and inductor is a wave port. Its incident wave is X0 + (h/2) X0' (voltage
plus port resistance h/2C times current, for a capacitor), and the scattering junction gives X1 from the waves and the
root's c, j. It is passive by construction. The *exact linear rule* carries the linear network by its matrix
exponential; only the devices' part is interpolated, linearly, within a step, and the take by a cubic. Measured side
by side the trapezoid with its estimated error taken off (see the kernel) needs fewer steps for the same error on
every clipping circuit tried; the exact rule is kept as the second opinion that the tests hold it to.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from tackbench.network.state import StateEquations

HISTORY_EXTRA = 5  # u0, u1, h u0', h u1', 1
_STIFFEST = 1e9  # of |A| h: beyond it the doubling of the matrix exponential loses the slow modes
_WELL_CONDITIONED = 1e7


@dataclass(frozen=True)
class RootForm:
    """State equations with the controls solved out of them where that is well conditioned (then F begins with 1)."""

    A: np.ndarray
    B: np.ndarray
    E: np.ndarray
    F: np.ndarray
    R: np.ndarray
    S: np.ndarray


def root_form(state: StateEquations) -> RootForm:
    """Bring the root's equations to c = …, unless a node hangs on so little that this would be all rounding."""
    K, n = state.controls, state.states
    A, B, E, F, R, S = state.A, state.B, state.E, state.F, state.R, state.S
    if not K or np.linalg.cond(F[:, :K]) > _WELL_CONDITIONED:
        return RootForm(A, B, E, F, R, S)
    solved = np.linalg.solve(F[:, :K], np.hstack([F[:, K:], R, S]))
    m = state.currents
    Fj, R, S = solved[:, :m], solved[:, m : m + n], solved[:, m + n :]
    A, E = A + B[:, :K] @ R, E + B[:, :K] @ S
    B = np.hstack([np.zeros((n, K)), B[:, K:] - B[:, :K] @ Fj])
    return RootForm(A, B, E, np.hstack([np.eye(K), Fj]), R, S)


@dataclass(frozen=True)
class CoefficientSets:
    """One step for every length h = base / 2^level; arrays start with the level.

    ``H`` (levels, K + n, n + K + m + 5): rows Hr, then Hx. ``Y`` (levels, K, K), ``N`` (levels, K, m), ``Q``
    (levels, n, K + m). ``R`` (levels, K, n): how a change of X drives the root. ``error_X`` (levels, n, n),
    ``error_s`` (levels, n, K + m), ``error_u`` (levels, n): the local error of X from what X', s' and u' change by
    over a step. ``smoothing`` (levels, n, n) damps what is stiff in it. ``rule`` is "exact" or "trapezoid".
    """

    rule: str
    H: np.ndarray
    Y: np.ndarray
    N: np.ndarray
    Q: np.ndarray
    R: np.ndarray
    error_X: np.ndarray
    error_s: np.ndarray
    error_u: np.ndarray
    smoothing: np.ndarray


def coefficient_sets(form: RootForm, base_step: float, levels: int, rule: str) -> CoefficientSets:
    """The sets for steps of base_step / 2^level seconds, level 0 … levels - 1.

    ``rule`` "exact" falls back to the trapezoid where the network is too stiff for its exponential.
    """
    stiffness = float(np.max(np.sum(np.abs(form.A), axis=1), initial=0.0)) * base_step
    if rule == "exact" and not stiffness < _STIFFEST:
        rule = "trapezoid"
    steps = [base_step / 2**level for level in range(levels)]
    make = _exact_step if rule == "exact" else _trapezoid_step
    phis = phi_functions(form.A, steps[-1], levels)[::-1] if rule == "exact" else [[]] * levels
    sets = [make(form, h, phi) for h, phi in zip(steps, phis, strict=True)]
    return CoefficientSets(rule, *(np.ascontiguousarray(np.stack(arrays)) for arrays in zip(*sets, strict=True)))


def phi_functions(A: np.ndarray, smallest_step: float, doublings: int) -> list[list[np.ndarray]]:
    """phi_0 … phi_4 of A h for h = smallest_step · 1, 2, 4, …, by Taylor series and doubling.

    phi_k(z) = sum z^i / (i + k)!. Doubling: phi_k(2z) = 2^-k (phi_0 phi_k + sum_j phi_j / (k - j)!), see Skaflestad
    and Wright, "The scaling and modified squaring method for matrix functions related to the exponential", 2009.
    phi_0 is carried as D = phi_0 - I, D(2z) = 2 D + D D, so that slow modes keep their relative accuracy and the
    rounding of stiff ones dies away instead of growing.
    """
    n = len(A)
    norm = float(np.max(np.sum(np.abs(A), axis=1), initial=0.0)) * smallest_step
    halvings = max(0, int(np.ceil(np.log2(norm / 0.5)))) if norm > 0.5 else 0
    z = A * (smallest_step / 2.0**halvings)
    identity = np.eye(n)
    term, highest, factorial = identity / 24.0, identity / 24.0, 24.0
    for index in range(1, 18):
        factorial = index + 4.0
        term = term @ z / factorial
        highest = highest + term
    phi = [identity] * 4 + [highest]
    for k, inverse in ((3, 1.0 / 6.0), (2, 0.5), (1, 1.0)):
        phi[k] = inverse * identity + z @ phi[k + 1]
    D = z @ phi[1]
    phi[0] = identity + D
    results = []
    for doubling in range(halvings + doublings):
        if doubling >= halvings:
            results.append(phi)
        p0, p1, p2, p3, p4 = phi
        D = 2.0 * D + D @ D
        phi = [
            identity + D,
            (p0 @ p1 + p1) / 2.0,
            (p0 @ p2 + p1 + p2) / 4.0,
            (p0 @ p3 + p1 / 2.0 + p2 + p3) / 8.0,
            (p0 @ p4 + p1 / 6.0 + p2 / 2.0 + p3 + p4) / 16.0,
        ]
    return results


def _exact_step(form: RootForm, h: float, phi: list[np.ndarray]) -> tuple[np.ndarray, ...]:
    moments = [h * phi[1], h * phi[2], 2.0 * h * phi[3], 6.0 * h * phi[4]]  # integrals of e^{A(h-t)} (t/h)^k
    m0, m1, m2, m3 = moments
    take, steady = form.E[:, 0], form.E[:, 1]
    from_u = np.column_stack(
        [
            (2.0 * m3 - 3.0 * m2 + m0) @ take,
            (3.0 * m2 - 2.0 * m3) @ take,
            (m3 - 2.0 * m2 + m1) @ take,
            (m3 - m2) @ take,
            m0 @ steady,
        ]
    )
    error_s = 0.5 * h * (m1 - m2) @ form.B
    nothing = np.zeros_like(form.A), np.zeros(len(form.A))
    return _finish(form, phi[0], (m0 - m1) @ form.B, m1 @ form.B, from_u, nothing[0], error_s, nothing[1], phi[1])


def _trapezoid_step(form: RootForm, h: float, _: list[np.ndarray]) -> tuple[np.ndarray, ...]:
    n = len(form.A)
    junction = np.linalg.inv(np.eye(n) - 0.5 * h * form.A)
    carried = junction @ (np.eye(n) + 0.5 * h * form.A)  # of X0: the incident wave's part
    driven = 0.5 * h * junction
    take, steady = driven @ form.E[:, 0], driven @ form.E[:, 1]
    zero = np.zeros(n)
    from_u = np.column_stack([take, take, zero, zero, 2.0 * steady])
    weight = (h * h / 12.0) * junction
    errors = weight @ form.A, weight @ form.B, weight @ form.E[:, 0]
    return _finish(form, carried, driven @ form.B, driven @ form.B, from_u, *errors, junction)


def _finish(
    form: RootForm,
    from_X: np.ndarray,
    from_s0: np.ndarray,
    from_s1: np.ndarray,
    from_u: np.ndarray,
    *estimate: np.ndarray,
) -> tuple[np.ndarray, ...]:
    """Put the root's equations F s1 = R X1 + S U1 on top of the step, each scaled to a largest term of one."""
    K = len(form.R)
    Hx = np.hstack([from_X, from_s0, from_u])
    Hr = form.R @ Hx
    Hr[:, -4] += form.S[:, 0]  # u1
    Hr[:, -1] += form.S[:, 1]
    root = form.F - form.R @ from_s1
    scale = np.max(np.abs(root), axis=1, keepdims=True) if K else np.ones((0, 1))
    H = np.vstack([Hr / scale, Hx])
    return H, root[:, :K] / scale, root[:, K:] / scale, from_s1, form.R / scale, *estimate
