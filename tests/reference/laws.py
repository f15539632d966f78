"""The device laws of the design's "The device equations", each with its derivatives, written apart from the engine.

Every function takes and returns plain floats in SI units, already mirrored to the n-type.
"""

from __future__ import annotations

import math

from .compiled import jit

STRAIGHT_ABOVE_AMPERES = 100.0
CLAMP_STRAIGHT_ABOVE = 200.0
CLAMP_SOFTNESS_VOLTS = 0.05
RAIL_IDLE_AMPERES = 10e-6


@jit
def grown(scale, exponent, limit):
    """``scale * exp(exponent)``, a straight line above ``exponent = limit``; and its derivative by the exponent."""
    if exponent <= limit:
        value = scale * math.exp(exponent)
        return value, value
    top = scale * math.exp(limit)
    return top * (1.0 + exponent - limit), top


@jit
def junction(v, saturation, n_vt, breakdown, breakdown_volts, breakdown_n_vt):
    """Current of one junction (A) and its conductance (S): Shockley's law less the breakdown term."""
    limit = math.log(STRAIGHT_ABOVE_AMPERES / saturation)
    x = v / n_vt
    if x <= limit:
        i = saturation * math.expm1(x)
        g = saturation * math.exp(x) / n_vt
    else:
        i = STRAIGHT_ABOVE_AMPERES * (1.0 + x - limit) - saturation
        g = STRAIGHT_ABOVE_AMPERES / n_vt
    if breakdown > 0.0:
        back, slope = grown(
            breakdown,
            -(v + breakdown_volts) / breakdown_n_vt,
            math.log(STRAIGHT_ABOVE_AMPERES / breakdown),
        )
        i -= back - breakdown * math.exp(-breakdown_volts / breakdown_n_vt)
        g += slope / breakdown_n_vt
    return i, g


@jit
def bipolar(vbe, vbc, saturation, forward_gain, reverse_gain, per_early, leakage, vt):
    """(IC, IB, dIC/dvbe, dIC/dvbc, dIB/dvbe, dIB/dvbc) of an npn transistor in transport form."""
    limit = math.log(STRAIGHT_ABOVE_AMPERES / saturation)
    ebe, sbe = grown(saturation, vbe / vt, limit)
    ebc, sbc = grown(saturation, vbc / vt, limit)
    early = 1.0 - vbc * per_early
    icc = (ebe - ebc) * early
    icc_be = sbe / vt * early
    icc_bc = -sbc / vt * early - (ebe - ebc) * per_early
    ibe = (ebe - saturation) / forward_gain
    if abs(vbe) < vt:
        ibe = saturation * math.expm1(vbe / vt) / forward_gain
    ibc = (ebc - saturation) / reverse_gain
    if abs(vbc) < vt:
        ibc = saturation * math.expm1(vbc / vt) / reverse_gain
    ibe_be = sbe / vt / forward_gain
    ibc_bc = sbc / vt / reverse_gain
    if leakage > 0.0:
        bend = math.tanh(vbc / (2.0 * vt))
        ibc += leakage * bend
        ibc_bc += leakage * (1.0 - bend * bend) / (2.0 * vt)
    return icc - ibc, ibe + ibc, icc_be, icc_bc - ibc_bc, ibe_be, ibc_bc


@jit
def channel(vgs, vgd, beta, threshold, modulation):
    """(drain current, d/dvgs, d/dvgd) of a square-law channel, drain and source alike.

    The triode law 2·Vov·vds − vds² is Vov(source)² − Vov(drain)²; saturation is the drain's overdrive at zero.
    """
    over_s = max(vgs - threshold, 0.0)
    over_d = max(vgd - threshold, 0.0)
    vds = vgs - vgd
    square = beta * (over_s - over_d) * (over_s + over_d)
    factor = 1.0 + modulation * abs(vds)
    slope = modulation if vds >= 0.0 else -modulation
    return (
        square * factor,
        2.0 * beta * over_s * factor + square * slope,
        -2.0 * beta * over_d * factor - square * slope,
    )


@jit
def opamp_rate(vin, w, high, low, slew, two_pi_gbw, open_loop_gain):
    """dw/dt (V/s) and its derivatives by (v₊ − v₋, w, V₊rail, V₋rail).

    ``high`` and ``low`` are (rail, swing) pairs: the limits stand a swing inside the live rails.
    """
    bend = math.tanh(two_pi_gbw * vin / slew)
    leak = two_pi_gbw / open_loop_gain
    s = CLAMP_SOFTNESS_VOLTS
    up, up_slope = grown(slew, (w - (high[0] - high[1])) / s, CLAMP_STRAIGHT_ABOVE)
    down, down_slope = grown(slew, (low[0] + low[1] - w) / s, CLAMP_STRAIGHT_ABOVE)
    rate = slew * bend - leak * (w - 0.5 * (high[0] + low[0])) - (up - down)
    return (
        rate,
        two_pi_gbw * (1.0 - bend * bend),
        -leak - (up_slope + down_slope) / s,
        0.5 * leak + up_slope / s,
        0.5 * leak + down_slope / s,
    )


@jit
def opamp_output(difference, ohms, limit):
    """Output current (A) and conductance for w − v_out; ``limit`` zero means no current limit."""
    if limit > 0.0:
        bend = math.tanh(difference / (ohms * limit))
        return limit * bend, (1.0 - bend * bend) / ohms
    return difference / ohms, 1.0 / ohms


@jit
def rail_draw(i):
    """The part of an output current drawn from the positive rail, (i + √(i² + (10 µA)²))/2, and its derivative."""
    root = math.sqrt(i * i + RAIL_IDLE_AMPERES * RAIL_IDLE_AMPERES)
    return 0.5 * (i + root), 0.5 * (1.0 + i / root)
