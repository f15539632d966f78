"""Radau IIA of order 5 on M·x' + m·u' = F(x, u): variable step, simplified Newton, landing on asked times.

After E. Hairer and G. Wanner, Solving Ordinary Differential Equations II, Springer 1996, sections IV.8 and VI.1. The
storage stays in charge form (M·x + m·u), so the take's slope is never needed and linear invariants hold exactly.
"""

from __future__ import annotations

import math

import numpy as np

from .compiled import jit
from .drive import volts
from .linear import factor, substitute
from .residual import evaluate

_R6 = math.sqrt(6.0)
_C = np.array([(4 - _R6) / 10, (4 + _R6) / 10, 1.0])
_A = np.array(
    [
        [(88 - 7 * _R6) / 360, (296 - 169 * _R6) / 1800, (-2 + 3 * _R6) / 225],
        [(296 + 169 * _R6) / 1800, (88 + 7 * _R6) / 360, (-2 - 3 * _R6) / 225],
        [(16 - _R6) / 36, (16 + _R6) / 36, 1 / 9],
    ]
)
_INVERSE = np.linalg.inv(_A)
_ERROR = np.array([-(13 + 7 * _R6) / 3, (-13 + 7 * _R6) / 3, -1 / 3])


def _real_basis() -> tuple[float, float, float, np.ndarray, np.ndarray]:
    """Eigenvalues (one real, one pair) of the inverse tableau and the real basis that splits it."""
    values, vectors = np.linalg.eig(_INVERSE)
    real = int(np.argmin(np.abs(values.imag)))
    pair = int(np.argmax(values.imag))
    basis = np.stack([vectors[:, real].real, vectors[:, pair].real, vectors[:, pair].imag], axis=1)
    return values[real].real, values[pair].real, values[pair].imag, basis, np.linalg.inv(basis)


_GAMMA, _ALPHA, _BETA, _T, _TI = _real_basis()
_T, _TI = np.ascontiguousarray(_T), np.ascontiguousarray(_TI)

DONE, STEP_TOO_SMALL, TOO_MANY_STEPS = 0, 1, 2
STEPS, REJECTED, FAILED, FACTORED, ITERATIONS = range(5)
_NEWTON_SHARE = 1e-3
_MOST_ITERATIONS = 12
_SHORTEST_STEP = 1e-16


@jit
def _matrices(mass, J, h, real, complex_, scale_r, pivots_r, scale_c, pivots_c):
    n = J.shape[0]
    for i in range(n):
        for j in range(n):
            real[i, j] = _GAMMA / h * mass[i, j] - J[i, j]
            complex_[i, j] = complex(_ALPHA / h * mass[i, j] - J[i, j], _BETA / h * mass[i, j])
    return factor(real, scale_r, pivots_r) and factor(complex_, scale_c, pivots_c)


