"""The take as a piecewise polynomial in time, so that compiled code can evaluate it and its slope anywhere."""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import NamedTuple

import numpy as np

from .compiled import jit

_DEGREE = 11
_TAIL = 2e-12  # a sine of thousands of radians is known no better
_HALVINGS = 5


class Drive(NamedTuple):
    """Segment ``k`` covers ``start + k*length`` on; ``coefficients[k]`` are powers of s in −1 … 1. Zero outside."""

    start: float
    length: float
    coefficients: np.ndarray


def silence() -> Drive:
    """A take of zero volts."""
    return Drive(0.0, 1.0, np.zeros((1, _DEGREE + 1)))


def fit(function: Callable[[np.ndarray], np.ndarray], stop: float, segment: float = 1 / 48000) -> Drive:
    """Interpolate a smooth ``function`` (seconds in, volts out, arrays) on 0 … ``stop`` at Chebyshev points.

    Segments are halved until the last two Chebyshev coefficients are below 2e-12 of the largest value. Raises
    ValueError when five halvings are not enough: the function is not smooth on the scale of a sample.
    """
    for _ in range(_HALVINGS + 1):
        count = max(1, math.ceil(stop / segment - 1e-9))
        series, largest = _chebyshev(function, count, segment)
        if np.max(np.abs(series[:, -2:])) <= _TAIL * max(largest, 1e-300):
            return Drive(0.0, segment, np.ascontiguousarray(series @ _to_powers()))
        segment /= 2
    raise ValueError("the drive is not smooth: it cannot be interpolated to 2e-12 of its peak")


def _chebyshev(function: Callable, count: int, segment: float) -> tuple[np.ndarray, float]:
    k = np.arange(_DEGREE + 1)
    angles = (k + 0.5) * np.pi / (_DEGREE + 1)
    times = (np.arange(count)[:, None] + 0.5 + 0.5 * np.cos(angles)) * segment
    values = np.asarray(function(times.ravel()), dtype=float).reshape(times.shape)
    transform = 2.0 / (_DEGREE + 1) * np.cos(np.outer(angles, k))
    transform[:, 0] *= 0.5
    return values @ transform, float(np.max(np.abs(values)))


def _to_powers() -> np.ndarray:
    rows = np.zeros((_DEGREE + 1, _DEGREE + 1))
    for k in range(_DEGREE + 1):
        powers = np.polynomial.chebyshev.cheb2poly([0.0] * k + [1.0])
        rows[k, : len(powers)] = powers
    return rows


@jit
def volts(drive, t):
    """The take's voltage at ``t`` seconds."""
    position = (t - drive.start) / drive.length
    segments, terms = drive.coefficients.shape
    if position < 0.0 or position > segments:
        return 0.0
    k = min(int(position), segments - 1)
    s = 2.0 * (position - k) - 1.0
    total = 0.0
    for j in range(terms - 1, -1, -1):
        total = total * s + drive.coefficients[k, j]
    return total


@jit
def slope(drive, t):
    """The take's rate of change (V/s) at ``t`` seconds."""
    position = (t - drive.start) / drive.length
    segments, terms = drive.coefficients.shape
    if position < 0.0 or position > segments:
        return 0.0
    k = min(int(position), segments - 1)
    s = 2.0 * (position - k) - 1.0
    total = 0.0
    for j in range(terms - 1, 0, -1):
        total = total * s + j * drive.coefficients[k, j]
    return total * 2.0 / drive.length
