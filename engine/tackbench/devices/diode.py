"""Diode laws: one junction of a diode, with and without breakdown. Series resistance stands in the network."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

from tackbench.devices.law import Law, Limits
from tackbench.devices.physics import knee, saturation_current_at, thermal_volts

_KNEE_AMPERES = 1e-4


def junction(ops: Any, c: Sequence[Any], p: Sequence[Any]) -> list[Any]:
    """i = IS (exp(v / nVt) - 1) of one junction; p = IS, nVt, knee."""
    return [p[0] * (ops.line_exp(c[0] / p[1], p[2]) - 1.0)]


def breakdown_junction(ops: Any, c: Sequence[Any], p: Sequence[Any]) -> list[Any]:
    """A junction that also breaks down; p = IS, nVt, knee, IBV, BV, nBV·Vt, breakdown knee, exp(-BV / nBV·Vt)."""
    forward = p[0] * (ops.line_exp(c[0] / p[1], p[2]) - 1.0)
    reverse = p[3] * (ops.line_exp((0.0 - c[0] - p[4]) / p[5], p[6]) - p[7])
    return [forward - reverse]


JUNCTION = Law("junction", junction, ("vj",), ("anode to cathode",), ("IS", "nVt", "knee"))
BREAKDOWN_JUNCTION = Law(
    "breakdown junction",
    breakdown_junction,
    ("vj",),
    ("anode to cathode",),
    ("IS", "nVt", "knee", "IBV", "BV", "nBVVt", "breakdown knee", "rest"),
)


def diode_law(parameters: Mapping[str, Any], temperature: float) -> tuple[Law, tuple[float, ...], Limits]:
    """The law of one junction of a diode, its constants at ``temperature`` (kelvin), and its Newton limits."""
    from math import exp, log

    vt = thermal_volts(temperature)
    ideality = parameters["ideality"]
    current = saturation_current_at(
        parameters["saturation_current"],
        ideality,
        parameters["band_gap"],
        parameters["temperature_exponent"],
        temperature,
    )
    constants: tuple[float, ...] = (current, ideality * vt, knee(current))
    high = ideality * vt * log(max(_KNEE_AMPERES / current, 1.0))
    if "breakdown_volts" not in parameters:
        return JUNCTION, constants, Limits((ideality * vt,), (high,), (-float("inf"),))
    volts, amperes = parameters["breakdown_volts"], parameters["breakdown_current"]
    scale = parameters["breakdown_ideality"] * vt
    constants += (amperes, volts, scale, knee(amperes), exp(-volts / scale))
    low = -volts - scale * log(max(_KNEE_AMPERES / amperes, 1.0))
    return BREAKDOWN_JUNCTION, constants, Limits((min(ideality * vt, scale),), (high,), (low,))