@jit
def _newton(system, drive, t, h, u0, x, Z, tolerance, work, lus, stats):
    """Simplified Newton for the stage differences ``Z`` (3, n); returns (converged, iterations, rate)."""
    n = x.shape[0]
    F, W, Q, point, empty = work
    real, complex_, scale_r, pivots_r, scale_c, pivots_c = lus
    u = np.empty(3)
    load = np.empty(3)
    for s in range(3):
        u[s] = volts(drive, t + _C[s] * h)
    for s in range(3):
        load[s] = _TI[s, 0] * (u[0] - u0) + _TI[s, 1] * (u[1] - u0) + _TI[s, 2] * (u[2] - u0)
    for s in range(3):
        for i in range(n):
            W[s, i] = _TI[s, 0] * Z[0, i] + _TI[s, 1] * Z[1, i] + _TI[s, 2] * Z[2, i]
    mixed = np.empty(n, np.complex128)
    first = np.empty(n)
    before = 0.0
    rate = 0.0
    for iteration in range(1, _MOST_ITERATIONS + 1):
        stats[ITERATIONS] += 1
        for s in range(3):
            for i in range(n):
                point[i] = x[i] + Z[s, i]
            evaluate(system, point, u[s], 1.0, F[s], empty, False)
            for i in range(n):
                total = system.mass_load[i] * load[s]
                for j in range(n):
                    total += system.mass[i, j] * W[s, j]
                Q[s, i] = total / h
        for i in range(n):
            f0 = _TI[0, 0] * F[0, i] + _TI[0, 1] * F[1, i] + _TI[0, 2] * F[2, i]
            f1 = _TI[1, 0] * F[0, i] + _TI[1, 1] * F[1, i] + _TI[1, 2] * F[2, i]
            f2 = _TI[2, 0] * F[0, i] + _TI[2, 1] * F[1, i] + _TI[2, 2] * F[2, i]
            first[i] = f0 - _GAMMA * Q[0, i]
            mixed[i] = complex(f1 - _ALPHA * Q[1, i] - _BETA * Q[2, i], -(f2 + _BETA * Q[1, i] - _ALPHA * Q[2, i]))
        substitute(real, scale_r, pivots_r, first)
        substitute(complex_, scale_c, pivots_c, mixed)
        size = 0.0
        for i in range(n):
            d0, d1, d2 = first[i], mixed[i].real, -mixed[i].imag
            W[0, i] += d0
            W[1, i] += d1
            W[2, i] += d2
            for s in range(3):
                change = _T[s, 0] * d0 + _T[s, 1] * d1 + _T[s, 2] * d2
                Z[s, i] += change
                size = max(size, abs(change) / tolerance[i])
        if not size < 1e100:
            return False, iteration, 10.0
        if iteration > 1:
            rate = size / before if before > 0.0 else 0.0
            if rate < 1.0 and size * rate / (1.0 - rate) <= _NEWTON_SHARE:
                return True, iteration, rate
            if rate >= 1.0 and (size > 0.1 or iteration > 6):
                # At the floor of rounding the steps stop shrinking: that is as far as it goes.
                return size <= 0.1, iteration, rate
            if iteration > 4 and rate > 0.9 and size > 0.1:
                return False, iteration, rate
        elif size == 0.0:
            return True, iteration, 0.0
        before = size
    return size <= 0.1, _MOST_ITERATIONS, rate


@jit
def _charge_error(system, error, tolerance):
    """Largest error of the stored charges, fluxes and op-amp voltages, each as an error of its own unknown."""
    n = error.shape[0]
    largest = 0.0
    for i in range(n):
        own = system.mass[i, i]
        if own <= 0.0:
            continue
        total = 0.0
        for j in range(n):
            total += system.mass[i, j] * error[j]
        largest = max(largest, abs(total) / own / tolerance[i])
    return largest


@jit
def _estimate(system, f0, x, Z, h, u0, tolerance, lus, rethink, scratch):
    """The embedded third-order error estimate, filtered once more when ``rethink``."""
    n = x.shape[0]
    real, _, scale_r, pivots_r, _, _ = lus
    u, du1, du2, du3 = u0
    stored = np.empty(n)
    for i in range(n):
        total = system.mass_load[i] * (_ERROR[0] * du1 + _ERROR[1] * du2 + _ERROR[2] * du3)
        for j in range(n):
            total += system.mass[i, j] * (_ERROR[0] * Z[0, j] + _ERROR[1] * Z[1, j] + _ERROR[2] * Z[2, j])
        stored[i] = total / h
    error = stored + f0
    substitute(real, scale_r, pivots_r, error)
    size = _charge_error(system, error, tolerance)
    if rethink and size >= 1.0:
        F = np.empty(n)
        evaluate(system, x + error, u, 1.0, F, scratch, False)
        error = stored + F
        substitute(real, scale_r, pivots_r, error)
        size = min(size, _charge_error(system, error, tolerance))
    return size


