"""A stage made ready to be streamed through: operating point, coefficient sets, the arrays that the kernel reads."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from functools import cached_property
from types import MappingProxyType
from typing import TYPE_CHECKING, Any

import numpy as np

from tackbench.audio.resample import base_factor
from tackbench.circuit import Circuit
from tackbench.errors import InputError, nearest
from tackbench.kernel.plain import EMERGENCY_LEVELS, arrays_of
from tackbench.kernel.problem import Problem
from tackbench.network.model import NetworkModel, network_model
from tackbench.network.operating_point import OperatingPoint, settle
from tackbench.network.rules import CoefficientSets, coefficient_sets, root_form
from tackbench.network.small_signal import stability_warnings

if TYPE_CHECKING:
    from tackbench.render.stream import StageStream

NUMERICS = 1
"""Rises whenever a rendered sample may change."""


@dataclass(frozen=True)
class Quality:
    """A rule and how finely it steps: between ``coarsest`` and ``finest`` halvings of the base interval, by a local
    error of ``tolerance`` volts (infinite: at the coarsest, unless a step cannot be solved there)."""

    rule: str
    coarsest: int
    finest: int
    tolerance: float


QUALITY_STEPS: Mapping[str, Quality] = MappingProxyType(
    {
        "draft": Quality("trapezoid", 0, 8, 2e-3),
        "standard": Quality("trapezoid", 0, 12, 5e-5),
        "best": Quality("trapezoid", 0, 12, 7e-6),
    }
)
QUALITIES = tuple(QUALITY_STEPS)


@dataclass(frozen=True)
class PreparedStage:
    """A circuit at one take rate and quality, ready to be streamed through any number of times, from any thread.

    ``rule`` is the one in use ("exact", "trapezoid"); ``problem`` what the kernels take; ``output_dc`` the output's
    voltage at the operating point; ``start`` the circuit at rest, (X, c, j).
    """

    circuit: Circuit
    rate: int
    factor: int
    quality: Quality
    model: NetworkModel
    rest: OperatingPoint
    rule: str
    problem: Problem
    output_dc: float
    warnings: tuple[str, ...]
    start: np.ndarray

    def stream(self, channels: int) -> StageStream:
        """A fresh stream: the circuit at rest, the take about to begin."""
        from tackbench.render.stream import StageStream

        return StageStream(self, channels)

    @cached_property
    def plain_arrays(self) -> tuple[Any, ...]:
        """What the plain kernel takes: with levels enough for a step that is hard to solve."""
        levels = max(self.quality.finest, EMERGENCY_LEVELS) + 1
        sets = coefficient_sets(root_form(self.model.state), self.problem.base_step, levels, self.quality.rule)
        return arrays_of(replace(self.problem, arrays={**self.problem.arrays, **_leveled(sets)}))


def prepare(circuit: Circuit, rate: int, quality: str = "standard") -> PreparedStage:
    """Make ``circuit`` ready for takes of ``rate`` hertz.

    Raises InputError for an unknown quality or a rate that is not supported, WorkError without operating point.
    """
    if quality not in QUALITY_STEPS:
        raise InputError(f"{quality!r} is not a quality", key="quality", expected=nearest(quality, QUALITIES))
    return prepare_with(circuit, rate, QUALITY_STEPS[quality])


def prepare_with(circuit: Circuit, rate: int, quality: Quality) -> PreparedStage:
    """Make ``circuit`` ready with steps of one's own choice (tests and benchmarks)."""
    factor = base_factor(rate)
    model = network_model(circuit)
    rest = settle(model)
    base_step = 1.0 / (rate * factor)
    sets = coefficient_sets(root_form(model.state), base_step, quality.finest + 1, quality.rule)
    state, bank, K = model.state, model.bank, model.state.controls
    of_z, of_U = _output_maps(model, circuit)
    fixed = {
        "ABE": np.hstack([state.A, state.B, state.E]),
        "Y0": state.F[:, :K],
        "N0": state.F[:, K:],
        "R0": state.R,
        "S0": state.S[:, :1],
        "out_z": of_z[None],
        "out_U": of_U[None],
    }
    limits = {"scales": bank.scales, "high": bank.high_knees, "low": bank.low_knees}
    problem = Problem(
        n=state.states,
        K=K,
        m=state.currents,
        laws=tuple(int(law) for law in bank.laws),
        arrays={**_leveled(sets), **fixed, **limits, "parameters": bank.parameters, "weights": state.scales},
        base_step=base_step,
        coarsest=quality.coarsest,
        finest=quality.finest,
        tolerance=quality.tolerance,
    )
    start = np.concatenate([rest.X, rest.c, rest.j])
    dc = float(of_z @ start + of_U[1])
    warnings = (*rest.warnings, *stability_warnings(model, rest))
    return PreparedStage(circuit, rate, factor, quality, model, rest, sets.rule, problem, dc, warnings, start)


def _leveled(sets: CoefficientSets) -> dict[str, np.ndarray]:
    """The coefficient sets by the names that the kernels know them by."""
    error_map = np.concatenate([sets.error_X, sets.error_s, sets.error_u[:, :, None]], axis=2)
    matrices = {"H": sets.H, "Y": sets.Y, "N": sets.N, "Q": sets.Q, "R": sets.R}
    return {**matrices, "error_map": error_map, "smoothing": sets.smoothing}


def _output_maps(model: NetworkModel, circuit: Circuit) -> tuple[np.ndarray, np.ndarray]:
    """The output voltage in terms of (X, c, j) and of (take, 1)."""
    state, node = model.state, model.assembly.elements.node(circuit.output_node)
    if node < 0:
        return np.zeros(state.states + state.controls + state.currents), np.zeros(2)
    return np.concatenate([state.nodes_X[node], state.nodes_s[node]]), state.nodes_U[node].copy()
