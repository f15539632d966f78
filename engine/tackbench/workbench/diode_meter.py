"""A diode's model from a few meter readings, with what so few points leave open."""

from __future__ import annotations

import itertools
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from tackbench.devices.physics import JUNCTION_SIEMENS, saturation_current_at, thermal_volts
from tackbench.errors import InputError
from tackbench.parts import PartEntry
from tackbench.values import format_quantity
from tackbench.workbench.diode_fit import fit_points
from tackbench.workbench.readings import CURRENT_SHARE, Reading, volts_error

LIKE = {
    "silicon": "1N4148",
    "germanium": "germanium point contact",
    "schottky": "BAT43",
    "led": "red LED",
}
"""The entry that lends what the readings cannot tell, by material."""

IDEALITY_SHARE = {"silicon": 0.12, "germanium": 0.20, "schottky": 0.08, "led": 0.25}
"""How far the ideality of a diode of the material may lie from the lent one (from memory)."""

SERIES_SPAN = 3.0
"""The series resistance may be this many times smaller or larger than the lent one (from memory)."""

CLIP_VOLTS, CLIP_OHMS = 4.0, 4.7e3
"""The pair whose clip level is told: fed from 4 V peak through 4.7 kilohm, about what an op-amp on 9 V gives."""

LEAST_RATIO = 3.0
"""Two readings tell the ideality only when their currents differ by this much."""


@dataclass(frozen=True)
class Span:
    """A figure with how low and how high it may be."""

    low: float
    best: float
    high: float


@dataclass(frozen=True)
class DiodeModel:
    """What the readings give: ``parameters`` at 25 degrees C and at the two ends of what they leave open (by the clip
    level of a pair), the ``spans`` of each parameter, the ``clip_volts`` and ``rest_ohms`` of a pair, and in words
    what the readings could not tell (``kept``)."""

    parameters: Mapping[str, float]
    low: Mapping[str, float]
    high: Mapping[str, float]
    spans: Mapping[str, Span]
    clip_volts: Span
    rest_ohms: Span
    kept: str
    error_millivolts: float | None


def diode_from_readings(readings: Sequence[Reading], like: PartEntry, celsius: float) -> DiodeModel:
    """The model of a diode whose ``readings`` were taken at ``celsius``; ``like`` lends what they cannot tell.

    One reading gives the saturation current, two the ideality too, three or more the series resistance too. Raises
    InputError for readings that contradict each other or no diode could give.
    """
    points = _checked(readings)
    lent = {key: float(like.parameters[key]) for key in ("ideality", "series_ohms")}
    best, error = _fitted(points, lent, like, celsius)
    tried = [best, *_ends(points, lent, like, celsius)]
    clips = [clip_volts(one) for one in tried]
    rests = [rest_ohms(one) for one in tried]
    return DiodeModel(
        parameters=best,
        low=tried[int(np.argmin(clips))],
        high=tried[int(np.argmax(clips))],
        spans={key: _span([one[key] for one in tried]) for key in best},
        clip_volts=_span(clips),
        rest_ohms=_span(rests),
        kept=_kept(len(points), best, like),
        error_millivolts=round(error, 3) if len(points) > 2 else None,
    )


def _span(values: Sequence[float]) -> Span:
    return Span(min(values), values[0], max(values))


def _kept(count: int, best: Mapping[str, float], like: PartEntry) -> str:
    if count == 1:
        return f"ideality and series resistance kept from {like.name}"
    if count == 2 and best["ideality"] == 1.0:
        return f"ideality set to 1, its least, and so less series resistance than {like.name} has"
    return f"series resistance kept from {like.name}" if count == 2 else ""


def _checked(readings: Sequence[Reading]) -> list[Reading]:
    points = sorted(readings, key=lambda reading: reading.amperes)
    if not points:
        raise InputError("no reading is given", expected="give one with --reading, for example --reading 0.62@1m")
    for one, other in itertools.pairwise(points):
        if other.volts <= one.volts:
            raise InputError(
                f"{one.words()} and {other.words()} contradict each other",
                expected="more current means more volts across a diode",
            )
    if len(points) > 1 and points[-1].amperes < LEAST_RATIO * points[0].amperes:
        raise InputError(
            f"the currents {format_quantity(points[0].amperes, 'A', 3)} and "
            f"{format_quantity(points[-1].amperes, 'A', 3)} lie too near each other to tell the ideality",
            expected=f"take readings at least {LEAST_RATIO:g} times apart, better 100 times (10 uA and 1 mA)",
        )
    return points


