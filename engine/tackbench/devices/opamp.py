"""Op-amp laws: the rate of the internal voltage w, the limited output current, and what the rails deliver.

The rate of w is written in volts: dw/dt = 2π·GBW·rate, so that it has the size of the other voltages.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from math import inf, pi
from typing import Any

from tackbench.devices.law import Law, Limits

RAIL_BEND_VOLTS = 0.05
"""s of the rail limit: over this voltage the internal stage gives in to a rail."""

_RAIL_KNEE = 60.0  # beyond exp(60) only a trial of the solver can be: no solution reaches it
_DRAW_BEND_AMPERES = 10e-6


def _rate(ops: Any, vd: Any, w: Any, high: Any, low: Any, p: Sequence[Any]) -> Any:
    pull = p[0] * ops.tanh(vd / p[0])
    leak = (w - 0.5 * (high + p[2] + low - p[3])) * p[1]
    over = ops.line_exp((w - high) / RAIL_BEND_VOLTS, _RAIL_KNEE)
    under = ops.line_exp((low - w) / RAIL_BEND_VOLTS, _RAIL_KNEE)
    return pull - leak - p[0] * (over - under)


def core(ops: Any, c: Sequence[Any], p: Sequence[Any]) -> list[Any]:
    """The rate of w between fixed rails, from v+ - v- and w; p = SR/2πGBW, 1/A0, swing high, swing low, V+, V-."""
    return [_rate(ops, c[0], c[1], p[4] - p[2], p[5] + p[3], p)]


def live_core(ops: Any, c: Sequence[Any], p: Sequence[Any]) -> list[Any]:
    """The same between live rails: controls v+ - v-, w, V+rail, V-rail; p = SR/2πGBW, 1/A0, swing high, swing low."""
    return [_rate(ops, c[0], c[1], c[2] - p[2], c[3] + p[3], p)]


def limited_output(ops: Any, c: Sequence[Any], p: Sequence[Any]) -> list[Any]:
    """Imax tanh((w - vout)/(Rout Imax)); control w - vout; p = Imax, Rout."""
    return [p[0] * ops.tanh(c[0] / (p[1] * p[0]))]


def _draws(ops: Any, current: Any, quiescent: Any) -> list[Any]:
    bend = ops.sqrt(current * current + _DRAW_BEND_AMPERES**2)
    return [quiescent + 0.5 * (current + bend), quiescent + 0.5 * (bend - current)]


def rail_draws(ops: Any, c: Sequence[Any], p: Sequence[Any]) -> list[Any]:
    """Currents out of the positive and into the negative rail; control w - vout; p = Rout, quiescent current."""
    return _draws(ops, c[0] / p[0], p[1])


def limited_output_draws(ops: Any, c: Sequence[Any], p: Sequence[Any]) -> list[Any]:
    """Limited output current and both rail currents; control w - vout; p = Imax, Rout, quiescent current."""
    (current,) = limited_output(ops, c, p)
    return [current, *_draws(ops, current, p[2])]


_CORE_PARAMETERS = ("SR/2piGBW", "1/A0", "swing high", "swing low")
CORE = Law("op-amp", core, ("vd", "w"), ("rate of w",), (*_CORE_PARAMETERS, "V+", "V-"))
LIVE_CORE = Law("op-amp on live rails", live_core, ("vd", "w", "V+", "V-"), ("rate of w",), _CORE_PARAMETERS)
LIMITED_OUTPUT = Law("op-amp output", limited_output, ("w-vout",), ("output",), ("Imax", "Rout"))
RAIL_DRAWS = Law("op-amp rail currents", rail_draws, ("w-vout",), ("positive rail", "negative rail"), ("Rout", "Iq"))
LIMITED_OUTPUT_DRAWS = Law(
    "op-amp output and rail currents",
    limited_output_draws,
    ("w-vout",),
    ("output", "positive rail", "negative rail"),
    ("Imax", "Rout", "Iq"),
)


def input_scale(parameters: Mapping[str, Any]) -> float:
    """SR/(2π GBW) in volts: the input difference at which the input stage gives in."""
    return float(parameters["slew_rate"] / (2.0 * pi * parameters["gain_bandwidth"]))


def core_constants(parameters: Mapping[str, Any]) -> tuple[float, ...]:
    """The constants of the internal stage; fixed rails are appended to them."""
    return (
        input_scale(parameters),
        1.0 / parameters["open_loop_gain"],
        parameters["swing_high"],
        parameters["swing_low"],
    )


def core_limits(parameters: Mapping[str, Any], rails: tuple[float, float] | None) -> Limits:
    """Newton limits of the internal stage, for fixed rails (volts) or for live ones (None)."""
    scale, s = input_scale(parameters), RAIL_BEND_VOLTS
    if rails is None:
        return Limits((scale, s, s, s), (inf,) * 4, (-inf,) * 4)
    high, low = rails[0] - parameters["swing_high"], rails[1] + parameters["swing_low"]
    return Limits((scale, s), (inf, max(high, low)), (-inf, min(high, low)))
