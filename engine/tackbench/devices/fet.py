"""Field-effect transistor laws: square-law JFET with gate junctions, square-law MOSFET with body diode (n signs)."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from math import inf, log
from typing import Any

from tackbench.devices.law import Law, Limits
from tackbench.devices.physics import knee, thermal_volts

_KNEE_AMPERES = 1e-4
_BODY_CURRENT = 1e-14


def _square_law(ops: Any, overdrive: Any, vds: Any, gain: Any, modulation: Any) -> Any:
    """gain (2 Vov vds - vds²)(1 + λ vds) in the triode region, gain Vov² (1 + λ vds) beyond, 0 when off; vds >= 0."""
    triode = (2.0 * overdrive - vds) * vds
    shape = ops.select(overdrive - vds, triode, overdrive * overdrive)
    return ops.select(overdrive, gain * shape * (1.0 + modulation * vds), 0.0 * vds)


def jfet(ops: Any, c: Sequence[Any], p: Sequence[Any]) -> list[Any]:
    """Channel (drain to source), gate-source and gate-drain currents from vgs and vgd; p = VP, β, λ, IS, Vt, knee."""
    vgs, vgd = c
    vds = vgs - vgd
    ahead = _square_law(ops, vgs - p[0], vds, p[1], p[2])
    reversed_ = _square_law(ops, vgd - p[0], 0.0 - vds, p[1], p[2])
    channel = ops.select(vds, ahead, 0.0 - reversed_)
    gate_source = p[3] * (ops.line_exp(vgs / p[4], p[5]) - 1.0)
    gate_drain = p[3] * (ops.line_exp(vgd / p[4], p[5]) - 1.0)
    return [channel, gate_source, gate_drain]


def mosfet(ops: Any, c: Sequence[Any], p: Sequence[Any]) -> list[Any]:
    """Drain to source current, body diode within, from vgs and vds; p = VTH, K/2, λ, body IS, Vt, knee."""
    vgs, vds = c
    ahead = _square_law(ops, vgs - p[0], vds, p[1], p[2])
    reversed_ = _square_law(ops, vgs - vds - p[0], 0.0 - vds, p[1], p[2])
    channel = ops.select(vds, ahead, 0.0 - reversed_)
    body = p[3] * (ops.line_exp((0.0 - vds) / p[4], p[5]) - 1.0)
    return [channel - body]


JFET = Law(
    "JFET",
    jfet,
    ("vgs", "vgd"),
    ("drain to source", "gate to source", "gate to drain"),
    ("VP", "beta", "lambda", "IS", "Vt", "knee"),
)
MOSFET = Law("MOSFET", mosfet, ("vgs", "vds"), ("drain to source",), ("VTH", "K/2", "lambda", "IS", "Vt", "knee"))


def jfet_law(parameters: Mapping[str, Any], temperature: float) -> tuple[Law, tuple[float, ...], Limits]:
    """The law, its constants at ``temperature`` (kelvin), and its Newton limits; a p device has VP > 0, mirrored."""
    vt, gate = thermal_volts(temperature), parameters["gate_current"]
    pinch_off = -abs(parameters["pinch_off_volts"])
    beta = parameters["drain_current"] / pinch_off**2
    high = vt * log(max(_KNEE_AMPERES / gate, 1.0))
    constants = (pinch_off, beta, parameters["channel_modulation"], gate, vt, knee(gate))
    return JFET, constants, Limits((vt, vt), (high, high), (-inf, -inf))


def mosfet_law(
    parameters: Mapping[str, Any], temperature: float, polarity: int
) -> tuple[Law, tuple[float, ...], Limits]:
    """The law, its constants at ``temperature`` (kelvin), and its Newton limits; a p device is mirrored."""
    vt = thermal_volts(temperature)
    threshold = polarity * parameters["threshold_volts"]
    constants = (
        threshold,
        parameters["transconductance"] / 2.0,
        parameters["channel_modulation"],
        _BODY_CURRENT,
        vt,
        knee(_BODY_CURRENT),
    )
    low = -vt * log(_KNEE_AMPERES / _BODY_CURRENT)
    return MOSFET, constants, Limits((vt, vt), (inf, inf), (-inf, low))