def _fitted(
    points: Sequence[Reading], held: Mapping[str, float], like: PartEntry, celsius: float
) -> tuple[dict[str, float], float]:
    """The parameters at 25 degrees C that fit best, and the error that is left, in millivolts."""
    volts = np.array([point.volts for point in points])
    amperes = np.array([point.amperes for point in points])
    kelvin = celsius + 273.15
    fit = fit_points(volts, amperes, held, kelvin=kelvin)
    if len(points) == 2 and fit.ideality < 1.0:  # the lent series resistance was too much for this part
        fit = fit_points(volts, amperes, {"ideality": 1.0}, ("saturation_current", "series_ohms"), kelvin)
    _refuse_oddity(fit.ideality, fit.saturation_current, points)
    warmer = saturation_current_at(
        1.0, fit.ideality, like.parameters["band_gap"], like.parameters["temperature_exponent"], kelvin
    )
    return {
        "saturation_current": fit.saturation_current / warmer,
        "ideality": fit.ideality,
        "series_ohms": fit.series_ohms,
    }, fit.error_millivolts


def _refuse_oddity(ideality: float, saturation: float, points: Sequence[Reading]) -> None:
    if 0.85 <= ideality <= 8.0 and 1e-40 < saturation < 1e-2:
        return
    said = ", ".join(point.words() for point in points)
    raise InputError(
        f"no diode gives these readings ({said}): they would mean an ideality of {ideality:.2g} and "
        f"a saturation current of {saturation:.1e} A",
        expected="a diode has an ideality between 1 and 4; check the readings, their currents and the material",
    )


def _ends(
    points: Sequence[Reading], lent: Mapping[str, float], like: PartEntry, celsius: float
) -> Iterator[dict[str, float]]:
    """The models at the ends of what is open: readings off together or tilted, currents off, lent figures off."""
    share = IDEALITY_SHARE[like.parameters["material"]]
    idealities = (1.0 - share, 1.0 + share) if len(points) == 1 else (1.0,)
    series = (1.0 / SERIES_SPAN, SERIES_SPAN) if len(points) < 3 else (1.0,)
    tilts = [(1.0, 1.0), (-1.0, -1.0), (1.0, -1.0), (-1.0, 1.0)][: 2 if len(points) == 1 else 4]
    for (first, last), current, n, ohms in itertools.product(
        tilts, (1.0 - CURRENT_SHARE, 1.0 + CURRENT_SHARE), idealities, series
    ):
        signs = np.linspace(first, last, len(points))
        moved = [
            Reading(point.volts + sign * volts_error(point.volts), current * point.amperes)
            for sign, point in zip(signs, points, strict=True)
        ]
        held = {"ideality": n * lent["ideality"], "series_ohms": ohms * lent["series_ohms"]}
        try:
            yield _fitted(moved, held, like, celsius)[0]
        except InputError:
            continue


def clip_volts(parameters: Mapping[str, float]) -> float:
    """Volts across an antiparallel pair at 25 degrees C that is fed from ``CLIP_VOLTS`` through ``CLIP_OHMS``."""
    saturation, series = parameters["saturation_current"], parameters["series_ohms"]
    scale = parameters["ideality"] * thermal_volts(298.15)
    low, high = 0.0, CLIP_VOLTS  # of the junction that conducts
    while high - low > 1e-9:
        middle = 0.5 * (low + high)
        forward = saturation * np.expm1(min(middle / scale, 500.0))
        reverse = -saturation * np.expm1(-middle / scale)
        if middle + series * forward + CLIP_OHMS * (forward + reverse) < CLIP_VOLTS:
            low = middle
        else:
            high = middle
    return float(low + series * saturation * np.expm1(low / scale))


def rest_ohms(parameters: Mapping[str, float]) -> float:
    """Small-signal resistance of a pair without current: n Vt / (2 IS), and the junctions' own leak."""
    scale = parameters["ideality"] * thermal_volts(298.15)
    return float(1.0 / (2.0 * (parameters["saturation_current"] / scale + JUNCTION_SIEMENS)))


def diode_entry(model: DiodeModel, readings: Sequence[Reading], like: PartEntry, celsius: float) -> dict[str, Any]:
    """The table of a part file for ``model``."""
    said = ", ".join(reading.words() for reading in readings)
    kept = f"; {model.kept}" if model.kept else ""
    memory = ", partly from memory" if like.from_memory else ""
    bounds = {
        name: {**_rounded(bound), "about": f"the {name} end of what the readings leave open, by the clip level"}
        for name, bound in (("low", model.low), ("high", model.high))
    }
    return {
        "family": "diode",
        "about": f"Own part, from {len(readings)} meter reading{'s' if len(readings) != 1 else ''}.",
        "source": f"own meter readings at {celsius:g} degrees C: {said}{kept}{memory}; capacitance from {like.name}",
        "conditions": "25 degrees C",
        "basis": "own readings",
        "from_memory": like.from_memory,
        **_rounded(model.parameters),
        **({} if model.error_millivolts is None else {"fit_error_millivolts": model.error_millivolts}),
        "junction_capacitance": like.parameters["junction_capacitance"],
        "material": like.parameters["material"],
        "band_gap": like.parameters["band_gap"],
        "temperature_exponent": like.parameters["temperature_exponent"],
        "points": [[reading.volts, reading.amperes] for reading in readings],
        **bounds,
    }


def _rounded(parameters: Mapping[str, float]) -> dict[str, float]:
    return {key: float(f"{value:.5g}") for key, value in parameters.items()}
