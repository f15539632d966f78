"""The plain kernel: one circuit, one channel, generic over sizes; it reads like the equations.

One base interval (about 1/384000 s) is crossed in steps of base / 2^level. Each step solves the root by Newton's
method, moves the state, takes the slopes of everything, judges the local error and repeats the step finer where that
is too large. Between the ends of a step the output is a cubic through values and slopes; given are its means over
eight cells a base interval, for a point taken from a fast edge would alias where a mean does not. Nothing here knows
a circuit: only coefficient sets and the laws.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from tackbench.compiled import borrowed, njit_cached
from tackbench.devices.table import LAWS, MOST_CONTROLS
from tackbench.kernel.problem import Problem
from tackbench.kernel.root import (
    PLAIN_ITERATIONS,
    around,
    evaluate,
    factorize,
    form_jacobian,
    homotopy,
    leap,
    newton,
    substitute,
)

ROWS = 4
"""Matrices that multiply are kept in blocks of so many rows."""

DENSE = 8
"""Output cells per base interval; each holds the output's mean over it."""

LOOKAROUND = 5
"""A block of n base intervals needs n + 5 input samples: two before its first, three after its last start."""

EMERGENCY_LEVELS = 14
"""A step that does not converge is cut down to base / 2^14 before the kernel gives up."""

STEPS, ITERATIONS, HARD, CAPPED, REPEATED, COUNTS = 0, 1, 2, 3, 4, 5

# Lagrange's polynomial through six samples at -2 … 3, as powers of t on [0, 1]: row = power, column = sample.
SIX_POINTS = np.linalg.inv(np.vander(np.arange(-2.0, 4.0), 6, increasing=True))


def _value(power, t):
    return ((((power[5] * t + power[4]) * t + power[3]) * t + power[2]) * t + power[1]) * t + power[0]


def _slope(power, t):
    return (((5.0 * power[5] * t + 4.0 * power[4]) * t + 3.0 * power[3]) * t + 2.0 * power[2]) * t + power[1]


def _area(y0, y1, d0, d1, theta):
    """The integral from 0 to ``theta`` of the cubic that has the values y0, y1 and the slopes d0, d1 at 0 and 1."""
    cubic, quartic = 3.0 * (y1 - y0) - 2.0 * d0 - d1, 2.0 * (y0 - y1) + d0 + d1
    return theta * (y0 + theta * (0.5 * d0 + theta * (cubic / 3.0 + theta * 0.25 * quartic)))


def _add(blocks, level, vector, first, out, at):
    """out[at:] += the matrix times vector[first:].

    The matrix is kept in blocks of four rows, the last filled up with zeros, and each block by columns: four sums run
    side by side in registers. ``out`` must have room for the zeros that the last block adds.
    """
    for block in range(blocks.shape[1]):
        row = at + ROWS * block
        sum0, sum1, sum2, sum3 = out[row], out[row + 1], out[row + 2], out[row + 3]
        for k in range(blocks.shape[2]):
            weight = vector[first + k]
            sum0 += blocks[level, block, k, 0] * weight
            sum1 += blocks[level, block, k, 1] * weight
            sum2 += blocks[level, block, k, 2] * weight
            sum3 += blocks[level, block, k, 3] * weight
        out[row], out[row + 1], out[row + 2], out[row + 3] = sum0, sum1, sum2, sum3


def _with_currents(c, K, g, first_control, first_current, control_of, current_of, s, at):
    """s[at:] = (c, (dj/dc) c): small changes of the controls and the changes of the currents that follow."""
    for k in range(K):
        s[at + k] = c[k]
    for device in range(first_control.size):
        k, m = first_control[device], first_current[device]
        for current in range(current_of[device]):
            total = 0.0
            for control in range(control_of[device]):
                total += g[m + current, control] * c[k + control]
            s[at + K + m + current] = total


def _slopes(
    ends, u_slope, ABE, R0, S0, g, first_control, first_current, control_of, current_of, factors, order, n, e_c,
    slope,
):  # fmt: skip
    """Slopes of (X, c, j) where they are ``ends`` = (X, c, j, u, 1): dX/dt from the state equations, dc/dt by
    differentiating the root's equations (``factors``: for a step of no length), dj/dt = (dj/dc) dc/dt."""
    for row in range(n):
        slope[row] = 0.0
    _add(ABE, 0, ends, 0, slope, 0)
    for k in range(order.size):
        e_c[k] = S0[k] * u_slope
    _add(R0, 0, slope, 0, e_c, 0)
    substitute(factors, order, e_c)
    _with_currents(e_c, order.size, g, first_control, first_current, control_of, current_of, slope, n)


