"""The equations of a circuit as matrices, before anything is solved: node currents and what drives them.

Every node obeys: G v + Gu U + Gw w + (inductor currents) + (device currents) + (capacitor currents) = 0, with v the
free node voltages, U = (take, 1) and w the op-amps' internal voltages. Ideal sources are solved out of the node
voltages beforehand, so that rail converters reflect their load into the supply as ideal transformers do.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from tackbench.network.elements import Branch, Elements, dense, solve_constraints


@dataclass(frozen=True)
class Assembly:
    """Matrices over free nodes (n), capacitors (nc), inductors (nl), internals (nw), controls (K), currents (m).

    ``T`` (N, n) and ``Tu`` (N, 2) give all node voltages; ``capacitor_nodes`` (n, nc), ``inductor_nodes`` (n, nl),
    ``conductor_nodes`` (n, conductances) and ``current_nodes`` (n, m) are connection matrices; the ``…_drive`` ones
    (…, 2) give the part of a voltage that the sources impose. ``rates`` (nw, m): dw/dt in terms of the currents.
    """

    elements: Elements
    T: np.ndarray
    Tu: np.ndarray
    G: np.ndarray
    Gu: np.ndarray
    Gw: np.ndarray
    farads: np.ndarray
    henries: np.ndarray
    capacitor_nodes: np.ndarray
    capacitor_drive: np.ndarray
    inductor_nodes: np.ndarray
    inductor_drive: np.ndarray
    conductor_nodes: np.ndarray
    current_nodes: np.ndarray
    rates: np.ndarray
    control_nodes: np.ndarray
    control_drive: np.ndarray
    control_internals: np.ndarray

    @property
    def charge(self) -> np.ndarray:
        """Charges at the free nodes per volt of the free nodes, shape (n, n)."""
        return (self.capacitor_nodes * self.farads) @ self.capacitor_nodes.T

    @property
    def charge_drive(self) -> np.ndarray:
        """Charges at the free nodes per unit of the sources, shape (n, 2)."""
        return (self.capacitor_nodes * self.farads) @ self.capacitor_drive


def _connections(branches: list[Branch], count: int) -> np.ndarray:
    matrix = np.zeros((count, len(branches)))
    for column, branch in enumerate(branches):
        if branch.a >= 0:
            matrix[branch.a, column] += 1.0
        if branch.b >= 0:
            matrix[branch.b, column] -= 1.0
    return matrix


def assemble(elements: Elements) -> Assembly:
    """Write down the equations of ``elements``."""
    T, Tu, _ = solve_constraints(elements)
    count, internals = len(elements.names), len(elements.internals)
    conductors = _connections(elements.conductances, count)
    siemens = np.array([branch.value for branch in elements.conductances])
    G = (conductors * siemens) @ conductors.T
    Gw = np.zeros((count, internals))
    output_ends = np.zeros((count, len(elements.outputs)))
    for column, (node, internal, conductance) in enumerate(elements.outputs):
        if node >= 0:
            G[node, node] += conductance
            Gw[node, internal] -= conductance
            output_ends[node, column] = 1.0
    capacitors = _connections(elements.capacitors, count)
    inductors = _connections(elements.inductors, count)
    controls = [control for device in elements.devices for control in device.controls]
    currents = [current for device in elements.devices for current in device.currents]
    control_nodes = dense((nodes for nodes, _ in controls), count)
    rates = dense((internal for _, internal in currents), internals).T
    return Assembly(
        elements=elements,
        T=T,
        Tu=Tu,
        G=T.T @ G @ T,
        Gu=T.T @ G @ Tu,
        Gw=T.T @ Gw,
        farads=np.array([branch.value for branch in elements.capacitors]),
        henries=np.array([branch.value for branch in elements.inductors]),
        capacitor_nodes=T.T @ capacitors,
        capacitor_drive=capacitors.T @ Tu,
        inductor_nodes=T.T @ inductors,
        inductor_drive=inductors.T @ Tu,
        conductor_nodes=T.T @ np.hstack([conductors, output_ends]),
        current_nodes=T.T @ dense((nodes for nodes, _ in currents), count).T,
        rates=rates * np.array(elements.internal_rates)[:, None],
        control_nodes=control_nodes @ T,
        control_drive=control_nodes @ Tu,
        control_internals=dense((internal for _, internal in controls), internals),
    )
