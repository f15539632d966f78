"""Derive the diode parameters of diodes.toml from the stored points of points.csv, and say where they differ.

The law is Shockley's with a series resistance, solved for the voltage: n Vt ln(1 + i/IS) + i RS.

Run ``python models/parts/fit_diodes.py``: it prints one line for each entry and bound, and ends with status 1 if a
stored parameter is not the derived one to its four printed digits.
"""

from __future__ import annotations

import csv
import sys
import tomllib
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tackbench.workbench.diode_fit import Fit, fit_points

FOLDER = Path(__file__).resolve().parent
FREE_BY_ENTRY = {
    "red LED": ("saturation_current", "series_ohms")
}  # no point below 5 mA: the ideality is not resolved


def stored_points(folder: Path = FOLDER) -> dict[tuple[str, str], tuple[NDArray[np.float64], NDArray[np.float64]]]:
    """(entry, bound) -> (volts, amperes), from points.csv."""
    found: dict[tuple[str, str], list[tuple[float, float]]] = {}
    with open(folder / "points.csv", encoding="utf-8", newline="") as file:
        for row in csv.DictReader(file):
            point = (float(row["volts"]), 1e-3 * float(row["milliamperes"]))
            found.setdefault((row["entry"], row["bound"]), []).append(point)
    return {key: (np.array(points)[:, 0], np.array(points)[:, 1]) for key, points in found.items()}


def stored_parameters(entry: dict[str, Any], bound: str) -> dict[str, Any]:
    """The parameters that diodes.toml gives for one bound: the entry's own, overridden by its low or high table."""
    return entry if bound == "typical" else {**entry, **entry[bound]}


def derived(folder: Path = FOLDER) -> Iterator[tuple[str, str, Fit, dict[str, Any]]]:
    """(entry, bound, derived fit, stored parameters) for every set of points."""
    with open(folder / "diodes.toml", "rb") as file:
        library = tomllib.load(file)
    for (name, bound), (volts, current) in stored_points(folder).items():
        stored = stored_parameters(library[name], bound)
        yield (
            name,
            bound,
            fit_points(volts, current, stored, FREE_BY_ENTRY.get(name) if len(volts) > 2 else None),
            stored,
        )


def agrees(fit: Fit, stored: dict[str, Any]) -> bool:
    """Whether each stored parameter is the derived one rounded to four significant digits."""
    pairs = [(getattr(fit, key), stored[key]) for key in ("saturation_current", "ideality", "series_ohms")]
    return all(f"{ours:.3e}" == f"{theirs:.3e}" for ours, theirs in pairs)


def main() -> int:
    """Print every derived set beside its verdict; the number of sets that differ decides the status."""
    different = 0
    for name, bound, fit, stored in derived():
        same = agrees(fit, stored)
        different += not same
        print(
            f"{name:26s} {bound:8s} saturation_current = {fit.saturation_current:.3e}  ideality = {fit.ideality:.4g}"
            f"  series_ohms = {fit.series_ohms:.4g}  fit_error_millivolts = {fit.error_millivolts:.2g}"
            f"  {'as stored' if same else 'DIFFERS'}"
        )
    return 1 if different else 0


if __name__ == "__main__":
    sys.exit(main())