def _close(error, R, Q, level, g, first_control, first_current, control_of, current_of, factors, order, e_c, e_s):
    """Turn an error of the open step into the one that the root lets through: error += Q e_s, in place.

    ``factors`` are those of the root's Jacobian; ``e_s`` becomes the change of (c, j).
    """
    for k in range(order.size):
        e_c[k] = 0.0
    _add(R, level, error, 0, e_c, 0)
    substitute(factors, order, e_c)
    _with_currents(e_c, order.size, g, first_control, first_current, control_of, current_of, e_s, 0)
    _add(Q, level, e_s, 0, error, 0)


_STREAM = "float64[::1], float64[::1], float64[::1], float64[::1], float64[::1], int64[::1]"
_MATRIX, _BLOCKS = "float64[:, :, ::1]", "float64[:, :, :, ::1]"
_SETS = f"{_BLOCKS}, {_MATRIX}, {_MATRIX}, " + ", ".join([_BLOCKS] * 4)
_REST = f"{_BLOCKS}, {_MATRIX}, {_MATRIX}, {_BLOCKS}, float64[::1], float64[::1], float64[::1]"
_BANK = "int64[::1], int64[::1], int64[::1], int64[::1], float64[::1], int64[::1], int64[::1]"
_LIMITS = "float64[::1], float64[::1], float64[::1]"
_CHOICES = "float64, int64, int64, float64, float64[::1], int64[::1], float64[::1]"
_WORK = "float64[::1], " * 14 + "float64[:, ::1], " * 3 + "int64[::1], int64[::1]"


def workspace(n: int, K: int, m: int) -> tuple[np.ndarray, ...]:
    """The arrays that ``advance`` works in, for n states, K controls and m currents, in its order."""
    spare = ROWS - 1  # for what _add writes
    lengths = (
        *(n + K + m + 5, K + n + spare, n + K + m + 2 + spare, n + K + m + spare, n + K + m + 1),
        *(n + spare, n + spare, K + spare, K + m, K, K, m, K, 6),
    )
    vectors = tuple(np.zeros(length) for length in lengths)
    matrices = (np.zeros((m, MOST_CONTROLS)), np.zeros((K, K)), np.zeros((K, K)))
    return (*vectors, *matrices, np.zeros(K, np.int64), np.zeros(K, np.int64))


def arrays_of(problem: Problem) -> tuple[Any, ...]:
    """What ``advance`` takes after the stream's own arrays and before ``counts``, in its order."""
    laws = [LAWS[number] for number in problem.laws]
    control_of = np.array([len(law.controls) for law in laws], dtype=np.int64)
    current_of = np.array([len(law.currents) for law in laws], dtype=np.int64)
    parameter_of = np.array([len(law.parameters) for law in laws], dtype=np.int64)
    starts = [np.cumsum(lengths) - lengths for lengths in (control_of, current_of, parameter_of)]
    a = problem.arrays
    return (
        *(_in_blocks(a["H"]), a["Y"], a["N"]),
        *(_in_blocks(a[name]) for name in ("Q", "R", "error_map", "smoothing")),
        *(_in_blocks(a["ABE"][None]), _whole(a["Y0"][None]), _whole(a["N0"][None]), _in_blocks(a["R0"][None])),
        *(_whole(a["S0"][:, 0]), _whole(a["out_z"][0]), _whole(a["out_U"][0])),
        *(np.array(problem.laws, dtype=np.int64), *starts, a["parameters"], control_of, current_of),
        *(a["scales"], a["high"], a["low"]),
        *(problem.base_step, problem.coarsest, problem.finest, problem.tolerance, a["weights"]),
    )


def _whole(array: np.ndarray) -> np.ndarray:
    return np.ascontiguousarray(array)


