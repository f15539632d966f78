"""Textbook formulas for the tests of the shipped stages: nothing here comes from the package."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np

THERMAL_VOLTS = 1.380649e-23 * 298.15 / 1.602176634e-19
FREQUENCIES = np.array([20.0, 50.0, 150.0, 400.0, 1_000.0, 2_500.0, 6_000.0, 15_000.0])

CHIPS = {  # gain-bandwidth in Hz, open-loop gain, output ohms, volts lost to the upper and the lower rail
    "4558": (3e6, 3e5, 75.0, 1.0, 1.0),
    "TL072": (4e6, 2e5, 125.0, 1.5, 1.5),
    "5534": (10e6, 1e5, 10.0, 2.0, 2.0),
    "TLC2272": (2.2e6, 3.5e4, 140.0, 0.02, 0.02),
    "LM358": (0.7e6, 1e5, 300.0, 1.5, 0.005),
}


def decibels(ratio: Any) -> np.ndarray:
    return np.asarray(20.0 * np.log10(np.abs(ratio)))


def parallel(*impedances: Any) -> np.ndarray:
    return np.asarray(1.0 / sum(1.0 / np.asarray(z, dtype=complex) for z in impedances))


def audio(position: float) -> float:
    """The share of an audio taper: exponential, 15 % at mid travel."""
    base = (1.0 / 0.15 - 1.0) ** 2
    return float((base**position - 1.0) / (base - 1.0))


def noninverting(s: np.ndarray, chip: str, feedback: Any, ground: Any, onward: Any) -> np.ndarray:
    """Gain from the plus input to the output: one pole, output resistance, the feedback network as a load too."""
    bandwidth, gain, output_ohms, *_ = CHIPS[chip]
    open_loop = 2.0 * np.pi * bandwidth / (s + 2.0 * np.pi * bandwidth / gain)
    load = parallel(onward, np.asarray(feedback) + ground)
    loaded = open_loop * load / (load + output_ohms)
    return np.asarray(loaded / (1.0 + loaded * ground / (np.asarray(ground) + feedback)))


Branch = tuple[tuple[str, ...], Any]
"""Two nodes and an admittance; or three nodes and a transconductance: a current from the first to the second node,
controlled by the third one's voltage over the second."""


def nodal(branches: Sequence[Branch], driven: str, wanted: str) -> np.ndarray:
    """Voltage of node ``wanted`` for one volt at node ``driven``, by node equations; node "0" is ground."""
    nodes = sorted({node for pair, _ in branches for node in pair} - {"0", driven})
    size = np.broadcast_shapes(*(np.shape(value) for _, value in branches))
    matrix = np.zeros((*size, len(nodes), len(nodes)), dtype=complex)
    right = np.zeros((*size, len(nodes)), dtype=complex)

    def add(row: str, column: str, value: Any) -> None:
        if row in nodes and column in nodes:
            matrix[..., nodes.index(row), nodes.index(column)] += value
        elif row in nodes and column == driven:
            right[..., nodes.index(row)] -= value

    for (a, b, *control), value in branches:
        by, over = (control[0], b) if control else (a, b)
        for node, sign in ((a, 1.0), (b, -1.0)):
            add(node, by, sign * value)
            add(node, over, -sign * value)
    solved = np.linalg.solve(matrix, right[..., None])[..., 0]
    return np.asarray(solved[..., nodes.index(wanted)])
