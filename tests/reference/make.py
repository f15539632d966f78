"""Makes the stored references: ``python -m reference.make [CIRCUIT …]`` from the folder ``tests``.

Each circuit of ``circuits/`` is solved by ``ReferenceSolver`` for each take of ``signals`` and the band-limited
output is stored in ``stored/CIRCUIT.npz``: per take the samples as 32-bit integers with their step in volts (186 dB
under the peak), and the recipe: a digest of the circuit's text, the drive, the tolerances, the rate.
"""

from __future__ import annotations

import hashlib
import json
import sys
from concurrent.futures import ProcessPoolExecutor
from pathlib import Path

import numpy as np

from tackbench.circuit import Circuit
from tackbench.stage import load_stage

from .signals import SIGNALS
from .solver import ABSOLUTE_TOLERANCE_VOLTS, RELATIVE_TOLERANCE, ReferenceSolver

HERE = Path(__file__).parent
RATE = 48000
FRAMES = {"997 Hz": 4800, "4999 Hz": 2400}
MOST_FRAMES = 9600
DRIVE = {"passive-clipper": 8.0, "pickup-into-clipper": 8.0, "jfet-booster": 2.0, "booster-with-sag": 2.0}
"""How many times the take's volts a circuit is driven with, so that every one of them bends what it should."""


def circuit_names() -> list[str]:
    return sorted(path.stem for path in (HERE / "circuits").glob("*.toml"))


def stage_file(name: str) -> Path:
    return HERE / "circuits" / f"{name}.toml"


def circuit_of(name: str) -> Circuit:
    return load_stage(stage_file(name)).variant().circuit


def take_of(circuit: str, signal: str) -> np.ndarray:
    """The take's volts, shape (frames,)."""
    frames = FRAMES.get(signal, MOST_FRAMES)
    return DRIVE.get(circuit, 1.0) * SIGNALS[signal](np.arange(frames) / RATE)


def recipe(name: str) -> dict[str, object]:
    return {
        "circuit": hashlib.sha256(stage_file(name).read_bytes()).hexdigest(),
        "drive": DRIVE.get(name, 1.0),
        "rate": RATE,
        "relative tolerance": RELATIVE_TOLERANCE,
        "absolute tolerance V": ABSOLUTE_TOLERANCE_VOLTS,
    }


def solved(name: str, signal: str) -> np.ndarray:
    """The reference's output in volts, solved now."""
    drive, frames = DRIVE.get(name, 1.0), FRAMES.get(signal, MOST_FRAMES)
    samples, _ = ReferenceSolver(circuit_of(name)).render(lambda t: drive * SIGNALS[signal](t), frames, RATE)
    return samples


def stored(name: str) -> dict[str, np.ndarray]:
    """The stored output of each take, in volts. Raises ValueError when they were made from another recipe."""
    with np.load(HERE / "stored" / f"{name}.npz") as content:
        if json.loads(str(content["recipe"])) != recipe(name):
            raise ValueError(f"{name} has changed since its references were made: python -m reference.make {name}")
        return {signal: content[signal] * float(content[f"{signal} step"]) for signal in SIGNALS}


def make(name: str) -> str:
    content: dict[str, object] = {"recipe": json.dumps(recipe(name))}
    for signal in SIGNALS:
        samples = solved(name, signal)
        step = float(np.max(np.abs(samples))) / 2**31 * 1.0001
        content[signal], content[f"{signal} step"] = np.round(samples / step).astype(np.int32), step
    path = HERE / "stored" / f"{name}.npz"
    path.parent.mkdir(exist_ok=True)
    np.savez_compressed(path, **content)
    return name


if __name__ == "__main__":
    with ProcessPoolExecutor(2) as pool:
        for done in pool.map(make, sys.argv[1:] or circuit_names()):
            print(done, flush=True)
