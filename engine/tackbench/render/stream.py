"""Streaming a take through a prepared stage: up to the base rate, through the kernel, and back down."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from tackbench.audio.resample import Downsampler, Upsampler
from tackbench.errors import WorkError
from tackbench.kernel import plain
from tackbench.render.prepared import PreparedStage

_CHUNK = 256  # take samples per call of the kernel: short enough that Ctrl-C is answered at once


@dataclass(frozen=True)
class SolveCounts:
    """What the solver did: accepted steps, Newton iterations, hard steps (solved by homotopy), steps accepted over
    tolerance at the finest level, and steps that were repeated finer."""

    steps: int
    iterations: int
    hard_steps: int
    capped_steps: int
    repeated_steps: int


class StageStream:
    """A take's way through a stage, block by block, in constant memory.

    ``process`` takes volts, shape (n, channels), and returns output volts, shape (m, channels); the filters hold the
    first ones back and ``finish`` gives the rest, so that in all as many frames come out as went in, aligned with the
    take. Each channel has its own circuit. The samples do not depend on how the take is cut into blocks.
    """

    def __init__(self, stage: PreparedStage, channels: int) -> None:
        self.stage, self.channels = stage, channels
        self._lines = [_ChannelLine(stage) for _ in range(channels)]
        self._taken = self._given = 0

    def process(self, volts: np.ndarray) -> np.ndarray:
        """Send ``volts`` through; raises WorkError, naming time and device, when a step cannot be solved."""
        volts = np.asarray(volts, dtype=np.float64)
        if volts.ndim != 2 or volts.shape[1] != self.channels:
            raise ValueError(f"blocks of shape (frames, {self.channels}) are expected, not {volts.shape}")
        self._taken += len(volts)
        return self._give([line.push(volts[:, channel]) for channel, line in enumerate(self._lines)])

    def finish(self) -> np.ndarray:
        """The frames still held back; the take is zero after its end."""
        rest = self._give([line.push(np.zeros(line.delay + plain.LOOKAROUND)) for line in self._lines])
        return rest

    def _give(self, columns: list[np.ndarray]) -> np.ndarray:
        block = np.column_stack(columns) if columns else np.zeros((0, 0))
        block = block[: self._taken - self._given]
        self._given += len(block)
        return block

    @property
    def counts(self) -> SolveCounts:
        """The solver's counts so far, summed over the channels."""
        total = np.sum([line.counts for line in self._lines], axis=0) if self._lines else np.zeros(5)
        return SolveCounts(*(int(value) for value in total))


class _ChannelLine:
    """One channel's filters and circuit."""

    def __init__(self, stage: PreparedStage) -> None:
        self._stage = stage
        self._up, self._down = Upsampler(stage.factor), Downsampler(stage.factor, plain.DENSE)
        self.delay = self._up.half + self._down.half
        self._state = (stage.start.copy(), np.zeros_like(stage.start), np.zeros(stage.model.state.controls))
        self._level = np.array([stage.quality.coarsest], dtype=np.int64)
        state = stage.model.state
        self._work = plain.workspace(state.states, state.controls, state.currents)
        self._input = np.zeros(2)  # what lies before the first sample: the take is zero there
        self._dense = np.zeros(1)  # the output at the stream's first instant, less its resting voltage
        self._skip = self.delay
        self._intervals = 0
        self.counts = np.zeros(plain.COUNTS, dtype=np.int64)

    def push(self, volts: np.ndarray) -> np.ndarray:
        pieces = [self._push(volts[start : start + _CHUNK]) for start in range(0, len(volts), _CHUNK)]
        return np.concatenate(pieces) if pieces else np.zeros(0)

    def _push(self, volts: np.ndarray) -> np.ndarray:
        stage = self._stage
        u = np.concatenate([self._input, self._up.push(volts)])
        intervals = max(0, len(u) - plain.LOOKAROUND)
        self._input = u[intervals:]
        out = np.empty(intervals * plain.DENSE)
        if intervals:
            self._advance(u, out)
        dense = np.concatenate([self._dense, out - stage.output_dc])
        whole = len(dense) // (stage.factor * plain.DENSE) * stage.factor * plain.DENSE
        self._dense = dense[whole:]
        result = self._down.push(dense[:whole]) + stage.output_dc
        skipped = min(self._skip, len(result))
        self._skip -= skipped
        return np.asarray(result[skipped:])

    def _advance(self, u: np.ndarray, out: np.ndarray) -> None:
        stage, fault = self._stage, np.zeros(4)
        failed = plain.advance(
            u, out, *self._state, self._level, *stage.kernel_arrays, self.counts, fault, *self._work
        )
        if failed or not np.all(np.isfinite(out)):
            interval = self._intervals + fault[0] + fault[1]
            seconds = interval / (stage.rate * stage.factor) - self._up.half / stage.rate
            device = stage.model.bank.device_of_control(int(fault[2])) if failed else "the output"
            raise WorkError(
                f"{stage.circuit.title}: the solver did not settle at {max(seconds, 0.0):.6f} s, worst at {device}"
            )
        self._intervals += len(u) - plain.LOOKAROUND
