"""Bipolar transistor law, transport form with Early effect and collector leakage (npn signs)."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from math import inf, log
from typing import Any

from tackbench.devices.law import Law, Limits
from tackbench.devices.physics import knee, leakage_current_at, saturation_current_at, thermal_volts

_KNEE_AMPERES = 1e-4


def bipolar(ops: Any, c: Sequence[Any], p: Sequence[Any]) -> list[Any]:
    """Collector and base currents from vbe and vbc; p = IS, Vt, knee, IS/BF, IS/BR, 1/VA (0: none), ICBO."""
    forward = ops.line_exp(c[0] / p[1], p[2])
    backward = ops.line_exp(c[1] / p[1], p[2])
    transport = p[0] * (forward - backward) * (1.0 - c[1] * p[5])
    emitter_junction = p[3] * (forward - 1.0)
    collector_junction = p[4] * (backward - 1.0) + p[6] * ops.tanh(c[1] / (2.0 * p[1]))
    return [transport - collector_junction, emitter_junction + collector_junction]


BIPOLAR = Law(
    "bipolar transistor",
    bipolar,
    ("vbe", "vbc"),
    ("collector", "base"),
    ("IS", "Vt", "knee", "IS/BF", "IS/BR", "1/VA", "ICBO"),
)


def bipolar_law(parameters: Mapping[str, Any], temperature: float) -> tuple[Law, tuple[float, ...], Limits]:
    """The law, its constants at ``temperature`` (kelvin), and its Newton limits."""
    vt = thermal_volts(temperature)
    current = saturation_current_at(
        parameters["saturation_current"],
        1.0,
        parameters["band_gap"],
        parameters["temperature_exponent"],
        temperature,
    )
    constants = (
        current,
        vt,
        knee(current),
        current / parameters["forward_gain"],
        current / parameters["reverse_gain"],
        1.0 / parameters["early_volts"] if "early_volts" in parameters else 0.0,
        leakage_current_at(parameters["leakage_current"], temperature),
    )
    high = vt * log(max(_KNEE_AMPERES / current, 1.0))
    return BIPOLAR, constants, Limits((vt, vt), (high, high), (-inf, -inf))
