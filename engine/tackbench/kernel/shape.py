"""What the generated kernels are made for: a circuit's sizes, laws and zeros, without its values.

Variants that differ only in values share a shape, hence one compiled kernel, and may run side by side in its lanes.
"""

from __future__ import annotations

from collections.abc import Hashable, Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from tackbench.kernel.problem import FIXED, LEVELED, VALUES, Problem


@dataclass(frozen=True)
class Shape:
    """A kernel's shape. ``patterns``: name, rows, columns and the flags of what may differ from zero, as bytes."""

    n: int
    K: int
    m: int
    laws: tuple[int, ...]
    parameters: int
    controlled: bool
    width: int
    patterns: tuple[tuple[str, int, int, bytes], ...]

    @cached_property
    def flags(self) -> dict[str, np.ndarray]:
        """The patterns as arrays of booleans."""
        return {
            name: np.unpackbits(np.frombuffer(packed, dtype=np.uint8), count=rows * columns)
            .astype(bool)
            .reshape(rows, columns)
            for name, rows, columns, packed in self.patterns
        }

    @cached_property
    def slots(self) -> dict[str, np.ndarray]:
        """For each matrix the slot of each entry, -1 where it is zero; leveled and fixed ones count apart."""
        found, next_slot = {}, {True: 0, False: 0}
        for name, flags in self.flags.items():
            leveled = name in LEVELED
            count = int(flags.sum())
            table = np.full(flags.shape, -1, dtype=np.int64)
            table[flags] = next_slot[leveled] + np.arange(count)
            next_slot[leveled] += count
            found[name] = table
        return found

    @cached_property
    def leveled_slots(self) -> int:
        return sum(int(self.flags[name].sum()) for name in LEVELED)

    @cached_property
    def fixed_slots(self) -> int:
        return sum(int(self.flags[name].sum()) for name in (*FIXED, *VALUES))


def family(problem: Problem) -> Hashable:
    """What problems must have in common to run side by side."""
    steps = (problem.base_step, problem.coarsest, problem.finest, problem.tolerance)
    return (problem.n, problem.K, problem.m, problem.laws, *steps)


def shape_of(problems: Sequence[Problem], width: int) -> Shape:
    """The shape that all of ``problems`` (of one family) fit, ``width`` lanes wide."""
    first = problems[0]
    patterns = []
    for name in (*LEVELED, *FIXED):
        flags = np.any([problem.patterns[name] for problem in problems], axis=0)
        patterns.append((name, *flags.shape, np.packbits(flags).tobytes()))
    for name in VALUES:
        flags = np.ones((1, len(first.arrays[name])), dtype=bool)
        patterns.append((name, *flags.shape, np.packbits(flags).tobytes()))
    sizes = (first.n, first.K, first.m, first.laws, len(first.arrays["parameters"]))
    return Shape(*sizes, first.controlled, width, tuple(patterns))


def packed(shape: Shape, problems: Sequence[Problem]) -> tuple[np.ndarray, np.ndarray]:
    """The entries in the kernel's order: leveled (levels, slots, width) and fixed (slots, width).

    Lanes without a problem get the first one's values.
    """
    everyone = [*problems, *[problems[0]] * (shape.width - len(problems))]
    leveled, fixed = [], []
    for problem in everyone:
        leveled.append(
            np.concatenate(
                [problem.arrays[name][: problem.finest + 1][:, shape.flags[name]] for name in LEVELED], axis=1
            )
        )
        rows = [problem.arrays[name][shape.flags[name]] for name in FIXED]
        fixed.append(np.concatenate([*rows, *(problem.arrays[name] for name in VALUES)]))
    return np.ascontiguousarray(np.stack(leveled, axis=-1)), np.ascontiguousarray(np.stack(fixed, axis=-1))
