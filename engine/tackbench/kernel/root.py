"""The root: all devices solved together, by Newton's method and by what is left where that fails.

``newton`` is what nearly every step needs. ``homotopy`` leads the drive from a solved one to the wanted one;
``around`` follows the path of solutions by its own length where it folds back, as in regenerative circuits. All solve
Y c + N j(c) = r for the controls c; they take no views of arrays, whose counting would cost more than the sums.
"""

from __future__ import annotations

import numpy as np

from tackbench.devices.table import evaluate_devices

NEWTON_TOLERANCE = 1e-3
PLAIN_ITERATIONS = 12
_HOMOTOPY_TRIALS = 400
_PATH_STEPS = 400
_PATIENT_ITERATIONS = 60
_DRIVE_WEIGHT = 1e-12  # of the drive in the path's length, where the controls count in their scales

evaluate = evaluate_devices()


def factorize(a, order):
    """LU with row pivoting, in place, the pivots by their inverses; False when singular."""
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
        a[k, k] = 1.0 / a[k, k]
        for i in range(k + 1, n):
            factor = a[i, k] * a[k, k]
            a[i, k] = factor
            if factor != 0.0:
                for j in range(k + 1, n):
                    a[i, j] -= factor * a[k, j]
    return True


def substitute(a, order, b):
    """Solve with the factors of ``factor``, in place."""
    n = a.shape[0]
    for k in range(n):
        b[k], b[order[k]] = b[order[k]], b[k]
    for k in range(n):
        for i in range(k + 1, n):
            b[i] -= a[i, k] * b[k]
    for k in range(n - 1, -1, -1):
        for j in range(k + 1, n):
            b[k] -= a[k, j] * b[j]
        b[k] *= a[k, k]


def form_jacobian(Y, N, level, g, first_control, first_current, control_of, current_of, jacobian):
    """Y + N · dj/dc."""
    K = Y.shape[1]
    for row in range(K):
        for column in range(K):
            jacobian[row, column] = Y[level, row, column]
        for device in range(first_control.size):
            k, m = first_control[device], first_current[device]
            for current in range(current_of[device]):
                weight = N[level, row, m + current]
                if weight != 0.0:
                    for control in range(control_of[device]):
                        jacobian[row, k + control] += weight * g[m + current, control]


def leap(c, step, scale, high, low):
    """A control after a Newton step; a leap beyond a junction's knee is shortened to its logarithm (Nagel 1975)."""
    target = c + step
    if step > 2.0 * scale and target > high:
        base = max(c, high)
        return base + scale * np.log1p((target - base) / scale)
    if step < -2.0 * scale and target < low:
        base = min(c, low)
        return base - scale * np.log1p((base - target) / scale)
    return target


def newton(
    Y, N, level, r, c, j, g, most, laws, first_control, first_current, first_parameter, p, control_of, current_of,
    scales, high, low, jacobian, order, step,
):  # fmt: skip
    """Solve Y c + N j(c) = r from ``c``; on success c, and j carried along its tangent over the last step.

    Returns the iterations, negative when it has not converged. Leaves the factors of the last Jacobian.
    """
    K = c.size
    for iteration in range(1, most + 1):
        evaluate(laws, first_control, first_current, first_parameter, p, c, j, g)
        for row in range(K):
            rest = r[row]
            for column in range(K):
                rest -= Y[level, row, column] * c[column]
            for column in range(j.size):
                rest -= N[level, row, column] * j[column]
            step[row] = rest
        form_jacobian(Y, N, level, g, first_control, first_current, control_of, current_of, jacobian)
        if not factorize(jacobian, order):
            return -iteration
        substitute(jacobian, order, step)
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
            c[k] = leap(c[k], step[k], scales[k], high[k], low[k])
    return -most


