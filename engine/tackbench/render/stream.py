"""Streaming a take through prepared stages: up to the base rate, through the kernel, and back down."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from tackbench.audio.resample import Downsampler, Upsampler
from tackbench.errors import WorkError
from tackbench.kernel import plain
from tackbench.kernel.lanes import MOST_LANES, Fault, LaneBlock, LaneProblem
from tackbench.kernel.shape import family
from tackbench.render.prepared import PreparedStage

_CHUNK = 2048  # take samples per call of a kernel: short enough that Ctrl-C is answered at once


@dataclass(frozen=True)
class SolveCounts:
    """What the solver did: accepted steps, Newton iterations, hard steps (solved by homotopy), steps accepted over
    tolerance at the finest level, and steps that were repeated finer."""

    steps: int
    iterations: int
    hard_steps: int
    capped_steps: int
    repeated_steps: int


class UnsolvedError(WorkError):
    """A step could not be solved; ``stage`` says in which of the group's stages."""

    def __init__(self, message: str, stage: int) -> None:
        super().__init__(message)
        self.stage = stage


def side_by_side(stages: Sequence[PreparedStage], channels: int) -> list[list[int]]:
    """Which stages, by place, to stream together: those of one family, as many as fill a kernel's lanes."""
    families: dict[object, list[int]] = {}
    for index, stage in enumerate(stages):
        families.setdefault(family(stage.problem), []).append(index)
    most = max(1, MOST_LANES // max(1, channels))
    return [own[start : start + most] for own in families.values() for start in range(0, len(own), most)]


class GroupStream:
    """A take's way through several stages at once, block by block, in constant memory.

    Each stage and each channel is a circuit of its own; those of one shape run side by side. No sample depends on
    how the take is cut into blocks, nor on which stages go together.
    """

    def __init__(self, stages: Sequence[PreparedStage], channels: int) -> None:
        if len({(stage.rate, stage.factor) for stage in stages}) > 1:
            raise ValueError("the stages of a group are prepared for one rate")
        self.stages, self.channels = list(stages), channels
        factor = self.stages[0].factor
        self._ups = [Upsampler(factor) for _ in range(channels)]
        self._inputs = [np.zeros(2) for _ in range(channels)]  # before its first sample the take is zero
        self._lines = [[_Line(stage) for _ in range(channels)] for stage in self.stages]
        self._blocks = self._side_by_side()
        self._delay = Upsampler(factor).half + Downsampler(factor, plain.DENSE, means=True).half
        self._skip, self._taken, self._given, self._intervals = self._delay, 0, 0, 0

    def _side_by_side(self) -> list[tuple[list[tuple[int, int]], LaneBlock]]:
        """The circuits, as (stage, channel), in blocks of one family."""
        families: dict[object, list[tuple[int, int]]] = {}
        for index, stage in enumerate(self.stages):
            families.setdefault(family(stage.problem), []).extend(
                (index, channel) for channel in range(self.channels)
            )
        blocks = []
        for members in families.values():
            for start in range(0, len(members), MOST_LANES):
                own = members[start : start + MOST_LANES]
                blocks.append((own, LaneBlock([_lane(self.stages[index]) for index, _ in own])))
        return blocks

    def process(self, volts: np.ndarray) -> list[np.ndarray]:
        """Send ``volts``, shape (n, channels), through; the output volts of each stage, shape (m, channels).

        The filters hold the first frames back and ``finish`` gives the rest, so that in all as many frames come out
        as went in, aligned with the take. Raises UnsolvedError, naming time and device.
        """
        volts = np.asarray(volts, dtype=np.float64)
        if volts.ndim != 2 or volts.shape[1] != self.channels:
            raise ValueError(f"blocks of shape (frames, {self.channels}) are expected, not {volts.shape}")
        self._taken += len(volts)
        return self._push(volts)

    def finish(self) -> list[np.ndarray]:
        """The frames still held back; the take is zero after its end."""
        return self._push(np.zeros((self._delay + plain.LOOKAROUND, self.channels)))

    def _push(self, volts: np.ndarray) -> list[np.ndarray]:
        pieces = [self._chunk(volts[start : start + _CHUNK]) for start in range(0, len(volts), _CHUNK)]
        if not pieces:
            return [np.zeros((0, self.channels)) for _ in self.stages]
        joined = [np.concatenate(blocks) for blocks in zip(*pieces, strict=True)]
        length = max(0, min(len(joined[0]), self._taken - self._given))
        self._given += length
        return [block[:length] for block in joined]

    def _chunk(self, volts: np.ndarray) -> list[np.ndarray]:
        u = [
            np.concatenate([kept, up.push(np.ascontiguousarray(volts[:, channel]))])
            for channel, (kept, up) in enumerate(zip(self._inputs, self._ups, strict=True))
        ]
        intervals = max(0, len(u[0]) - plain.LOOKAROUND) if u else 0
        self._inputs = [samples[intervals:] for samples in u]
        if intervals:
            for members, block in self._blocks:
                outputs, fault = block.advance([u[channel] for _, channel in members])
                if fault is not None:
                    raise self._unsolved(members[fault.lane][0], fault)
                for (index, channel), output in zip(members, outputs, strict=True):
                    self._lines[index][channel].take(output)
        self._intervals += intervals
        results = [
            np.column_stack([line.give() for line in lines]) if lines else np.zeros((len(volts), 0))
            for lines in self._lines
        ]
        skipped = min(self._skip, len(results[0]))
        self._skip -= skipped
        return [result[skipped:] for result in results]

    def _unsolved(self, index: int, fault: Fault) -> UnsolvedError:
        stage = self.stages[index]
        half = self._ups[0].half
        seconds = (self._intervals + fault.interval) / (stage.rate * stage.factor) - half / stage.rate
        place = "the output" if fault.control is None else stage.model.bank.device_of_control(fault.control)
        text = f"{stage.circuit.title}: the solver did not settle at {max(seconds, 0.0):.6f} s, worst at {place}"
        return UnsolvedError(text, index)

    @property
    def counts(self) -> list[SolveCounts]:
        """Each stage's counts so far, summed over the channels."""
        totals = np.zeros((len(self.stages), plain.COUNTS), dtype=np.int64)
        for members, block in self._blocks:
            for lane, (index, _) in enumerate(members):
                totals[index] += block.counts[lane]
        return [SolveCounts(*(int(value) for value in row)) for row in totals]


def _lane(stage: PreparedStage) -> LaneProblem:
    return LaneProblem(stage.problem, stage.start, lambda: stage.plain_arrays)


class _Line:
    """One circuit's way down from the dense grid to the take's rate."""

    def __init__(self, stage: PreparedStage) -> None:
        self._down = Downsampler(stage.factor, plain.DENSE, means=True)
        self._ratio, self._rest = stage.factor, stage.output_dc
        self._dense = np.zeros(0)  # means over cells that do not fill a sample yet, less the resting voltage

    def take(self, output: np.ndarray) -> None:
        self._dense = np.concatenate([self._dense, output - self._rest])

    def give(self) -> np.ndarray:
        """The finished frames."""
        ratio = self._ratio * plain.DENSE
        whole = len(self._dense) // ratio * ratio
        ready, self._dense = self._dense[:whole], self._dense[whole:]
        return np.asarray(self._down.push(ready) + self._rest)


class StageStream:
    """A take's way through one stage: a ``GroupStream`` of one."""

    def __init__(self, stage: PreparedStage, channels: int) -> None:
        self.stage, self.channels = stage, channels
        self._group = GroupStream([stage], channels)

    def process(self, volts: np.ndarray) -> np.ndarray:
        """Send ``volts``, shape (n, channels), through; see ``GroupStream.process``."""
        return self._group.process(volts)[0]

    def finish(self) -> np.ndarray:
        """The frames still held back."""
        return self._group.finish()[0]

    @property
    def counts(self) -> SolveCounts:
        """The solver's counts so far, summed over the channels."""
        return self._group.counts[0]
