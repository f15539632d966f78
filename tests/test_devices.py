"""Each law's statements against the law itself and its derivative against a complex step."""

from __future__ import annotations

import numpy as np
import pytest

from tackbench.devices.table import LAWS, MOST_CONTROLS, evaluate_devices
from tackbench.devices.trace import NUMBERS

CONSTANTS = {
    "junction": [2e-9, 0.045, 24.0],
    "breakdown junction": [2e-9, 0.045, 24.0, 1e-3, 0.7, 0.026, 11.0, 1e-12],
    "bipolar transistor": [1e-14, 0.0257, 36.0, 1e-16, 1e-14, 0.01, 1e-6],
    "JFET": [-1.0, 1e-3, 0.01, 1e-14, 0.0257, 36.0],
    "MOSFET": [0.4, 0.05, 0.01, 1e-14, 0.0257, 36.0],
    "op-amp": [0.5, 1e-5, 1.5, 1.5, 2.0, -2.0],
    "op-amp on live rails": [0.5, 1e-5, 1.5, 1.5],
    "op-amp output": [0.02, 100.0],
    "op-amp rail currents": [100.0, 1e-3],
    "op-amp output and rail currents": [0.02, 100.0, 1e-3],
}


def evaluate(number: int, c: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    law = LAWS[number]
    j, g = np.zeros(len(law.currents)), np.zeros((len(law.currents), MOST_CONTROLS))
    start = np.zeros(1, dtype=np.int64)
    evaluate_devices()(np.array([number]), start, start, start, np.array(CONSTANTS[law.name]), c, j, g)
    return j, g


@pytest.mark.parametrize("number", range(len(LAWS)), ids=[law.name for law in LAWS])
def test_statements_equal_the_law_and_slopes_equal_a_complex_step(number):
    law = LAWS[number]
    assert len(CONSTANTS[law.name]) == len(law.parameters)
    random = np.random.default_rng(number)
    for _ in range(300):
        c = random.normal(size=len(law.controls)) * random.choice([0.05, 0.7, 5.0])
        j, g = evaluate(number, c)
        np.testing.assert_allclose(j, law.function(NUMBERS, c, CONSTANTS[law.name]), rtol=1e-13, atol=1e-30)
        for column in range(len(law.controls)):
            step = c.astype(complex)
            step[column] += 1e-40j
            slope = np.imag(np.array(law.function(NUMBERS, step, CONSTANTS[law.name]))) / 1e-40
            # 1 - tanh² rounds to an absolute 1e-16 where the stage is fully driven
            np.testing.assert_allclose(g[:, column], slope, rtol=1e-10, atol=2e-16)


def test_exponential_goes_on_as_its_tangent_above_the_knee():
    j, g = evaluate(0, np.array([24.0 * 0.045 + 1.0]))
    at_knee = 2e-9 * np.exp(24.0)
    assert j[0] == pytest.approx(at_knee * (1 + 1 / 0.045) - 2e-9, rel=1e-12)
    assert g[0, 0] == pytest.approx(at_knee / 0.045, rel=1e-12)
