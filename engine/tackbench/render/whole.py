"""Rendering a whole take in memory, and getting the compiled code ready beforehand."""

from __future__ import annotations

from typing import Any

import numpy as np

from tackbench.circuit import Circuit, Part
from tackbench.compiled import seconds_spent_compiling
from tackbench.network.operating_point import as_circuit
from tackbench.render.prepared import prepare

_BLOCK = 4096


def render(take: Any, variant: Any, quality: str = "standard") -> np.ndarray:
    """The stage's output for a whole take, in volts, shape (frames, channels), aligned with the take, DC kept.

    ``take`` is a Take, ``variant`` a Variant or a Circuit. Raises InputError or WorkError.
    """
    stream = prepare(as_circuit(variant), take.rate, quality).stream(take.channels)
    blocks = [stream.process(block * take.volts_per_full_scale) for block in take.blocks(_BLOCK)]
    return np.concatenate([*blocks, stream.finish()])


def warm_up() -> float:
    """Compile or load every compiled function that rendering needs; the seconds that it took."""
    before = seconds_spent_compiling()
    circuit = Circuit("warm-up", (Part("R1", "resistor", ("in", "out"), 1e3),), "in", 0.0, "out", 1e6)
    stream = prepare(circuit, 48000).stream(1)
    stream.process(np.zeros((64, 1)))
    stream.finish()
    return seconds_spent_compiling() - before
