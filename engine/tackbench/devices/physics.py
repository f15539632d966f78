"""What temperature does to a device, and the constants that all laws share (SI units, exact SI constants)."""

from __future__ import annotations

import math

BOLTZMANN = 1.380649e-23
ELEMENTARY_CHARGE = 1.602176634e-19
MODEL_TEMPERATURE = 298.15
"""Kelvin; every model is given at this temperature."""

JUNCTION_SIEMENS = 1e-12
"""The conductance that lies across every single junction."""

LINE_AMPERES = 100.0
"""Above this current an exponential goes on as a straight line, so that any finite input has a solution."""


def thermal_volts(temperature: float) -> float:
    """kT/q in volts at ``temperature`` in kelvin."""
    return BOLTZMANN * temperature / ELEMENTARY_CHARGE


def saturation_current_at(
    saturation_current: float, ideality: float, band_gap: float, exponent: float, temperature: float
) -> float:
    """IS(T) = IS (T/T0)^(XTI/n) exp((EG/n)(q/k)(1/T0 - 1/T)), amperes; ``band_gap`` in electronvolts."""
    ratio = temperature / MODEL_TEMPERATURE
    reach = (band_gap / ideality) * (ELEMENTARY_CHARGE / BOLTZMANN) * (1.0 / MODEL_TEMPERATURE - 1.0 / temperature)
    return float(saturation_current * ratio ** (exponent / ideality) * math.exp(reach))


def leakage_current_at(leakage_current: float, temperature: float) -> float:
    """ICBO(T): doubles every 10 K."""
    return float(leakage_current * 2.0 ** ((temperature - MODEL_TEMPERATURE) / 10.0))


def knee(current: float) -> float:
    """The exponent at which ``current`` times exp reaches ``LINE_AMPERES``."""
    return math.log(LINE_AMPERES / current)
