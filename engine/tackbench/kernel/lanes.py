"""Circuits side by side: the generated kernel in lanes, with the plain kernel for what it gives up."""

from __future__ import annotations

import os
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tackbench.kernel import plain
from tackbench.kernel.machine import Kernel, kernel_for
from tackbench.kernel.problem import Problem
from tackbench.kernel.shape import packed, shape_of

Samples = NDArray[np.float64]

MOST_LANES = 4
"""Lanes of one block: more would wait for each other more than they save."""

MOST_ENTRIES = 6000
"""A shape with more entries than this is left to the plain kernel: straight-line code would not fit the processor."""

_FEWEST_LEVELS = 3  # the dense grid has eight points a base interval


@dataclass(frozen=True)
class LaneProblem:
    """One lane: its problem, its condition at rest (X, c, j), and what the plain kernel takes for it (made late)."""

    problem: Problem
    start: Samples
    plain_arrays: Callable[[], tuple[Any, ...]]


@dataclass(frozen=True)
class Fault:
    """A step that could not be solved: the lane, the place in base intervals from the block's start, and the control
    that did not settle (None: the output was not a finite number)."""

    lane: int
    interval: float
    control: int | None


def _choose_plain() -> bool:
    return os.environ.get("TACKBENCH_KERNEL", "").lower() == "plain"


def _entries(problem: Problem) -> int:
    """About how many entries the straight-line code works with."""
    matrices = sum(int(flags.sum()) for flags in problem.patterns.values())
    return matrices + problem.K**3


class LaneBlock:
    """Up to four circuits of one family crossing base intervals together.

    Each keeps its own condition and its own step; no circuit's samples depend on the others.
    """

    def __init__(self, lanes: Sequence[LaneProblem]) -> None:
        self.lanes = list(lanes)
        first = self.lanes[0].problem
        self.counts = np.zeros((len(self.lanes), plain.COUNTS), dtype=np.int64)
        self._solver: _Generated | _Plain
        kernel = None if _choose_plain() or _entries(first) > MOST_ENTRIES else self._kernel()
        self._solver = _Plain(self.lanes, self.counts) if kernel is None else _Generated(self, kernel)

    def _kernel(self) -> Kernel | None:
        width = 1 << (len(self.lanes) - 1).bit_length()
        self.shape = shape_of([lane.problem for lane in self.lanes], width)
        try:
            return kernel_for(self.shape)
        except (RuntimeError, AttributeError, TypeError, ImportError, OSError):
            return None  # a processor or a compiler that this one is not made for: the plain kernel serves

    def advance(self, inputs: Sequence[Samples]) -> tuple[list[Samples], Fault | None]:
        """Cross as many base intervals as the inputs (V, one array a lane, of one length) have samples, less five.

        Returns eight output points an interval for each lane (V), and the first fault, if there was one.
        """
        outputs, fault = self._solver.advance(inputs)
        if fault is None:
            for lane, output in enumerate(outputs):
                if not np.all(np.isfinite(output)):
                    place = int(np.flatnonzero(~np.isfinite(output))[0])
                    return outputs, Fault(lane, place / plain.DENSE, None)
        return outputs, fault


class _Plain:
    """Each lane through the plain kernel."""

    def __init__(self, lanes: Sequence[LaneProblem], counts: NDArray[np.int64]) -> None:
        self._counts = counts
        self._lanes = [_PlainLane(lane) for lane in lanes]

    def advance(self, inputs: Sequence[Samples]) -> tuple[list[Samples], Fault | None]:
        outputs: list[Samples] = []
        for index, (lane, u) in enumerate(zip(self._lanes, inputs, strict=True)):
            out = np.empty((len(u) - plain.LOOKAROUND) * plain.DENSE)
            fault = lane.advance(np.ascontiguousarray(u), out, self._counts[index])
            if fault is not None:
                return outputs, Fault(index, *fault)
            outputs.append(out)
        return outputs, None


