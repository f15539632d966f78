"""The plain kernel: one circuit, one channel, generic over sizes; it reads like the equations.

One base interval (about 1/384000 s) is crossed in steps of base / 2^level. Each step solves the root by Newton's
method, moves the state, takes the slopes of everything, judges the local error and repeats the step finer where that
is too large. Between steps the output is a cubic through values and slopes, read on a grid of eight points a base
interval. Nothing here knows a circuit: only coefficient sets and the laws.
"""

from __future__ import annotations

import numpy as np

from tackbench.compiled import njit_cached
from tackbench.devices.table import MOST_CONTROLS, evaluate_devices

DENSE = 8
"""Output points per base interval."""

LOOKAROUND = 5
"""A block of n base intervals needs n + 5 input samples: two before its first, three after its last start."""

EMERGENCY_LEVELS = 14
"""A step that does not converge is cut down to base / 2^14 before the kernel gives up."""

STEPS, ITERATIONS, HARD, CAPPED, REPEATED, COUNTS = 0, 1, 2, 3, 4, 5

NEWTON_TOLERANCE = 1e-3
_PLAIN_ITERATIONS = 12
_HOMOTOPY_TRIALS = 400

# Lagrange's polynomial through six samples at -2 … 3, as powers of t on [0, 1]: row = power, column = sample.
_SIX_POINTS = np.linalg.inv(np.vander(np.arange(-2.0, 4.0), 6, increasing=True))

_evaluate = evaluate_devices()


def _value(power, t):
    return ((((power[5] * t + power[4]) * t + power[3]) * t + power[2]) * t + power[1]) * t + power[0]


def _slope(power, t):
    return (((5.0 * power[5] * t + 4.0 * power[4]) * t + 3.0 * power[3]) * t + 2.0 * power[2]) * t + power[1]


def _factor(a, order):
    """LU with row pivoting, in place; False when singular."""
    n = a.shape[0]
    for k in range(n):
        pivot, largest = k, abs(a[k, k])
        for i in range(k + 1, n):
            if abs(a[i, k]) > largest:
                pivot, largest = i, abs(a[i, k])
        if not largest > 0.0:
            return False
        order[k] = pivot
        if pivot != k:
            for j in range(n):
                a[k, j], a[pivot, j] = a[pivot, j], a[k, j]
        inverse = 1.0 / a[k, k]
        for i in range(k + 1, n):
            factor = a[i, k] * inverse
            a[i, k] = factor
            if factor != 0.0:
                for j in range(k + 1, n):
                    a[i, j] -= factor * a[k, j]
    return True


def _substitute(a, order, b):
    """Solve with the factors of ``_factor``, in place."""
    n = a.shape[0]
    for k in range(n):
        b[k], b[order[k]] = b[order[k]], b[k]
    for k in range(n):
        for i in range(k + 1, n):
            b[i] -= a[i, k] * b[k]
    for k in range(n - 1, -1, -1):
        for j in range(k + 1, n):
            b[k] -= a[k, j] * b[j]
        b[k] /= a[k, k]


def _jacobian(Y, N, g, first_control, first_current, control_of, current_of, jacobian):
    """Y + N · dj/dc."""
    K = Y.shape[0]
    for row in range(K):
        for column in range(K):
            jacobian[row, column] = Y[row, column]
        for device in range(first_control.size):
            k, m = first_control[device], first_current[device]
            for current in range(current_of[device]):
                weight = N[row, m + current]
                if weight != 0.0:
                    for control in range(control_of[device]):
                        jacobian[row, k + control] += weight * g[m + current, control]


def _leap(c, step, scale, high, low):
    """A control after a Newton step; a leap beyond a junction's knee is shortened to its logarithm (Nagel 1975)."""
    target = c + step
    if step > 2.0 * scale and target > high:
        base = max(c, high)
        return base + scale * np.log1p((target - base) / scale)
    if step < -2.0 * scale and target < low:
        base = min(c, low)
        return base - scale * np.log1p((base - target) / scale)
    return target


