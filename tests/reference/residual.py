"""The equations M·x' + m·u' = F(x, u) as tables, and F with its Jacobian from one pass over the devices."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from . import laws
from .compiled import jit


class System(NamedTuple):
    """A circuit as arrays.

    The unknowns x are the free node voltages, junction voltages inside a series resistance, inductor currents and
    op-amp internal voltages. Node k has the voltage scale[k]·x[index[k]] + offset[k] · (1, supply factor, take).
    F = −(stiffness·x + load · (1, supply factor, take)) − device currents; rows named in ``override_row`` are
    replaced by −(override·x + override_load · (1, supply factor, take)).
    """

    mass: np.ndarray
    mass_load: np.ndarray
    stiffness: np.ndarray
    load: np.ndarray
    node_index: np.ndarray
    node_scale: np.ndarray
    node_offset: np.ndarray
    junction_index: np.ndarray
    junction_gain: np.ndarray
    junction_row: np.ndarray
    junction_offset: np.ndarray
    junction_law: np.ndarray
    bipolar_node: np.ndarray
    bipolar_law: np.ndarray
    channel_node: np.ndarray
    channel_law: np.ndarray
    opamp_node: np.ndarray
    opamp_index: np.ndarray
    opamp_law: np.ndarray
    override_row: np.ndarray
    override: np.ndarray
    override_load: np.ndarray


@jit
def node_volts(system, k, x, u, supply):
    """The voltage of node ``k``."""
    offset = system.node_offset
    v = offset[k, 0] + supply * offset[k, 1] + u * offset[k, 2]
    i = system.node_index[k]
    if i >= 0:
        v += system.node_scale[k] * x[i]
    return v


@jit
def _leave(system, k, current, F):
    """A current leaving node ``k``."""
    i = system.node_index[k]
    if i >= 0:
        F[i] -= system.node_scale[k] * current


@jit
def _slope(system, k, node, g, J):
    """d(current leaving node ``k``)/d(voltage of ``node``)."""
    i = system.node_index[k]
    j = system.node_index[node]
    if i >= 0 and j >= 0:
        J[i, j] -= system.node_scale[k] * system.node_scale[node] * g


@jit
def _linear(system, x, u, supply, F, J, jacobian):
    n = x.shape[0]
    for i in range(n):
        total = system.load[i, 0] + supply * system.load[i, 1] + u * system.load[i, 2]
        for j in range(n):
            total += system.stiffness[i, j] * x[j]
        F[i] = -total
    if jacobian:
        for i in range(n):
            for j in range(n):
                J[i, j] = -system.stiffness[i, j]


@jit
def junction_volts(system, k, x, u, supply):
    """The voltage across junction ``k`` (of one diode of a string)."""
    offset = system.junction_offset
    v = offset[k, 0] + supply * offset[k, 1] + u * offset[k, 2]
    for side in range(2):
        i = system.junction_index[k, side]
        if i >= 0:
            v += system.junction_gain[k, side] * x[i]
    return v


@jit
def _junctions(system, x, u, supply, F, J, jacobian):
    for k in range(system.junction_index.shape[0]):
        v = junction_volts(system, k, x, u, supply)
        law = system.junction_law[k]
        current, g = laws.junction(v, law[0], law[1], law[2], law[3], law[4])
        for side in range(2):
            i = system.junction_index[k, side]
            if i < 0:
                continue
            F[i] -= system.junction_row[k, side] * current
            if jacobian:
                for other in range(2):
                    j = system.junction_index[k, other]
                    if j >= 0:
                        J[i, j] -= system.junction_row[k, side] * system.junction_gain[k, other] * g


@jit
def _bipolars(system, x, u, supply, F, J, jacobian):
    for k in range(system.bipolar_node.shape[0]):
        c, b, e = system.bipolar_node[k]
        law = system.bipolar_law[k]
        sign = law[0]
        vc = node_volts(system, c, x, u, supply)
        vb = node_volts(system, b, x, u, supply)
        ve = node_volts(system, e, x, u, supply)
        ic, ib, ic_be, ic_bc, ib_be, ib_bc = laws.bipolar(
            sign * (vb - ve), sign * (vb - vc), law[1], law[2], law[3], law[4], law[5], law[6]
        )
        _leave(system, c, sign * ic, F)
        _leave(system, b, sign * ib, F)
        _leave(system, e, -sign * (ic + ib), F)
        if jacobian:
            _slope(system, c, b, ic_be + ic_bc, J)
            _slope(system, c, e, -ic_be, J)
            _slope(system, c, c, -ic_bc, J)
            _slope(system, b, b, ib_be + ib_bc, J)
            _slope(system, b, e, -ib_be, J)
            _slope(system, b, c, -ib_bc, J)
            _slope(system, e, b, -(ic_be + ic_bc + ib_be + ib_bc), J)
            _slope(system, e, e, ic_be + ib_be, J)
            _slope(system, e, c, ic_bc + ib_bc, J)


@jit
def _channels(system, x, u, supply, F, J, jacobian):
    for k in range(system.channel_node.shape[0]):
        d, g, s = system.channel_node[k]
        law = system.channel_law[k]
        sign = law[0]
        vd = node_volts(system, d, x, u, supply)
        vg = node_volts(system, g, x, u, supply)
        vs = node_volts(system, s, x, u, supply)
        current, by_gs, by_gd = laws.channel(sign * (vg - vs), sign * (vg - vd), law[1], law[2], law[3])
        _leave(system, d, sign * current, F)
        _leave(system, s, -sign * current, F)
        if jacobian:
            _slope(system, d, g, by_gs + by_gd, J)
            _slope(system, d, s, -by_gs, J)
            _slope(system, d, d, -by_gd, J)
            _slope(system, s, g, -(by_gs + by_gd), J)
            _slope(system, s, s, by_gs, J)
            _slope(system, s, d, by_gd, J)


@jit
def _opamp_rate(system, k, x, u, supply, F, J, jacobian):
    plus, minus, _, high, low = system.opamp_node[k]
    law = system.opamp_law[k]
    row = system.opamp_index[k]
    vin = node_volts(system, plus, x, u, supply) - node_volts(system, minus, x, u, supply)
    rate, by_in, by_w, by_high, by_low = laws.opamp_rate(
        vin,
        x[row],
        (node_volts(system, high, x, u, supply), law[3]),
        (node_volts(system, low, x, u, supply), law[4]),
        law[0],
        law[1],
        law[2],
    )
    F[row] += rate
    if jacobian:
        J[row, row] += by_w
        for node, g in ((plus, by_in), (minus, -by_in), (high, by_high), (low, by_low)):
            j = system.node_index[node]
            if j >= 0:
                J[row, j] += g * system.node_scale[node]


@jit
def _opamp_currents(system, k, x, u, supply, F, J, jacobian):
    _, _, out, high, low = system.opamp_node[k]
    law = system.opamp_law[k]
    row = system.opamp_index[k]
    current, g = laws.opamp_output(x[row] - node_volts(system, out, x, u, supply), law[5], law[6])
    from_high, share_high = laws.rail_draw(current)
    into_low, share_low = laws.rail_draw(-current)
    _leave(system, out, -current, F)
    _leave(system, high, law[7] + from_high, F)
    _leave(system, low, -(law[7] + into_low), F)
    if jacobian:
        for node, share in ((out, -1.0), (high, share_high), (low, share_low)):
            _slope(system, node, out, -share * g, J)
            i = system.node_index[node]
            if i >= 0:
                J[i, row] -= system.node_scale[node] * share * g


@jit
def evaluate(system, x, u, supply, F, J, jacobian):
    """Fill ``F`` and, when asked, ``J`` = dF/dx at the unknowns ``x``, take ``u`` and supply factor ``supply``."""
    _linear(system, x, u, supply, F, J, jacobian)
    _junctions(system, x, u, supply, F, J, jacobian)
    _bipolars(system, x, u, supply, F, J, jacobian)
    _channels(system, x, u, supply, F, J, jacobian)
    for k in range(system.opamp_index.shape[0]):
        _opamp_rate(system, k, x, u, supply, F, J, jacobian)
        _opamp_currents(system, k, x, u, supply, F, J, jacobian)
    for k in range(system.override_row.shape[0]):
        i = system.override_row[k]
        load = system.override_load[k]
        total = load[0] + supply * load[1] + u * load[2]
        for j in range(x.shape[0]):
            total += system.override[k, j] * x[j]
            if jacobian:
                J[i, j] = -system.override[k, j]
        F[i] = -total