@jit
def _sample(samples, rate, table, half, fine, t, weight):
    """Add ``weight`` at time ``t`` to the band-limited samples: a windowed sinc read off its table."""
    position = t * rate
    low = max(0, math.ceil(position - half))
    high = min(samples.shape[0] - 1, math.floor(position + half))
    for k in range(low, high + 1):
        q = (k - position + half) * fine + 1.0
        j = min(max(int(q), 1), table.shape[0] - 3)
        f = q - j
        a, b, c, d = table[j - 1], table[j], table[j + 1], table[j + 2]
        value = (
            a * (-f * (f - 1.0) * (f - 2.0) / 6.0)
            + b * ((f + 1.0) * (f - 1.0) * (f - 2.0) / 2.0)
            + c * (-(f + 1.0) * f * (f - 2.0) / 2.0)
            + d * ((f + 1.0) * f * (f - 1.0) / 6.0)
        )
        samples[k] += weight * rate * value


@jit
def integrate(system, drive, x0, span, times, states, slopes, limits, floor, output, sampling, stats):
    """March from ``span[0]`` to ``span[1]``, landing on every one of ``times``.

    ``states`` and ``slopes`` (len(times), n) receive x and dx/dt there. ``limits`` is (relative tolerance, largest
    step, largest number of steps); ``floor`` (n) holds the absolute tolerances; the scale of an unknown is its
    distance from ``x0``. ``output`` is (index, scale, take share) of the output node; ``sampling`` is (samples,
    rate, table, half, fine) and receives the band-limited output less its value at ``x0``. Returns (code, time).
    """
    n = x0.shape[0]
    samples, rate, table, half, fine = sampling
    relative, longest, most = limits
    out_index, out_scale, out_take = output
    x = x0.copy()
    t, stop = span
    u0 = volts(drive, t)
    start_take = u0
    f0, J = np.zeros(n), np.zeros((n, n))
    Z, old = np.zeros((3, n)), np.zeros((3, n))
    work = (np.zeros((3, n)), np.zeros((3, n)), np.zeros((3, n)), np.zeros(n), np.zeros((1, 1)))
    lus = (
        np.zeros((n, n)),
        np.zeros((n, n), np.complex128),
        np.zeros(n),
        np.zeros(n, np.int64),
        np.zeros(n),
        np.zeros(n, np.int64),
    )
    tolerance = np.empty(n)
    outs = np.zeros(4)
    scale_sample = 1.0 / max(rate, 1.0)
    h = min(1e-9, longest)
    h_old = 0.0
    h_factored = 0.0
    fresh = False
    stale = True
    failed_last = False
    next_time = 0
    while next_time < times.shape[0] and times[next_time] <= t:
        states[next_time] = x
        slopes[next_time] = 0.0
        next_time += 1
    while t < stop:
        if stats[STEPS] + stats[REJECTED] >= most:
            return TOO_MANY_STEPS, t
        target = stop
        if next_time < times.shape[0] and times[next_time] < stop:
            target = times[next_time]
        wish = h
        landing = t + 1.0001 * h >= target
        if landing:
            h = target - t
        elif t + 2.0 * h > target:
            h = 0.5 * (target - t)
        if h < _SHORTEST_STEP:
            return STEP_TOO_SMALL, t
        for i in range(n):
            tolerance[i] = floor[i] + relative * abs(x[i] - x0[i])
        if stale:
            evaluate(system, x, u0, 1.0, f0, J, True)
            fresh = True
            stale = False
            h_factored = 0.0
        if h != h_factored:
            stats[FACTORED] += 1
            if not _matrices(system.mass, J, h, lus[0], lus[1], lus[2], lus[3], lus[4], lus[5]):
                h *= 0.7
                h_factored = 0.0
                stats[FAILED] += 1
                continue
            h_factored = h
        if h_old > 0.0:
            ratio = h / h_old
            for s in range(3):
                q = 1.0 + _C[s] * ratio
                # Lagrange through the old step's start (0) and its three stages (c).
                l1 = q * (q - _C[1]) * (q - 1.0) / (_C[0] * (_C[0] - _C[1]) * (_C[0] - 1.0))
                l2 = q * (q - _C[0]) * (q - 1.0) / (_C[1] * (_C[1] - _C[0]) * (_C[1] - 1.0))
                l3 = q * (q - _C[0]) * (q - _C[1]) / ((1.0 - _C[0]) * (1.0 - _C[1]))
                for i in range(n):
                    Z[s, i] = l1 * old[0, i] + l2 * old[1, i] + (l3 - 1.0) * old[2, i]
        else:
            Z[:] = 0.0
        good, iterations, rate_seen = _newton(system, drive, t, h, u0, x, Z, tolerance, work, lus, stats)
        if not good:
            stats[FAILED] += 1
            if fresh:
                h *= 0.3
                h_old = h_old if iterations < 3 else 0.0
            else:
                evaluate(system, x, u0, 1.0, f0, J, True)
                fresh = True
            h_factored = 0.0
            failed_last = True
            continue
        u1, u2, u3 = volts(drive, t + _C[0] * h), volts(drive, t + _C[1] * h), volts(drive, t + h)
        takes = (u0, u1 - u0, u2 - u0, u3 - u0)
        error = _estimate(system, f0, x, Z, h, takes, tolerance, lus, failed_last or stats[STEPS] == 0, J)
        if samples.shape[0] > 0:
            outs[0] = out_take * (u0 - start_take)
            outs[1], outs[2], outs[3] = (
                out_take * (u1 - start_take),
                out_take * (u2 - start_take),
                out_take * (u3 - start_take),
            )
            if out_index >= 0:
                base = x[out_index] - x0[out_index]
                outs[0] += out_scale * base
                for s in range(3):
                    outs[s + 1] += out_scale * (base + Z[s, out_index])
            integral = outs[0]
            for s in range(3):
                for r in range(3):
                    integral += _ERROR[s] * _A[s, r] * outs[r + 1]
            allowed = floor[0] + relative * max(abs(outs[0]), abs(outs[3]))
            error = max(error, abs(integral) * h / _GAMMA / scale_sample / allowed)
        safety = 0.9 * (2 * _MOST_ITERATIONS + 1) / (2 * _MOST_ITERATIONS + iterations)
        grow = min(6.0, max(0.15, safety * max(error, 1e-12) ** -0.25))
        if error >= 1.0:
            stats[REJECTED] += 1
            failed_last = True
            h *= grow if h_old > 0.0 else 0.1
            if not fresh:
                stale = True
            continue
        stats[STEPS] += 1
        if samples.shape[0] > 0:
            for s in range(3):
                _sample(samples, rate, table, half, fine, t + _C[s] * h, h * _A[2, s] * outs[s + 1])
        if (landing and target < stop) or (landing and next_time < times.shape[0] and times[next_time] == stop):
            for i in range(n):
                states[next_time, i] = x[i] + Z[2, i]
                slopes[next_time, i] = (
                    _INVERSE[2, 0] * Z[0, i] + _INVERSE[2, 1] * Z[1, i] + _INVERSE[2, 2] * Z[2, i]
                ) / h
            next_time += 1
        for i in range(n):
            x[i] += Z[2, i]
            for s in range(3):
                old[s, i] = Z[s, i]
        t = target if landing else t + h
        h_old = h
        u0 = u3
        failed_last = False
        fresh = False
        proposed = min(longest, h * grow)
        if landing and wish > h:
            proposed = min(longest, max(proposed, min(wish, 6.0 * h)))
        if rate_seen < 2e-2 and 0.99 * h <= proposed <= 1.3 * h:
            h = h_factored
            evaluate(system, x, u0, 1.0, f0, work[4], False)
        else:
            h = proposed
            stale = True
    return DONE, t
