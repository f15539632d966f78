"""One circuit as the kernels take it: coefficient sets, the laws' constants, and how finely to step."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property

import numpy as np

LEVELED = ("H", "Y", "N", "Q", "R", "error_map", "smoothing")
"""Matrices that there is one of for each length of step, shape (levels, rows, columns); see ``network.rules``."""

FIXED = ("ABE", "Y0", "N0", "R0", "S0", "out_z", "out_U")
"""Matrices, shape (rows, columns), of the state equations and of the output."""

VALUES = ("parameters", "scales", "high", "low", "weights")
"""Vectors: the laws' constants, Newton's limits, and what turns the states' errors into volts."""


@dataclass(frozen=True)
class Problem:
    """One circuit at one base step and quality, as the kernels take it.

    ``n`` states, ``K`` controls, ``m`` currents; ``laws`` by number; ``arrays`` by the names above. ``coarsest``,
    ``finest`` (levels) and ``tolerance`` (volts) choose the steps, base_step / 2^level seconds long.
    """

    n: int
    K: int
    m: int
    laws: tuple[int, ...]
    arrays: Mapping[str, np.ndarray] = field(repr=False)
    base_step: float
    coarsest: int
    finest: int
    tolerance: float

    @property
    def controlled(self) -> bool:
        """Whether the steps are chosen by an error estimate."""
        return self.tolerance < np.inf

    @cached_property
    def patterns(self) -> dict[str, np.ndarray]:
        """Where each matrix is not zero (at any level)."""
        found = {name: np.any(self.arrays[name] != 0.0, axis=0) for name in LEVELED}
        return {**found, **{name: self.arrays[name] != 0.0 for name in FIXED}}