def homotopy(
    Y, N, level, r, c, j, g, laws, first_control, first_current, first_parameter, p, control_of, current_of,
    scales, high, low, jacobian, order, step,
):  # fmt: skip
    """Lead the drive from one that ``c`` solves to ``r``, halving where it is hard, doubling where it is easy."""
    K = c.size
    start, goal, solved = np.empty(K), np.empty(K), c.copy()
    evaluate(laws, first_control, first_current, first_parameter, p, c, j, g)
    for row in range(K):
        start[row] = 0.0
        for column in range(K):
            start[row] += Y[level, row, column] * c[column]
        for column in range(j.size):
            start[row] += N[level, row, column] * j[column]
    done, stride, total = 0.0, 0.25, 0
    for _ in range(_HOMOTOPY_TRIALS):
        ahead = min(1.0, done + stride)
        for row in range(K):
            goal[row] = start[row] + ahead * (r[row] - start[row])
        used = newton(
            Y, N, level, goal, c, j, g, PLAIN_ITERATIONS, laws, first_control, first_current, first_parameter, p,
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


def around(
    Y, N, level, r, c, j, g, laws, first_control, first_current, first_parameter, p, control_of, current_of,
    scales, high, low, jacobian, order, step,
):  # fmt: skip
    """Follow the path of solutions around its folds, from the drive that ``c`` solves to ``r``, by its own length.

    Where a circuit is regenerative the drive has to turn back for a while before it can go on: the solution then
    lies on another branch, where the circuit's strays would let it fall. Keller, "Numerical solution of bifurcation
    and nonlinear eigenvalue problems", 1977 (pseudo-arclength continuation); lengths count in the controls' scales.
    """
    K, total = c.size, 0
    start, drive, along = np.empty(K), np.empty(K), np.zeros(K)
    trial, correction, goal = np.empty(K), np.empty(K), np.empty(K)
    evaluate(laws, first_control, first_current, first_parameter, p, c, j, g)
    for row in range(K):
        start[row] = 0.0
        for column in range(K):
            start[row] += Y[level, row, column] * c[column]
        for column in range(j.size):
            start[row] += N[level, row, column] * j[column]
        drive[row] = r[row] - start[row]
    done, forward, stride = 0.0, 1.0, 0.25
    for _ in range(_PATH_STEPS):
        # the path's direction here, on the side that leads on
        evaluate(laws, first_control, first_current, first_parameter, p, c, j, g)
        form_jacobian(Y, N, level, g, first_control, first_current, control_of, current_of, jacobian)
        if not factorize(jacobian, order):
            return -total
        for k in range(K):
            step[k] = drive[k]
        substitute(jacobian, order, step)
        length, agrees = _DRIVE_WEIGHT, forward * _DRIVE_WEIGHT
        for k in range(K):
            length += (step[k] / scales[k]) ** 2
            agrees += along[k] * step[k] / scales[k] ** 2
        forward = (1.0 if agrees >= 0.0 else -1.0) / np.sqrt(length)
        for k in range(K):
            along[k] = step[k] * forward
        while True:
            for k in range(K):
                trial[k] = c[k] + stride * along[k]
            ahead, settled = done + stride * forward, False
            for _ in range(8):
                total += 1
                evaluate(laws, first_control, first_current, first_parameter, p, trial, j, g)
                for row in range(K):
                    rest = start[row] + ahead * drive[row]
                    for column in range(K):
                        rest -= Y[level, row, column] * trial[column]
                    for column in range(j.size):
                        rest -= N[level, row, column] * j[column]
                    correction[row], step[row] = rest, drive[row]
                form_jacobian(Y, N, level, g, first_control, first_current, control_of, current_of, jacobian)
                if not factorize(jacobian, order):
                    break
                substitute(jacobian, order, correction)
                substitute(jacobian, order, step)
                off, slope = 0.0, forward * _DRIVE_WEIGHT
                for k in range(K):
                    off += along[k] * correction[k] / scales[k] ** 2
                    slope += along[k] * step[k] / scales[k] ** 2
                shift = -off / slope if slope != 0.0 else 0.0
                ahead += shift
                worst = 0.0
                for k in range(K):
                    move = correction[k] + shift * step[k]
                    trial[k] += move
                    size = abs(move) / scales[k]
                    if not size <= worst:
                        worst = size
                if not worst < 1e6:
                    break
                if worst < 1e-6:
                    settled = True
                    break
            if settled:
                break
            stride *= 0.5
            if stride < 1e-7:
                return -total
        if ahead >= 1.0:
            part = (1.0 - done) / (ahead - done)
            for k in range(K):
                goal[k] = c[k] + part * (trial[k] - c[k])
            used = newton(
                Y, N, level, r, goal, j, g, _PATIENT_ITERATIONS, laws, first_control, first_current,
                first_parameter, p, control_of, current_of, scales, high, low, jacobian, order, step,
            )  # fmt: skip
            total += abs(used)
            if used > 0:
                c[:] = goal
                return total
            stride *= 0.25
            if stride < 1e-7:
                return -total
            continue
        done = ahead
        c[:] = trial
        stride = min(2.0 * stride, 100.0)
    return -total