def _newton(
    Y, N, r, c, j, g, most, laws, first_control, first_current, first_parameter, p, control_of, current_of,
    scales, high, low, jacobian, order, step,
):  # fmt: skip
    """Solve Y c + N j(c) = r from ``c``; on success c, and j carried along its tangent over the last step.

    Returns the iterations, negative when it has not converged. Leaves the factors of the last Jacobian.
    """
    K = c.size
    for iteration in range(1, most + 1):
        _evaluate(laws, first_control, first_current, first_parameter, p, c, j, g)
        for row in range(K):
            rest = r[row]
            for column in range(K):
                rest -= Y[row, column] * c[column]
            for column in range(j.size):
                rest -= N[row, column] * j[column]
            step[row] = rest
        _jacobian(Y, N, g, first_control, first_current, control_of, current_of, jacobian)
        if not _factor(jacobian, order):
            return -iteration
        _substitute(jacobian, order, step)
        worst = 0.0
        for k in range(K):
            size = abs(step[k]) / scales[k]
            if not size <= worst:
                worst = size
        if not worst < 1e12:
            return -iteration
        if worst < NEWTON_TOLERANCE:
            for device in range(laws.size):
                k, m = first_control[device], first_current[device]
                for current in range(current_of[device]):
                    for control in range(control_of[device]):
                        j[m + current] += g[m + current, control] * step[k + control]
            for k in range(K):
                c[k] += step[k]
            return iteration
        for k in range(K):
            c[k] = _leap(c[k], step[k], scales[k], high[k], low[k])
    return -most


def _homotopy(
    Y, N, r, c, j, g, laws, first_control, first_current, first_parameter, p, control_of, current_of,
    scales, high, low, jacobian, order, step,
):  # fmt: skip
    """Lead the drive from one that ``c`` solves to ``r``, halving where it is hard, doubling where it is easy."""
    K = c.size
    start, goal, solved = np.empty(K), np.empty(K), c.copy()
    _evaluate(laws, first_control, first_current, first_parameter, p, c, j, g)
    for row in range(K):
        start[row] = 0.0
        for column in range(K):
            start[row] += Y[row, column] * c[column]
        for column in range(j.size):
            start[row] += N[row, column] * j[column]
    done, stride, total = 0.0, 0.25, 0
    for _ in range(_HOMOTOPY_TRIALS):
        ahead = min(1.0, done + stride)
        for row in range(K):
            goal[row] = start[row] + ahead * (r[row] - start[row])
        used = _newton(
            Y, N, goal, c, j, g, _PLAIN_ITERATIONS, laws, first_control, first_current, first_parameter, p,
            control_of, current_of, scales, high, low, jacobian, order, step,
        )  # fmt: skip
        total += abs(used)
        if used > 0:
            done = ahead
            solved[:] = c
            if done >= 1.0:
                return total
            stride *= 2.0
        else:
            c[:] = solved
            stride *= 0.5
            if stride < 1e-9:
                break
    return -total


def _slopes(
    X, s, g, u, u_slope, A, B, E, R0, S0, first_control, first_current, control_of, current_of,
    X_slope, s_slope, rest_factors, rest_order, right,
):  # fmt: skip
    """dX/dt from the state equations, dc/dt by differentiating the root's equations, dj/dt = (dj/dc) dc/dt.

    ``rest_factors`` are those of the root's equations for a step of no length.
    """
    n, K = X.size, right.size
    for row in range(n):
        total = E[row, 0] * u + E[row, 1]
        for column in range(n):
            total += A[row, column] * X[column]
        for column in range(s.size):
            total += B[row, column] * s[column]
        X_slope[row] = total
    for row in range(K):
        total = S0[row] * u_slope
        for column in range(n):
            total += R0[row, column] * X_slope[column]
        right[row] = total
    _substitute(rest_factors, rest_order, right)
    _with_currents(right, g, first_control, first_current, control_of, current_of, s_slope)


def _with_currents(c, g, first_control, first_current, control_of, current_of, s):
    """s = (c, (dj/dc) c): small changes of the controls and the changes of the currents that follow."""
    K = c.size
    for k in range(K):
        s[k] = c[k]
    for device in range(first_control.size):
        k, m = first_control[device], first_current[device]
        for current in range(current_of[device]):
            total = 0.0
            for control in range(control_of[device]):
                total += g[m + current, control] * c[k + control]
            s[K + m + current] = total


def _close(error, R, Q, g, first_control, first_current, control_of, current_of, factors, order, e_c, e_s):
    """Turn an error of the open step into the one that the root lets through: error += Q e_s, in place.

    ``factors`` are those of the root's Jacobian; ``e_s`` becomes the change of (c, j).
    """
    for row in range(e_c.size):
        total = 0.0
        for column in range(error.size):
            total += R[row, column] * error[column]
        e_c[row] = total
    _substitute(factors, order, e_c)
    _with_currents(e_c, g, first_control, first_current, control_of, current_of, e_s)
    for row in range(error.size):
        for column in range(e_s.size):
            error[row] += Q[row, column] * e_s[column]


