"""The generated kernel against C written by hand for exactly one circuit, on the same work, one thread.

Run ``python benchmarks/yardstick.py [--json FILE]``. Both sides cross the same input in steps of the same length with
the same Newton tolerance; their outputs are compared at every run. Figures are medians of interleaved runs, and all
of them ratios: C time / our time, so that more is better. Needs a C compiler; says so and stops where there is none.
"""

from __future__ import annotations

import argparse
import ctypes
import json
import shutil
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np

from tackbench import load_stage, load_take
from tackbench.audio.resample import Upsampler
from tackbench.kernel import plain
from tackbench.kernel.lanes import LaneBlock, LaneProblem
from tackbench.render.prepared import QUALITY_STEPS, PreparedStage, Quality, prepare_with

RATE = 48000
LEVEL = 3  # base / 2^3: 64 steps a sample
TAKE = Path(__file__).resolve().parents[1] / "demo_audio" / "take.wav"
CIRCUITS = {
    "drive voice": ("two-voice", [{"clip": "silicon", "gain": gain} for gain in (0.4, 0.6, 0.8, 1.0)]),
    "feedback clipper": ("soft-clipper", [{"supply": volts} for volts in (9.0, 12.0, 15.0, 18.0)]),
}


def signals(seconds: float) -> dict[str, np.ndarray]:
    """Inputs in volts: a hard chord and a quiet single note of the take, and a full-clip sine."""
    take = load_take(TAKE)
    volts = np.concatenate(list(take.blocks(1 << 16)))[:, 0]
    volts *= 0.7 / np.max(np.abs(volts))
    frames, loudness = int(seconds * RATE), []
    for start in range(0, len(volts) - frames, frames // 2):
        loudness.append((float(np.std(volts[start : start + frames])), start))
    loudness.sort()
    pluck, chord = loudness[len(loudness) // 3][1], loudness[-1][1]
    t = np.arange(frames) / RATE
    fade = np.minimum(1.0, t / 0.005)
    return {
        "chord": volts[chord : chord + frames],
        "pluck": volts[pluck : pluck + frames],
        "5 kHz": 0.7 * fade * np.sin(2 * np.pi * 5000.0 * t),
    }


def compiled_c(states: int, folder: Path) -> Any:
    """The C function for circuits of so many states."""
    library = folder / f"handwritten{states}.so"
    source = Path(__file__).with_name("handwritten.c")
    options = ["-O3", "-march=native", "-std=c11", "-shared", "-fPIC", f"-DN={states}"]
    subprocess.run(["cc", *options, str(source), "-o", str(library), "-lm"], check=True)
    function = ctypes.CDLL(str(library)).handwritten
    function.restype = ctypes.c_int64
    pointer = ctypes.c_void_p
    function.argtypes = [pointer, pointer, pointer, ctypes.c_double, ctypes.c_int64, *[pointer] * 4]
    return function


def c_circuit(stage: PreparedStage) -> np.ndarray:
    """The structure that the C function reads, as one array of doubles."""
    p = stage.problem
    n, K, m, a = p.n, p.K, p.m, p.arrays
    starts = list(stage.model.bank.first_control)
    if (K, m) != (4, 3) or starts != [0, 2, 3] or np.any(a["N0"]) or np.any(a["Y0"] - np.diag(np.diag(a["Y0"]))):
        raise SystemExit("the yardstick is written for one op-amp and two diodes; the stage has become another")

    def columns(matrix: np.ndarray, rows: int) -> np.ndarray:
        filled = np.zeros((-(-rows // 8) * 8, matrix.shape[1]))
        filled[:rows] = matrix
        return filled.T.ravel()

    z = n + K + m
    H = a["H"][LEVEL][:, [*range(z), z, z + 1, z + 4]]
    junctions = a["parameters"][6:]
    return np.concatenate(
        [
            *(columns(H, n + K), a["Y"][LEVEL].ravel(), a["N"][LEVEL].ravel()),
            *(columns(a["Q"][LEVEL][:, K:], n), columns(a["ABE"], n)),
            *(a["R0"].T.ravel(), a["S0"][:, 0], np.diag(a["Y0"]), a["out_z"][0], a["out_U"][0]),
            *(a["parameters"][:6], junctions, a["scales"], a["high"], a["low"]),
        ]
    )


class CSide:
    """One variant after the other through the C function."""

    def __init__(self, stages: list[PreparedStage], u: np.ndarray, function: Any) -> None:
        self.function, self.stages = function, stages
        steps_per_base = 1 << LEVEL
        intervals = len(u) - plain.LOOKAROUND
        t = np.arange(steps_per_base) / steps_per_base
        powers = np.stack([t**k for k in range(6)])
        slopes = np.stack([k * t ** max(k - 1, 0) if k else 0 * t for k in range(6)])
        windows = np.lib.stride_tricks.sliding_window_view(u, 6)[:intervals] @ plain.SIX_POINTS.T
        last = windows[-1].sum(), windows[-1] @ np.arange(6.0)  # the value and slope at the very end
        self.u = np.append((windows @ powers).ravel(), last[0])
        self.du = np.append((windows @ slopes).ravel(), last[1]) / steps_per_base
        self.h, self.steps = stages[0].problem.base_step / steps_per_base, intervals * steps_per_base
        self.circuits = [c_circuit(stage) for stage in stages]
        self.out = np.zeros((len(stages), self.steps))
        self.iterations = 0

    def run(self) -> None:
        self.iterations = 0
        for index, (stage, circuit) in enumerate(zip(self.stages, self.circuits, strict=True)):
            z, K = stage.start.copy(), stage.problem.K
            slope, bend = np.zeros(K), np.zeros(K)
            arrays = [array.ctypes.data for array in (z, slope, bend, self.out[index])]
            used = self.function(
                circuit.ctypes.data, self.u.ctypes.data, self.du.ctypes.data, self.h, self.steps, *arrays
            )
            if used < 0:
                raise SystemExit("the C program did not solve a step")
            self.iterations += used


class OurSide:
    """The variants through the generated kernel: ``lanes`` at a time."""

    def __init__(self, stages: list[PreparedStage], u: np.ndarray, lanes: int) -> None:
        self.stages, self.u, self.lanes = stages, u, lanes
        self.out: list[np.ndarray] = []
        self.steps = self.iterations = 0

    def run(self) -> None:
        self.out, self.steps, self.iterations = [], 0, 0
        for start in range(0, len(self.stages), self.lanes):
            own = self.stages[start : start + self.lanes]
            block = LaneBlock([LaneProblem(s.problem, s.start, lambda s=s: s.plain_arrays) for s in own])
            pieces = []
            for at in range(0, len(self.u) - plain.LOOKAROUND, 4096):
                piece = self.u[at : at + 4096 + plain.LOOKAROUND]
                outputs, fault = block.advance([piece] * len(own))
                if fault is not None:
                    raise SystemExit(f"our kernel did not solve a step: {fault}")
                pieces.append(outputs)
            self.out += [np.concatenate(parts) for parts in zip(*pieces, strict=True)]
            self.steps += int(block.counts[:, plain.STEPS].sum())
            self.iterations += int(block.counts[:, plain.ITERATIONS].sum())


def seconds(run: Callable[[], None]) -> float:
    began = time.process_time()
    run()
    return time.process_time() - began


def interleaved(sides: dict[str, Any], repeats: int) -> dict[str, float]:
    """The median time of each side, run in turns."""
    times: dict[str, list[float]] = {name: [] for name in sides}
    for name, side in sides.items():
        side.run()
        del name
    for _ in range(repeats):
        for name, side in sides.items():
            times[name].append(seconds(side.run))
    return {name: float(np.median(values)) for name, values in times.items()}


def decibels(error: np.ndarray, signal: np.ndarray) -> float:
    return float(20 * np.log10((np.std(error) + 1e-30) / np.std(signal)))


def measure(name: str, repeats: int, duration: float, folder: Path) -> list[dict[str, Any]]:
    """One circuit's rows of the table."""
    stage_name, choices = CIRCUITS[name]
    circuits = [load_stage(stage_name).variant(**choice).circuit for choice in choices]
    uniform = [prepare_with(c, RATE, Quality("trapezoid", LEVEL, LEVEL, float("inf"))) for c in circuits]
    standard = [prepare_with(c, RATE, QUALITY_STEPS["standard"]) for c in circuits]
    function = compiled_c(uniform[0].problem.n, folder)
    rows = []
    for signal, volts in signals(duration).items():
        u = Upsampler(uniform[0].factor).push(volts)
        sides = {
            "C": CSide(uniform, u, function),
            "one": OurSide(uniform, u, 1),
            "four": OurSide(uniform, u, 4),
            "standard": OurSide(standard, u, 4),
        }
        t = interleaved(sides, repeats)
        c, one, four, controlled = (sides[key] for key in sides)
        fine = [prepare_with(x, RATE, Quality("trapezoid", 5, 9, 1e-8)) for x in circuits]
        truth = OurSide(fine, u, 4)
        truth.run()
        rows.append(
            {
                "circuit": name,
                "signal": signal,
                "one variant": t["C"] / t["one"],
                "four lanes": t["C"] / t["four"],
                "standard": t["C"] / t["standard"],
                "C ns/iteration": 1e9 * t["C"] / c.iterations,
                "our ns/iteration": 1e9 * t["one"] / one.iterations,
                "difference dB": max(decibels(a - b, a) for a, b in zip(c.out, four.out, strict=True)),
                "error uniform dB": max(decibels(a - b, b) for a, b in zip(c.out, truth.out, strict=True)),
                "error standard dB": max(decibels(a - b, b) for a, b in zip(controlled.out, truth.out, strict=True)),
                "steps per sample": controlled.steps / len(volts) / len(circuits),
            }
        )
    return rows


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--json", type=Path, help="write the figures to this file")
    parser.add_argument("--repeats", type=int, default=7)
    parser.add_argument("--seconds", type=float, default=0.5, help="of each signal")
    choices = parser.parse_args()
    if shutil.which("cc") is None:
        print("there is no C compiler (cc) here: the yardstick cannot be measured")
        sys.exit(0)
    with tempfile.TemporaryDirectory() as folder:
        rows = [row for name in CIRCUITS for row in measure(name, choices.repeats, choices.seconds, Path(folder))]
    keys = list(rows[0])
    print(
        "ratios are C time / our time for the same variants; C and 'one', 'four lanes' take 64 uniform steps a sample"
    )
    print("  ".join(keys))
    for row in rows:
        cells = [f"{row[key]:.2f}" if isinstance(row[key], float) else row[key] for key in keys]
        print("  ".join(cell.rjust(len(key)) for cell, key in zip(cells, keys, strict=True)))
    if choices.json:
        choices.json.write_text(json.dumps(rows, indent=1) + "\n", encoding="utf-8")


if __name__ == "__main__":
    main()
