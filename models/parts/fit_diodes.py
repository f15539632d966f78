"""Derive the diode parameters of diodes.toml from the stored points of points.csv, and say where they differ.

The law is Shockley's with a series resistance, solved for the voltage: n Vt ln(1 + i/IS) + i RS.

Run ``python models/parts/fit_diodes.py``: it prints one line for each entry and bound, and ends with status 1 if a
stored parameter is not the derived one to its four printed digits.
"""

from __future__ import annotations

import csv
import sys
import tomllib
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

FOLDER = Path(__file__).resolve().parent
THERMAL_VOLTS = 1.380649e-23 * 298.15 / 1.602176634e-19  # k T / q at 25 degrees C, exact SI constants
FREE_BY_POINTS = {1: ("saturation_current",), 2: ("saturation_current", "ideality")}
ALL_FREE = ("saturation_current", "ideality", "series_ohms")
FREE_BY_ENTRY = {
    "red LED": ("saturation_current", "series_ohms")
}  # no point below 5 mA: the ideality is not resolved
GOLDEN = (np.sqrt(5.0) - 1.0) / 2.0


@dataclass(frozen=True)
class Fit:
    """One derived set: amperes, a bare number, ohms, and the root mean square of what is left, in millivolts."""

    saturation_current: float
    ideality: float
    series_ohms: float
    error_millivolts: float


def fit_points(
    volts: NDArray[np.float64],
    current: NDArray[np.float64],
    held: Mapping[str, Any],
    free: Sequence[str] | None = None,
) -> Fit:
    """Least squares in volts over ``free``; the other parameters are taken from ``held``.

    By default one point frees the saturation current alone, two free the ideality as well, more free all three. For a
    given saturation current the voltage is linear in the other two, so the search is over one number, its logarithm.
    """
    chosen = free or FREE_BY_POINTS.get(len(volts), ALL_FREE)

    def given(log_saturation: float) -> Fit:
        return _linear_part(volts, current, float(np.exp(log_saturation)), chosen, held)

    return given(_minimum(lambda x: given(x).error_millivolts, np.linspace(np.log(1e-32), np.log(1e-3), 671)))


def _linear_part(
    volts: NDArray[np.float64],
    current: NDArray[np.float64],
    saturation: float,
    free: Sequence[str],
    held: Mapping[str, Any],
) -> Fit:
    """The best ideality and series resistance (not below zero) for one saturation current."""
    slopes = {"ideality": THERMAL_VOLTS * np.log1p(current / saturation), "series_ohms": current}
    found = {key: float(held[key]) for key in slopes if key not in free}
    rest = volts - sum(found[key] * slopes[key] for key in found)
    solved = [key for key in slopes if key in free]
    if solved:
        best, *_ = np.linalg.lstsq(np.column_stack([slopes[key] for key in solved]), rest, rcond=None)
        found |= dict(zip(solved, best.tolist(), strict=True))
    if found["series_ohms"] < 0.0:
        without = [key for key in free if key != "series_ohms"]
        return _linear_part(volts, current, saturation, without, {**held, "series_ohms": 0.0})
    rest = volts - sum(found[key] * slopes[key] for key in slopes)
    return Fit(saturation, found["ideality"], found["series_ohms"], float(1e3 * np.sqrt(np.mean(rest**2))))


def _minimum(error: Callable[[float], float], grid: NDArray[np.float64]) -> float:
    """The place of the least error: the best point of the grid, then golden section between its neighbours."""
    best = int(np.argmin([error(x) for x in grid]))
    low, high = float(grid[max(best - 1, 0)]), float(grid[min(best + 1, len(grid) - 1)])
    while high - low > 1e-9:
        left, right = high - GOLDEN * (high - low), low + GOLDEN * (high - low)
        if error(left) < error(right):
            high = right
        else:
            low = left
    return (low + high) / 2.0


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