def _in_blocks(matrices: np.ndarray) -> np.ndarray:
    """Matrices (…, rows, columns) as ``_add`` takes them: (…, blocks of rows, columns, rows in a block)."""
    count, rows, columns = matrices.shape
    blocks = -(-rows // ROWS)
    filled = np.zeros((count, blocks * ROWS, columns))
    filled[:, :rows] = matrices
    return np.ascontiguousarray(filled.reshape(count, blocks, ROWS, columns).swapaxes(-1, -2))


@njit_cached(
    f"int64({_STREAM}, {_SETS}, {_REST}, {_BANK}, {_LIMITS}, {_CHOICES}, {_WORK})",
    inner=(
        _value,
        _slope,
        _area,
        factorize,
        substitute,
        form_jacobian,
        leap,
        newton,
        _add,
        _with_currents,
        _slopes,
        _close,
    ),
    called=(evaluate, homotopy, around),
    error_model="numpy",
)
def advance(
    u, out, z, z_slope, bend, kept_level,
    H, Y, N, Q, R, error_map, smoothing,
    ABE, Y0, N0, R0, S0, out_z, out_U,
    laws, first_control, first_current, first_parameter, p, control_of, current_of,
    scales, high, low,
    base_step, coarsest, finest, tolerance, weights, counts, fault,
    history, target, z1, z1_slope, change, error, correction, e_c, e_s, r, c1, j1, step, power,
    g, jacobian, rest_factors,
    order, rest_order,
):  # fmt: skip
    """Cross ``u.size - 5`` base intervals, writing the output's means over eight cells for each.

    Returns 0, or 1 with ``fault`` set.

    ``z`` = (X, c, j), its slopes and the controls' ``bend`` (half their second derivatives) are the circuit's
    condition, kept from call to call. Matrices that multiply are kept in blocks of rows. ``fault`` is (base interval,
    place within it, control that did not settle). ``weights`` turn states into volts for ``tolerance`` (volts); an
    infinite tolerance keeps to the level ``coarsest``, where that can be solved, and to the bare rule. Otherwise the
    estimated local error is taken off, smoothed twice by the step's own Jacobian: that makes the rule third order and
    damps what the trapezoid would let ring (its growth at infinite stiffness falls from -1 to -1/3).
    """
    (
        u, out, z, z_slope, bend, kept_level,
        H, Y, N, Q, R, error_map, smoothing,
        ABE, Y0, N0, R0, S0, out_z, out_U,
        laws, first_control, first_current, first_parameter, p, control_of, current_of,
        scales, high, low,
        weights, counts, fault,
        history, target, z1, z1_slope, change, error, correction, e_c, e_s, r, c1, j1, step, power,
        g, jacobian, rest_factors,
        order, rest_order,
    ) = borrowed(
        (
            u, out, z, z_slope, bend, kept_level,
            H, Y, N, Q, R, error_map, smoothing,
            ABE, Y0, N0, R0, S0, out_z, out_U,
            laws, first_control, first_current, first_parameter, p, control_of, current_of,
            scales, high, low,
            weights, counts, fault,
            history, target, z1, z1_slope, change, error, correction, e_c, e_s, r, c1, j1, step, power,
            g, jacobian, rest_factors,
            order, rest_order,
        )
    )  # fmt: skip
    K, m = scales.size, z.size - weights.size - scales.size
    n = weights.size
    per_base, controlled = 1.0 / base_step, tolerance < np.inf
    last = H.shape[0] - 1
    whole = 1 << last
    dense_stride = whole // DENSE
    level = kept_level[0]

    for interval in range(u.size - LOOKAROUND):
        for k in range(6):
            power[k] = 0.0
            for i in range(6):
                power[k] += SIX_POINTS[k, i] * u[interval + i]
        place, next_dense, area = 0, 1, 0.0
        while place < whole:
            span = 1 << (last - level)
            h = base_step * span / whole
            t0, t1 = place / whole, (place + span) / whole
            u0, u1 = _value(power, t0), _value(power, t1)
            du0, du1 = _slope(power, t0), _slope(power, t1)

            # the incident waves: everything that is known at the start of the step
            for k in range(n + K + m):
                history[k] = z[k]
            history[n + K + m] = u0
            history[n + K + m + 1] = u1
            history[n + K + m + 2] = du0 * (t1 - t0)
            history[n + K + m + 3] = du1 * (t1 - t0)
            history[n + K + m + 4] = 1.0
            for row in range(K + n):
                target[row] = 0.0
            _add(H, level, history, 0, target, 0)

            # the root, from the controls carried on along their slopes and how those changed over the last step
            for k in range(K):
                r[k] = target[k]
                c1[k] = z[n + k] + h * (z_slope[n + k] + h * bend[k])
            used = newton(
                Y, N, level, r, c1, j1, g, PLAIN_ITERATIONS, laws, first_control, first_current,
                first_parameter, p, control_of, current_of, scales, high, low, jacobian, order, step,
            )  # fmt: skip
            counts[ITERATIONS] += abs(used)
            if used < 0:
                if level < finest:
                    level += 1
                    counts[REPEATED] += 1
                    continue
                counts[HARD] += 1
                for k in range(K):
                    c1[k] = z[n + k]
                used = homotopy(
                    Y, N, level, r, c1, j1, g, laws, first_control, first_current, first_parameter, p,
                    control_of, current_of, scales, high, low, jacobian, order, step,
                )  # fmt: skip
                counts[ITERATIONS] += abs(used)
                if used < 0 and level == last:
                    for k in range(K):
                        c1[k] = z[n + k]
                    used = around(
                        Y, N, level, r, c1, j1, g, laws, first_control, first_current, first_parameter, p,
                        control_of, current_of, scales, high, low, jacobian, order, step,
                    )  # fmt: skip
                    counts[ITERATIONS] += abs(used)
                if used < 0:
                    if level < last:
                        level += 1
                        counts[REPEATED] += 1
                        continue
                    worst, which = 0.0, 0
                    for k in range(K):
                        if not abs(step[k]) / scales[k] <= worst:
                            worst, which = abs(step[k]) / scales[k], k
                    fault[0], fault[1], fault[2] = interval, t0, which
                    return 1
            for k in range(n):
                z1[k] = target[K + k]
            for k in range(K):
                z1[n + k] = c1[k]
            for k in range(m):
                z1[n + K + k] = j1[k]
            z1[n + K + m] = u1
            z1[n + K + m + 1] = 1.0
            _add(Q, level, z1, n, z1, 0)

            # slopes at the end of the step
            form_jacobian(Y0, N0, 0, g, first_control, first_current, control_of, current_of, rest_factors)
            if not factorize(rest_factors, rest_order):  # a fold of the resting equations: no slope is known there
                for row in range(K):
                    for column in range(K):
                        rest_factors[row, column] = 0.0
                    rest_order[row] = row
            _slopes(
                z1, du1 * per_base, ABE, R0, S0, g, first_control, first_current, control_of, current_of,
                rest_factors, rest_order, n, e_c, z1_slope,
            )  # fmt: skip

            # the local error, from how much the slopes change; then, smoothed once more, it is taken off
            ratio = 0.0
            if controlled:
                for k in range(n + K + m):
                    change[k] = z_slope[k] - z1_slope[k]
                change[n + K + m] = (du0 - du1) * per_base
                for row in range(n):
                    error[row] = 0.0
                _add(error_map, level, change, 0, error, 0)
                _close(
                    error, R, Q, level, g, first_control, first_current, control_of, current_of,
                    jacobian, order, e_c, e_s,
                )  # fmt: skip
                y_error = 0.0
                for row in range(n):
                    y_error += out_z[row] * error[row]
                    size = abs(error[row]) * weights[row]
                    if not size <= ratio:
                        ratio = size
                for row in range(K + m):
                    y_error += out_z[n + row] * e_s[row]
                if not abs(y_error) <= ratio:
                    ratio = abs(y_error)
                ratio /= tolerance
                if not ratio <= 1.0:
                    if level < finest:
                        level += 1
                        counts[REPEATED] += 1
                        continue
                    counts[CAPPED] += 1
                if ratio <= 1.0:  # an estimate beyond the tolerance is no correction
                    for row in range(n):
                        correction[row] = 0.0
                    _add(smoothing, level, error, 0, correction, 0)
                    _close(
                        correction, R, Q, level, g, first_control, first_current, control_of, current_of,
                        jacobian, order, e_c, e_s,
                    )  # fmt: skip
                    for row in range(n):
                        z1[row] += correction[row]
                    for row in range(K + m):
                        z1[n + row] += e_s[row]
                    _slopes(
                        z1, du1 * per_base, ABE, R0, S0, g, first_control, first_current, control_of, current_of,
                        rest_factors, rest_order, n, e_c, z1_slope,
                    )  # fmt: skip

            # the output's mean over each dense cell, of the cubic through values and slopes at the ends of the step
            y0, y1 = out_U[0] * u0 + out_U[1], out_U[0] * u1 + out_U[1]
            d0, d1 = out_U[0] * du0 * per_base, out_U[0] * du1 * per_base
            for k in range(n + K + m):
                y0 += out_z[k] * z[k]
                y1 += out_z[k] * z1[k]
                d0 += out_z[k] * z_slope[k]
                d1 += out_z[k] * z1_slope[k]
            d0, d1 = h * d0, h * d1
            before, cells = 0.0, span / dense_stride
            while next_dense <= DENSE and next_dense * dense_stride <= place + span:
                here = _area(y0, y1, d0, d1, (next_dense * dense_stride - place) / span)
                out[interval * DENSE + next_dense - 1] = area + cells * (here - before)
                area, before = 0.0, here
                next_dense += 1
            area += cells * (_area(y0, y1, d0, d1, 1.0) - before)

            for k in range(K):
                bend[k] = 0.5 * (z1_slope[n + k] - z_slope[n + k]) / h
            for k in range(n + K + m):
                z[k], z_slope[k] = z1[k], z1_slope[k]
            place += span
            counts[STEPS] += 1
            if level > coarsest and ratio < 0.08 and place % (2 * span) == 0:
                level -= 1
    kept_level[0] = level
    return 0
