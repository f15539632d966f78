"""The coefficient sets' matrix functions against mpmath at sixty digits, from slow to far stiffer than a step."""

from __future__ import annotations

import mpmath
import numpy as np
import pytest

from tackbench.network.rules import phi_functions

BASE = 1 / 384e3


def network(farads: float) -> np.ndarray:
    """A clipper's linear part: two junction capacitances behind 0.6 ohm on a 10 nF node fed by 2.2 kilohm."""
    siemens, middle = 1 / 0.6, 1e-8
    return np.array(
        [
            [-(2 * siemens + 1 / 2200) / middle, siemens / middle, -siemens / middle],
            [siemens / farads, -siemens / farads, 0.0],
            [-siemens / farads, 0.0, -siemens / farads],
        ]
    )


def by_eigenvalues(A: np.ndarray, h: float) -> list[np.ndarray]:
    def phi(order: int, z: mpmath.mpc) -> mpmath.mpc:
        return mpmath.exp(z) if order == 0 else (phi(order - 1, z) - 1 / mpmath.factorial(order - 1)) / z

    with mpmath.workdps(60):
        values, vectors = mpmath.eig(mpmath.matrix(A.tolist()) * mpmath.mpf(h))
        inverse = vectors**-1
        results = [vectors * mpmath.diag([phi(order, value) for value in values]) * inverse for order in range(5)]
        return [np.array(result.apply(mpmath.re).tolist(), dtype=float) for result in results]


@pytest.mark.parametrize("farads", [4e-12, 1e-9, 1e-7])
def test_phi_functions_of_stiff_and_slow_modes_side_by_side(farads: float) -> None:
    A = network(farads)
    doubled = phi_functions(A, BASE / 2**14, 15)
    for level in (0, 7, 14):
        for got, true in zip(doubled[level], by_eigenvalues(A, BASE * 2.0 ** (level - 14)), strict=True):
            assert np.max(np.abs(got - true)) < 1e-12 * np.max(np.abs(true))
