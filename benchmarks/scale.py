"""How the cost grows, and what a first use costs: one table, mostly ratios.

Run ``python benchmarks/scale.py [--json FILE] [--long]``. Parts: compiling and loading kernels; deriving everything
after a changed control; one core against two; general solvers on the same circuit at equal error; cost against the
number of parts; with ``--long`` the peak memory of one minute against an hour (takes some minutes).
"""

from __future__ import annotations

import argparse
import json
import math
import os
import subprocess
import sys
import time
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path
from typing import Any

import numpy as np

from tackbench import load_stage
from tackbench.circuit import Circuit, Part
from tackbench.devices.schema import fill_defaults
from tackbench.kernel import machine
from tackbench.kernel.shape import shape_of
from tackbench.network.model import network_model
from tackbench.network.rules import coefficient_sets, root_form
from tackbench.render.prepared import PreparedStage, prepare
from tackbench.render.stream import GroupStream, side_by_side
from tackbench.stage import shipped_stages

RATE = 48000
BASE_STEP = 1 / 384e3


def median(run: Callable[[], Any], repeats: int = 9, clock: Callable[[], float] = time.perf_counter) -> float:
    times = []
    for _ in range(repeats):
        began = clock()
        run()
        times.append(clock() - began)
    return float(np.median(times))


def guitar(seconds: float) -> np.ndarray:
    t = np.arange(int(seconds * RATE)) / RATE
    again = t % 0.5  # a chord every half second
    volts = sum(np.sin(2 * np.pi * f * again) * np.exp(-4 * again) for f in (82.4, 123.5, 164.8, 246.9))
    return np.asarray(0.15 * volts)[:, None]


def stream(stages: list[PreparedStage], volts: np.ndarray) -> None:
    group = GroupStream(stages, 1)
    for start in range(0, len(volts), 4096):
        group.process(volts[start : start + 4096])
    group.finish()


def first_use() -> dict[str, Any]:
    """Seconds to compile a kernel of four lanes for each shipped stage, and to load it from the disk."""
    compiling, loading = {}, {}
    for name in shipped_stages():
        problem = prepare(load_stage(name).variant().circuit, RATE, "standard").problem
        shape = shape_of([problem] * 4, 4)
        began = time.perf_counter()
        code = machine._compiled(shape)
        compiling[name] = time.perf_counter() - began
        loading[name] = median(lambda code=code: machine.Kernel(code), 3)
    return {
        "compile a shape, median s": float(np.median(list(compiling.values()))),
        "compile a shape, worst s": max(compiling.values()),
        "the worst is": max(compiling, key=compiling.__getitem__),
        "load a shape, worst s": max(loading.values()),
    }


def changed_control() -> dict[str, Any]:
    """Milliseconds from a turned pot to matrices: the network, then the coefficient sets of all or one step size."""
    stage = load_stage("two-voice")
    circuits = iter([stage.variant(gain=0.2 + 0.005 * k).circuit for k in range(100)])
    network = 1e3 * median(lambda: network_model(next(circuits)), 90)
    form = root_form(network_model(stage.variant().circuit).state)
    every = 1e3 * median(lambda: coefficient_sets(form, BASE_STEP, 9, "trapezoid"), 50)
    one = 1e3 * median(lambda: coefficient_sets(form, BASE_STEP, 1, "trapezoid"), 50)
    return {"changed control, all step sizes ms": network + every, "changed control, one step size ms": network + one}


def two_cores() -> dict[str, Any]:
    """Sixteen variants of the drive on one thread and on two."""
    stage, volts = load_stage("two-voice"), guitar(2.0)
    prepared = [prepare(stage.variant(gain=0.3 + 0.04 * k).circuit, RATE, "standard") for k in range(16)]
    groups = [[prepared[index] for index in group] for group in side_by_side(prepared, 1)]

    def run(threads: int) -> None:
        with ThreadPoolExecutor(threads) as pool:
            list(pool.map(lambda group: stream(group, volts), groups))

    run(2)
    return {
        "processors": os.cpu_count(),
        "16 variants: one thread / two": median(lambda: run(1), 5) / median(lambda: run(2), 5),
    }


