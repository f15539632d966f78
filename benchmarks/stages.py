"""Steps, Newton iterations and cost of every shipped stage and test circuit, in units of the cheapest.

Run ``python benchmarks/stages.py [--json FILE]``. A chord into each, at the three qualities; times are medians of
interleaved runs, and every cost a ratio to the cheapest stage at standard. A stiff circuit that eats the time budget
shows in steps a sample, repeated and capped steps.
"""

from __future__ import annotations

import argparse
import json
import time
from pathlib import Path
from typing import Any

import numpy as np

from tackbench import load_stage
from tackbench.render.prepared import QUALITIES, PreparedStage, prepare
from tackbench.stage import shipped_stages

RATE = 48000
CIRCUITS = Path(__file__).resolve().parents[1] / "tests" / "reference" / "circuits"


def chord(seconds: float) -> np.ndarray:
    t = np.arange(int(seconds * RATE)) / RATE
    volts = sum(np.sin(2 * np.pi * f * t) * np.exp(-4 * t) for f in (82.4, 123.5, 164.8, 246.9))
    return np.asarray(0.15 * volts)[:, None]


def run(stage: PreparedStage, volts: np.ndarray) -> tuple[float, Any]:
    stream = stage.stream(1)
    began = time.process_time()
    stream.process(volts)
    stream.finish()
    return time.process_time() - began, stream.counts


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--json", type=Path, help="write the figures to this file")
    parser.add_argument("--repeats", type=int, default=5)
    choices = parser.parse_args()
    circuits = {name: load_stage(name).variant().circuit for name in shipped_stages()}
    circuits.update(
        {f"({path.stem})": load_stage(path).variant().circuit for path in sorted(CIRCUITS.glob("*.toml"))}
    )
    prepared = {(name, q): prepare(one, RATE, q) for name, one in circuits.items() for q in QUALITIES}
    volts = chord(0.3)
    times: dict[tuple[str, str], list[float]] = {key: [] for key in prepared}
    counts = {}
    for repeat in range(choices.repeats + 1):
        for key, stage in prepared.items():
            seconds, counts[key] = run(stage, volts)
            if repeat:  # the first run compiles
                times[key].append(seconds)
    cost = {key: float(np.median(values)) for key, values in times.items()}
    cheapest = min(value for (_, quality), value in cost.items() if quality == "standard")
    rows = [
        {
            "circuit": name,
            "quality": quality,
            "steps per sample": count.steps / len(volts),
            "iterations per step": count.iterations / count.steps,
            "repeated %": 100 * count.repeated_steps / count.steps,
            "capped %": 100 * count.capped_steps / count.steps,
            "hard": count.hard_steps,
            "cost": cost[name, quality] / cheapest,
        }
        for (name, quality), count in counts.items()
    ]
    names = list(rows[0])
    print(f"{names[0]:24}{names[1]:10}" + "".join(f"{name:>21}" for name in names[2:]))
    for row in rows:
        cells = [f"{row[name]:.2f}" if isinstance(row[name], float) else str(row[name]) for name in names[2:]]
        print(f"{row['circuit']:24}{row['quality']:10}" + "".join(f"{cell:>21}" for cell in cells))
    if choices.json:
        choices.json.write_text(json.dumps(rows, indent=1) + "\n", encoding="utf-8")


if __name__ == "__main__":
    main()
