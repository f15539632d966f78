"""A stage made ready to be streamed through: operating point, coefficient sets, the arrays that the kernel reads."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import TYPE_CHECKING, Any

import numpy as np

from tackbench.audio.resample import base_factor
from tackbench.circuit import Circuit
from tackbench.devices.table import LAWS
from tackbench.errors import InputError, nearest
from tackbench.kernel.plain import EMERGENCY_LEVELS, ROWS
from tackbench.network.model import NetworkModel, network_model
from tackbench.network.operating_point import OperatingPoint, settle
from tackbench.network.rules import CoefficientSets, coefficient_sets, root_form

if TYPE_CHECKING:
    from tackbench.render.stream import StageStream

NUMERICS = 1
"""Rises whenever a rendered sample may change."""


@dataclass(frozen=True)
class Quality:
    """A rule and how finely it steps: between ``coarsest`` and ``finest`` halvings of the base interval, by a local
    error of ``tolerance`` volts (infinite: always at the coarsest)."""

    rule: str
    coarsest: int
    finest: int
    tolerance: float


QUALITY_STEPS: Mapping[str, Quality] = MappingProxyType(
    {
        "draft": Quality("trapezoid", 1, 1, float("inf")),
        "standard": Quality("trapezoid", 0, 8, 5e-5),
        "best": Quality("trapezoid", 0, 9, 7e-6),
    }
)
QUALITIES = tuple(QUALITY_STEPS)


@dataclass(frozen=True)
class PreparedStage:
    """A circuit at one take rate and quality, ready to be streamed through any number of times, from any thread.

    ``output_dc`` is the output's voltage at the operating point; ``rule`` the rule in use ("exact", "trapezoid").
    """

    circuit: Circuit
    rate: int
    factor: int
    quality: Quality
    model: NetworkModel
    rest: OperatingPoint
    rule: str
    output_dc: float
    warnings: tuple[str, ...]
    kernel_arrays: tuple[Any, ...]
    start: np.ndarray

    def stream(self, channels: int) -> StageStream:
        """A fresh stream: the circuit at rest, the take about to begin."""
        from tackbench.render.stream import StageStream

        return StageStream(self, channels)


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
    form = root_form(model.state)
    base_step = 1.0 / (rate * factor)
    levels = max(quality.finest, EMERGENCY_LEVELS) + 1
    sets = coefficient_sets(form, base_step, levels, quality.rule)
    output = _output_maps(model, circuit)
    z = np.concatenate([rest.X, rest.c, rest.j])
    return PreparedStage(
        circuit=circuit,
        rate=rate,
        factor=factor,
        quality=quality,
        model=model,
        rest=rest,
        rule=sets.rule,
        output_dc=float(output[0] @ z + output[1][1]),
        warnings=rest.warnings,
        kernel_arrays=_kernel_arrays(model, sets, output, base_step, quality),
        start=z,
    )


def _output_maps(model: NetworkModel, circuit: Circuit) -> tuple[np.ndarray, np.ndarray]:
    """The output voltage in terms of (X, c, j) and of (take, 1)."""
    state, node = model.state, model.assembly.elements.node(circuit.output_node)
    if node < 0:
        return np.zeros(state.states + state.controls + state.currents), np.zeros(2)
    return np.concatenate([state.nodes_X[node], state.nodes_s[node]]), state.nodes_U[node].copy()


def _in_blocks(matrices: np.ndarray) -> np.ndarray:
    """Matrices (…, rows, columns) as the kernel takes them: (…, blocks of rows, columns, rows in a block)."""
    count, rows, columns = matrices.shape
    blocks = -(-rows // ROWS)
    filled = np.zeros((count, blocks * ROWS, columns))
    filled[:, :rows] = matrices
    return np.ascontiguousarray(filled.reshape(count, blocks, ROWS, columns).swapaxes(-1, -2))


def _kernel_arrays(
    model: NetworkModel,
    sets: CoefficientSets,
    output: tuple[np.ndarray, np.ndarray],
    base_step: float,
    quality: Quality,
) -> tuple[Any, ...]:
    """What ``kernel.plain.advance`` takes after the stream's own arrays, in its order."""
    state, bank = model.state, model.bank
    K = state.controls
    error_map = np.concatenate([sets.error_X, sets.error_s, sets.error_u[:, :, None]], axis=2)
    current_of = np.array([len(LAWS[law].currents) for law in bank.laws], dtype=np.int64)
    return (
        *(_in_blocks(sets.H), sets.Y, sets.N, _in_blocks(sets.Q), _in_blocks(sets.R)),
        *(_in_blocks(error_map), _in_blocks(sets.smoothing)),
        _in_blocks(np.hstack([state.A, state.B, state.E])[None]),
        *(np.ascontiguousarray(state.F[None, :, :K]), np.ascontiguousarray(state.F[None, :, K:])),
        *(_in_blocks(state.R[None]), np.ascontiguousarray(state.S[:, 0])),
        *output,
        *(bank.laws, bank.first_control, bank.first_current, bank.first_parameter, bank.parameters),
        *(bank.control_of, current_of, bank.scales, bank.high_knees, bank.low_knees),
        *(base_step, quality.coarsest, quality.finest, quality.tolerance, state.scales),
    )