def general_solvers() -> dict[str, Any]:
    """The passive clipper by SciPy's Radau and LSODA and by SUNDIALS CVODE, seconds against ours at like error."""
    from scipy.integrate import solve_ivp

    ohms, farads, current, volts_scale = 2200.0, 1e-8, 2.353e-9, 0.048096508
    thermal_volts = 1.380649e-23 * 298.15 / 1.602176634e-19
    diode = fill_defaults("diode", {"saturation_current": current, "ideality": volts_scale / thermal_volts})
    parts = (
        Part("R1", "resistor", ("in", "out"), ohms),
        Part("C1", "capacitor", ("out", "0"), farads),
        Part("D1", "diode", ("out", "0"), parameters=diode),
        Part("D2", "diode", ("0", "out"), parameters=diode),
    )
    stage = prepare(Circuit("clipper", parts, "in", 0.0, "out", None), RATE, "standard")
    frames, frequency = 2400, 997.0
    t = np.arange(frames) / RATE

    def drive(time_: float) -> float:
        return 4.5 * math.sin(2 * math.pi * frequency * time_) * min(1.0, time_ / 0.01)

    def slope(time_: float, v: Any) -> list[float]:
        return [
            ((drive(time_) - v[0]) / ohms - 2 * current * math.sinh(max(-300.0, min(300.0, v[0] / volts_scale))))
            / farads
        ]

    volts = np.array([drive(x) for x in t])[:, None]
    ours = median(lambda: stream([stage], volts), 5)
    fine = solve_ivp(slope, (0, t[-1]), [0.0], "Radau", t_eval=t, rtol=1e-10, atol=1e-13).y[0]
    result: dict[str, Any] = {}
    for method in ("Radau", "LSODA"):
        for tolerance in (1e-5, 1e-6, 1e-7, 1e-8):
            began = time.perf_counter()
            found = solve_ivp(slope, (0, t[-1]), [0.0], method, t_eval=t, rtol=tolerance, atol=tolerance * 1e-2).y[0]
            taken = time.perf_counter() - began
            error = 20 * np.log10(np.std(found - fine) / np.std(fine))
            if error < -100.0 or tolerance == 1e-8:
                result[f"SciPy {method}, times ours (at {error:.0f} dB)"] = taken / ours
                break
    try:
        from sksundae.cvode import CVODE
    except ImportError:
        result["SUNDIALS CVODE"] = "not installed (pip install '.[test]')"
        return result

    def right(time_: float, y: np.ndarray, yp: np.ndarray) -> None:
        yp[0] = slope(time_, y)[0]

    for tolerance in (1e-6, 1e-7, 1e-8, 1e-9):
        solver = CVODE(right, rtol=tolerance, atol=tolerance * 1e-3, max_num_steps=100000)
        began = time.perf_counter()
        found = solver.solve(t, np.zeros(1)).y[:, 0]
        taken = time.perf_counter() - began
        error = 20 * np.log10(np.std(found - fine) / np.std(fine))
        if error < -100.0 or tolerance == 1e-9:
            result[f"SUNDIALS CVODE, times ours (at {error:.0f} dB)"] = taken / ours
            break
    return result


def ladder(sections: int) -> Circuit:
    """Low-pass sections, every third with a diode across its capacitor: three parts and a third a section."""
    diode = fill_defaults("diode", {"saturation_current": 2.353e-9, "ideality": 1.872, "series_ohms": 0.6})
    parts = []
    for k in range(sections):
        start, end = "in" if k == 0 else f"n{k}", f"n{k + 1}"
        parts += [
            Part(f"R{k}", "resistor", (start, end), 1e3),
            Part(f"C{k}", "capacitor", (end, "0"), 1e-9 * (k + 1)),
        ]
        if k % 3 == 0:
            parts.append(Part(f"D{k}", "diode", (end, "0"), parameters=diode))
    return Circuit("ladder", tuple(parts), "in", 0.0, f"n{sections}", 1e6)


def parts_curve() -> dict[str, Any]:
    """Cost of a second of audio against the number of parts, in units of the smallest; four variants in lanes."""
    volts, costs = guitar(0.5), {}
    for sections in (1, 2, 4, 8, 13, 26):
        circuit = ladder(sections)
        stages = [prepare(circuit, RATE, "standard")] * 4
        stream(stages, volts[:2000])
        costs[len(circuit.parts)] = median(lambda stages=stages: stream(stages, volts), 3, time.process_time)
    smallest = next(iter(costs.values()))
    return {f"{parts} parts, cost": cost / smallest for parts, cost in costs.items()}


_MEMORY = """
import resource, sys
import numpy as np
from tackbench import load_stage
from tackbench.render.prepared import prepare
from tackbench.render.stream import GroupStream
stages = [prepare(load_stage("two-voice").variant(gain=0.3 + 0.08 * k).circuit, 48000, "draft") for k in range(8)]
group = GroupStream(stages, 1)
block = 0.1 * np.sin(2 * np.pi * 110 * np.arange(4800) / 48000)[:, None]
for _ in range(int(float(sys.argv[1]) * 600)):
    group.process(block)
group.finish()
print(resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024)
"""


def memory() -> dict[str, Any]:
    """Peak MiB of streaming eight variants for one minute and for sixty."""
    found = {}
    for minutes in (1, 60):
        done = subprocess.run(
            [sys.executable, "-c", _MEMORY, str(minutes)], capture_output=True, text=True, check=True
        )
        found[f"peak memory, {minutes} min of 8 variants, MiB"] = float(done.stdout)
    return found


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--json", type=Path, help="write the figures to this file")
    parser.add_argument("--long", action="store_true", help="also the memory of an hour")
    choices = parser.parse_args()
    figures: dict[str, Any] = {}
    for part in (first_use, changed_control, two_cores, general_solvers, parts_curve):
        figures.update(part())
    if choices.long:
        figures.update(memory())
    width = max(len(name) for name in figures)
    for name, value in figures.items():
        print(f"{name:<{width}}  {value:.3g}" if isinstance(value, float) else f"{name:<{width}}  {value}")
    if choices.json:
        choices.json.write_text(json.dumps(figures, indent=1) + "\n", encoding="utf-8")


if __name__ == "__main__":
    main()