class _PlainLane:
    """One circuit's condition, and the plain kernel on it."""

    def __init__(self, lane: LaneProblem) -> None:
        problem = lane.problem
        self.arrays = lane.plain_arrays()
        self.z, self.z_slope = lane.start.copy(), np.zeros_like(lane.start)
        self.bend, self.level = np.zeros(problem.K), np.array([problem.coarsest], dtype=np.int64)
        self._work = plain.workspace(problem.n, problem.K, problem.m)

    def advance(self, u: Samples, out: Samples, counts: NDArray[np.int64]) -> tuple[float, int] | None:
        """Returns the place and the control of a step that could not be solved."""
        fault, condition = np.zeros(3), (self.z, self.z_slope, self.bend, self.level)
        if plain.advance(u, out, *condition, *self.arrays, counts, fault, *self._work):
            return float(fault[0] + fault[1]), int(fault[2])
        return None


class _Generated:
    """All lanes through one generated kernel."""

    def __init__(self, block: LaneBlock, kernel: Kernel) -> None:
        self._lanes, self._counts, self._call = block.lanes, block.counts, kernel.call
        shape, problem = block.shape, block.lanes[0].problem
        n, K, m, width = shape.n, shape.K, shape.m, shape.width
        self._sizes, self._width = (n, K, m), width
        self._leveled, self._fixed = packed(shape, [lane.problem for lane in self._lanes])
        self._state = np.zeros((2 * (n + K + m) + K, width))
        self._saved = np.zeros_like(self._state)
        self._level = np.full(width, -1, dtype=np.int64)
        for place, lane in enumerate(self._lanes):
            self._state[: n + K + m, place] = lane.start
            self._level[place] = problem.coarsest
        self._failed = np.zeros(width, dtype=np.int64)
        self._lane_counts = np.zeros((plain.COUNTS, width), dtype=np.int64)
        last = max(problem.finest, _FEWEST_LEVELS)
        self._scalars = problem.base_step, problem.coarsest, problem.finest, last, problem.tolerance
        self._plain: dict[int, _PlainLane] = {}

    def advance(self, inputs: Sequence[Samples]) -> tuple[list[Samples], Fault | None]:
        intervals = len(inputs[0]) - plain.LOOKAROUND
        u, out = np.zeros((len(inputs[0]), self._width)), np.empty((intervals * plain.DENSE, self._width))
        for index, samples in enumerate(inputs):
            u[:, index] = samples
        arrays = u, out, self._state, self._saved, self._level, self._failed, self._lane_counts
        pointers = [array.ctypes.data for array in (*arrays, self._leveled, self._fixed)]
        at = 0
        fault: Fault | None = None
        while fault is None:
            at = int(self._call(*pointers, at, intervals, *self._scalars))
            if at >= intervals:
                break
            for index in np.flatnonzero(self._failed[: len(self._lanes)]).tolist():
                fault = fault or self._by_plain_kernel(index, at, u, out)
            at += 1
        self._counts += self._lane_counts.T[: len(self._lanes)]
        self._lane_counts[:] = 0
        return [np.ascontiguousarray(out[:, index]) for index in range(len(self._lanes))], fault

    def _by_plain_kernel(self, index: int, at: int, u: Samples, out: Samples) -> Fault | None:
        """Cross one interval again, from its start, with what the plain kernel can do about a hard step."""
        if index not in self._plain:
            self._plain[index] = _PlainLane(self._lanes[index])
        n, K, m = self._sizes
        size, lane, points = n + K + m, self._plain[index], slice(at * plain.DENSE, (at + 1) * plain.DENSE)
        saved = self._saved[:, index]
        lane.z[:], lane.z_slope[:], lane.bend[:] = saved[:size], saved[size : 2 * size], saved[2 * size :]
        lane.level[0] = self._level[index]
        own = np.empty(plain.DENSE)
        samples = np.ascontiguousarray(u[at : at + plain.LOOKAROUND + 1, index])
        failure = lane.advance(samples, own, self._counts[index])
        out[points, index] = own
        self._state[:, index] = np.concatenate([lane.z, lane.z_slope, lane.bend])
        self._level[index] = min(int(lane.level[0]), self._scalars[2])
        return None if failure is None else Fault(index, at + failure[0], failure[1])