_ARRAYS = "float64[::1], float64[::1], float64[::1], float64[::1], float64[::1], float64[::1], int64[::1]"
_SETS = "float64[:, :, ::1], " * 7 + "float64[:, ::1], float64[:, :, ::1]"
_REST = "float64[:, ::1], " * 6 + "float64[::1], float64[::1], float64[::1], float64[::1]"
_BANK = "int64[::1], int64[::1], int64[::1], int64[::1], float64[::1], int64[::1], int64[::1]"
_LIMITS = "float64[::1], float64[::1], float64[::1]"
_CHOICES = "float64, int64, int64, float64, float64[::1], int64[::1], float64[::1]"


@njit_cached(
    f"int64({_ARRAYS}, {_SETS}, {_REST}, {_BANK}, {_LIMITS}, {_CHOICES})",
    inner=(
        _evaluate,
        _value,
        _slope,
        _factor,
        _substitute,
        _jacobian,
        _leap,
        _newton,
        _homotopy,
        _with_currents,
        _slopes,
        _close,
    ),
)
def advance(
    u, out, X, s, X_slope, s_slope, level_and_place,
    H, Y, N, Q, R, error_X, error_s, error_u, smoothing,
    A, B, E, Y0, N0, R0, S0, out_X, out_s, out_U,
    laws, first_control, first_current, first_parameter, p, control_of, current_of,
    scales, high, low,
    base_step, coarsest, finest, tolerance, weights, counts, fault,
):  # fmt: skip
    """Cross ``u.size - 5`` base intervals and write eight output points for each; returns 0, or 1 with ``fault`` set.

    ``fault`` is then (base interval, place within it, control that did not settle). ``weights`` turn states into volts
    for ``tolerance`` (volts); an infinite tolerance keeps to the level ``coarsest`` and to the bare rule. Otherwise
    the estimated local error is taken off, smoothed twice by the step's own Jacobian: that makes the rule third order
    and damps what the trapezoid would let ring (its growth at infinite stiffness falls from -1 to -1/3).
    """
    n, K, m = X.size, scales.size, s.size - scales.size
    width = n + K + m + 5
    history, target, X1, X1_slope = np.empty(width), np.empty(K + n), np.empty(n), np.empty(n)
    s1, s1_slope, e_s = np.empty(K + m), np.zeros(K + m), np.empty(K + m)
    error, correction = np.empty(n), np.empty(n)
    g = np.zeros((m, MOST_CONTROLS))
    jacobian, order, step = np.empty((K, K)), np.empty(K, np.int64), np.empty(K)
    rest_factors, rest_order = np.empty((K, K)), np.empty(K, np.int64)
    r, e_c, trial_c, trial_j = np.empty(K), np.empty(K), np.empty(K), np.empty(m)
    power = np.empty(6)
    per_base, controlled = 1.0 / base_step, tolerance < np.inf
    last = H.shape[0] - 1
    whole = 1 << last
    dense_stride = whole // DENSE
    level = level_and_place[0]

    for interval in range(u.size - LOOKAROUND):
        for k in range(6):
            power[k] = 0.0
            for i in range(6):
                power[k] += _SIX_POINTS[k, i] * u[interval + i]
        place, next_dense = 0, 1
        while place < whole:
            span = 1 << (last - level)
            h = base_step * span / whole
            t0, t1 = place / whole, (place + span) / whole
            u0, u1 = _value(power, t0), _value(power, t1)
            du0 = _slope(power, t0)
            du1 = _slope(power, t1)

            # the incident waves: everything that is known at the start of the step
            for k in range(n):
                history[k] = X[k]
            for k in range(K + m):
                history[n + k] = s[k]
            history[n + K + m] = u0
            history[n + K + m + 1] = u1
            history[n + K + m + 2] = du0 * (t1 - t0)
            history[n + K + m + 3] = du1 * (t1 - t0)
            history[n + K + m + 4] = 1.0
            for row in range(K + n):
                total = 0.0
                for column in range(width):
                    total += H[level, row, column] * history[column]
                target[row] = total

            # the root, from the controls carried on along their slopes
            for k in range(K):
                r[k] = target[k]
                trial_c[k] = s[k] + h * s_slope[k]
            used = _newton(
                Y[level], N[level], r, trial_c, trial_j, g, _PLAIN_ITERATIONS, laws, first_control, first_current,
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
                    trial_c[k] = s[k]
                used = _homotopy(
                    Y[level], N[level], r, trial_c, trial_j, g, laws, first_control, first_current,
                    first_parameter, p, control_of, current_of, scales, high, low, jacobian, order, step,
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
            for k in range(K):
                s1[k] = trial_c[k]
            for k in range(m):
                s1[K + k] = trial_j[k]
            for row in range(n):
                total = target[K + row]
                for column in range(K + m):
                    total += Q[level, row, column] * s1[column]
                X1[row] = total

            # slopes at the end of the step
            _jacobian(Y0, N0, g, first_control, first_current, control_of, current_of, rest_factors)
            if not _factor(rest_factors, rest_order):
                for row in range(K):
                    for column in range(K):
                        rest_factors[row, column] = 1.0 if row == column else 0.0
                    rest_order[row] = row
            _slopes(
                X1, s1, g, u1, du1 * per_base, A, B, E, R0, S0, first_control, first_current, control_of,
                current_of, X1_slope, s1_slope, rest_factors, rest_order, e_c,
            )  # fmt: skip

            # the local error, from how much the slopes change; then, smoothed once more, it is taken off
            ratio = 0.0
            if controlled:
                for row in range(n):
                    total = error_u[level, row] * (du0 - du1) * per_base
                    for column in range(n):
                        total += error_X[level, row, column] * (X_slope[column] - X1_slope[column])
                    for column in range(K + m):
                        total += error_s[level, row, column] * (s_slope[column] - s1_slope[column])
                    error[row] = total
                _close(
                    error, R[level], Q[level], g, first_control, first_current, control_of, current_of,
                    jacobian, order, e_c, e_s,
                )  # fmt: skip
                y_error = 0.0
                for row in range(n):
                    y_error += out_X[row] * error[row]
                    size = abs(error[row]) * weights[row] / tolerance
                    if not size <= ratio:
                        ratio = size
                for row in range(K + m):
                    y_error += out_s[row] * e_s[row]
                if not abs(y_error) / tolerance <= ratio:
                    ratio = abs(y_error) / tolerance
                if not ratio <= 1.0:
                    if level < finest:
                        level += 1
                        counts[REPEATED] += 1
                        continue
                    counts[CAPPED] += 1
                for row in range(n):
                    total = 0.0
                    for column in range(n):
                        total += smoothing[level, row, column] * error[column]
                    correction[row] = total
                _close(
                    correction, R[level], Q[level], g, first_control, first_current, control_of, current_of,
                    jacobian, order, e_c, e_s,
                )  # fmt: skip
                for row in range(n):
                    X1[row] += correction[row]
                for row in range(K + m):
                    s1[row] += e_s[row]
                _slopes(
                    X1, s1, g, u1, du1 * per_base, A, B, E, R0, S0, first_control, first_current, control_of,
                    current_of, X1_slope, s1_slope, rest_factors, rest_order, e_c,
                )  # fmt: skip

            # the output between the ends of the step: a cubic through values and slopes
            while next_dense <= DENSE and next_dense * dense_stride <= place + span:
                theta = (next_dense * dense_stride - place) / span
                y0, y1 = out_U[0] * u0 + out_U[1], out_U[0] * u1 + out_U[1]
                d0, d1 = out_U[0] * du0 * per_base, out_U[0] * du1 * per_base
                for k in range(n):
                    y0 += out_X[k] * X[k]
                    y1 += out_X[k] * X1[k]
                    d0 += out_X[k] * X_slope[k]
                    d1 += out_X[k] * X1_slope[k]
                for k in range(K + m):
                    y0 += out_s[k] * s[k]
                    y1 += out_s[k] * s1[k]
                    d0 += out_s[k] * s_slope[k]
                    d1 += out_s[k] * s1_slope[k]
                rest = 1.0 - theta
                out[interval * DENSE + next_dense - 1] = (
                    y0 * (1.0 + 2.0 * theta) * rest * rest
                    + y1 * theta * theta * (3.0 - 2.0 * theta)
                    + h * theta * rest * (d0 * rest - d1 * theta)
                )
                next_dense += 1

            for k in range(n):
                X[k], X_slope[k] = X1[k], X1_slope[k]
            for k in range(K + m):
                s[k], s_slope[k] = s1[k], s1_slope[k]
            place += span
            counts[STEPS] += 1
            if level > coarsest and ratio < 0.08 and place % (2 * span) == 0:
                level -= 1
    level_and_place[0] = level
    return 0
