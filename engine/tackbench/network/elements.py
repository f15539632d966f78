"""A circuit taken apart into the few kinds of element that equations are written for.

Wires and zero-ohm resistors merge their nodes; windings, diode series resistances and internal resistances of sources
get nodes of their own; every nonlinear device becomes one or more laws with control voltages and currents.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from math import pi

import numpy as np

from tackbench.circuit import GROUND, Circuit, Part
from tackbench.devices import bipolar, diode, fet, opamp
from tackbench.devices.law import Law, Limits
from tackbench.devices.physics import JUNCTION_SIEMENS
from tackbench.errors import InputError

Sparse = dict[int, float]

TAKE, STEADY = 0, 1
"""The two inputs of every circuit: the take's voltage, and the factor (1) that all steady sources share."""


@dataclass
class Device:
    """One law in place. ``controls`` and ``currents`` hold one pair per control or current of the law: coefficients
    by node (currents: leaving the node), and coefficients by internal voltage w of an op-amp. ``steady_constants``
    are the places in ``constants`` that rise with the supply (fixed rails)."""

    ref: str
    law: Law
    constants: tuple[float, ...]
    limits: Limits
    controls: list[tuple[Sparse, Sparse]]
    currents: list[tuple[Sparse, Sparse]]
    steady_constants: tuple[int, ...] = ()


@dataclass
class Branch:
    """A two-terminal linear element between two nodes (-1 is ground)."""

    ref: str
    a: int
    b: int
    value: float


@dataclass
class Constraint:
    """An ideal source: the weighted sum of node voltages equals take · u + steady."""

    ref: str
    nodes: Sparse
    take: float = 0.0
    steady: float = 0.0


@dataclass
class Elements:
    """Everything that the equations are assembled from; ``names`` are the nodes, ``internals`` the op-amps' w."""

    circuit: Circuit
    names: list[str] = field(default_factory=list)
    place: dict[str, int] = field(default_factory=dict)
    conductances: list[Branch] = field(default_factory=list)
    capacitors: list[Branch] = field(default_factory=list)
    inductors: list[Branch] = field(default_factory=list)
    constraints: list[Constraint] = field(default_factory=list)
    internals: list[str] = field(default_factory=list)
    internal_rates: list[float] = field(default_factory=list)
    outputs: list[tuple[int, int, float]] = field(default_factory=list)
    devices: list[Device] = field(default_factory=list)
    unlimited_draws: list[tuple[str, str, str]] = field(default_factory=list)

    def node(self, name: str) -> int:
        """The number of a node, -1 for ground."""
        return self.place[name]

    def hidden_node(self, name: str) -> int:
        self.names.append(name)
        self.place[name] = len(self.names) - 1
        return len(self.names) - 1


def _merged(circuit: Circuit) -> dict[str, str]:
    """For every node the name that stands for it after wires and zero-ohm resistors have joined nodes."""
    leader = {name: name for name in (GROUND, *circuit.nodes())}

    def find(name: str) -> str:
        while leader[name] != name:
            name = leader[name]
        return name

    for part in circuit.parts:
        if part.kind == "wire" or (part.kind == "resistor" and part.value == 0.0):
            first, second = find(part.pins[0]), find(part.pins[1])
            if first == GROUND:
                first, second = second, first
            leader[first] = second
    return {name: find(name) for name in leader}


def take_apart(circuit: Circuit) -> Elements:
    """The elements of ``circuit``; raises InputError for shapes that no equation can be written for."""
    elements = Elements(circuit)
    leaders = _merged(circuit)
    numbers: dict[str, int] = {GROUND: -1}
    for leader in leaders.values():
        if leader not in numbers:
            numbers[leader] = len(elements.names)
            elements.names.append(leader)
    elements.place = {name: numbers[leader] for name, leader in leaders.items()}
    _add_sources(elements)
    for part in circuit.parts:
        if part.kind in _LINEAR:
            _LINEAR[part.kind](elements, part)
    fixed = fixed_volts(elements)
    for part in circuit.parts:
        if part.kind == "opamp":
            _add_opamp(elements, part, fixed)
        elif part.kind not in _LINEAR and part.kind != "wire":
            _SEMICONDUCTORS[part.kind](elements, part, circuit.temperature)
    return elements


def _add_sources(elements: Elements) -> None:
    circuit = elements.circuit
    drive = elements.node(circuit.input_node)
    if circuit.input_ohms > 0:
        drive = elements.hidden_node("the take")
        _conductance(elements, "input", drive, elements.node(circuit.input_node), 1.0 / circuit.input_ohms)
    elements.constraints.append(Constraint("input", {drive: 1.0}, take=1.0))
    if circuit.output_load_ohms is not None:
        _conductance(elements, "load", elements.node(circuit.output_node), -1, 1.0 / circuit.output_load_ohms)
    supply = circuit.supply
    if supply is None:
        return
    live = source = elements.node(supply.node)
    if supply.ohms > 0:
        source = elements.hidden_node("the supply inside its resistance")
        _conductance(elements, "supply", source, live, 1.0 / supply.ohms)
    elements.constraints.append(Constraint("supply", {source: 1.0}, steady=supply.volts))
    for name, ratio in supply.rails:
        elements.constraints.append(Constraint(f"rail {name}", _sparse((elements.node(name), 1.0), (live, -ratio))))


def _sparse(*terms: tuple[int, float]) -> Sparse:
    """Coefficients by node, ground left out and equal nodes added up."""
    total: Sparse = {}
    for node, coefficient in terms:
        if node >= 0:
            total[node] = total.get(node, 0.0) + coefficient
    return {node: coefficient for node, coefficient in total.items() if coefficient != 0.0}


def _conductance(elements: Elements, ref: str, a: int, b: int, siemens: float) -> None:
    if a != b:
        elements.conductances.append(Branch(ref, a, b, siemens))


def _capacitance(elements: Elements, ref: str, a: int, b: int, farads: float) -> None:
    if a != b and farads != 0.0:
        elements.capacitors.append(Branch(ref, a, b, farads))


def _add_resistor(elements: Elements, part: Part) -> None:
    if part.value:
        _conductance(elements, part.ref, elements.node(part.pins[0]), elements.node(part.pins[1]), 1.0 / part.value)


def _add_capacitor(elements: Elements, part: Part) -> None:
    assert part.value is not None
    _capacitance(elements, part.ref, elements.node(part.pins[0]), elements.node(part.pins[1]), part.value)


def _add_inductor(elements: Elements, part: Part) -> None:
    assert part.value is not None
    a, b = elements.node(part.pins[0]), elements.node(part.pins[1])
    if a == b:
        return
    if part.series_ohms > 0:
        winding = elements.hidden_node(f"{part.ref} inside its winding")
        _conductance(elements, part.ref, a, winding, 1.0 / part.series_ohms)
        a = winding
    elements.inductors.append(Branch(part.ref, a, b, part.value))


def _add_source(elements: Elements, part: Part) -> None:
    assert part.value is not None
    nodes = _sparse((elements.node(part.pins[0]), 1.0), (elements.node(part.pins[1]), -1.0))
    elements.constraints.append(Constraint(part.ref, nodes, steady=part.value))


_LINEAR = {
    "resistor": _add_resistor,
    "capacitor": _add_capacitor,
    "inductor": _add_inductor,
    "source": _add_source,
}


def _across(a: int, b: int, factor: float = 1.0) -> tuple[Sparse, Sparse]:
    return _sparse((a, factor), (b, -factor)), {}


def _junction(elements: Elements, ref: str, a: int, b: int, farads: float, count: int = 1) -> None:
    """What lies across a junction besides its law: 1e-12 S and a constant capacitance, in series over a string."""
    _conductance(elements, ref, a, b, JUNCTION_SIEMENS / count)
    _capacitance(elements, ref, a, b, farads / count)


def _add_diode(elements: Elements, part: Part, temperature: float) -> None:
    anode, cathode = elements.node(part.pin("anode")), elements.node(part.pin("cathode"))
    if anode == cathode:
        return
    parameters = part.parameters
    if parameters["series_ohms"] > 0:
        inner = elements.hidden_node(f"{part.ref} inside its series resistance")
        _conductance(elements, part.ref, anode, inner, 1.0 / (parameters["series_ohms"] * part.count))
        anode = inner
    _junction(elements, part.ref, anode, cathode, parameters["junction_capacitance"], part.count)
    law, constants, limits = diode.diode_law(parameters, temperature)
    controls, currents = [_across(anode, cathode, 1.0 / part.count)], [_across(anode, cathode)]
    elements.devices.append(Device(part.ref, law, constants, limits, controls, currents))


def _add_bipolar(elements: Elements, part: Part, temperature: float) -> None:
    c, b, e = (elements.node(name) for name in part.pins)
    sign, parameters = float(part.polarity), part.parameters
    _junction(elements, part.ref, b, e, parameters["base_emitter_capacitance"])
    _junction(elements, part.ref, b, c, parameters["base_collector_capacitance"])
    law, constants, limits = bipolar.bipolar_law(parameters, temperature)
    controls = [_across(b, e, sign), _across(b, c, sign)]
    currents = [_across(c, e, sign), _across(b, e, sign)]
    elements.devices.append(Device(part.ref, law, constants, limits, controls, currents))


def _add_jfet(elements: Elements, part: Part, temperature: float) -> None:
    d, g, s = (elements.node(name) for name in part.pins)
    sign, parameters = float(part.polarity), part.parameters
    _junction(elements, part.ref, g, s, parameters["gate_source_capacitance"])
    _junction(elements, part.ref, g, d, parameters["gate_drain_capacitance"])
    law, constants, limits = fet.jfet_law(parameters, temperature)
    controls = [_across(g, s, sign), _across(g, d, sign)]
    currents = [_across(d, s, sign), _across(g, s, sign), _across(g, d, sign)]
    elements.devices.append(Device(part.ref, law, constants, limits, controls, currents))


def _add_mosfet(elements: Elements, part: Part, temperature: float) -> None:
    d, g, s = (elements.node(name) for name in part.pins)
    sign, parameters = float(part.polarity), part.parameters
    _conductance(elements, part.ref, d, s, JUNCTION_SIEMENS)
    _capacitance(elements, part.ref, g, s, parameters["gate_source_capacitance"])
    _capacitance(elements, part.ref, g, d, parameters["gate_drain_capacitance"])
    law, constants, limits = fet.mosfet_law(parameters, temperature, part.polarity)
    controls, currents = [_across(g, s, sign), _across(d, s, sign)], [_across(d, s, sign)]
    elements.devices.append(Device(part.ref, law, constants, limits, controls, currents))


_SEMICONDUCTORS = {"diode": _add_diode, "bipolar": _add_bipolar, "jfet": _add_jfet, "mosfet": _add_mosfet}


def _add_opamp(elements: Elements, part: Part, fixed: Mapping[int, float]) -> None:
    plus, minus, _, high, low = (elements.node(name) for name in part.pins)
    parameters = part.parameters
    w = len(elements.internals)
    elements.internals.append(part.ref)
    elements.internal_rates.append(2.0 * pi * parameters["gain_bandwidth"])
    if "input_ohms" in parameters:
        _conductance(elements, part.ref, plus, minus, 1.0 / parameters["input_ohms"])
    input_nodes = _sparse((plus, 1.0), (minus, -1.0))
    controls: list[tuple[Sparse, Sparse]] = [(input_nodes, {}), ({}, {w: 1.0})]
    rate: list[tuple[Sparse, Sparse]] = [({}, {w: 1.0})]
    constants = opamp.core_constants(parameters)
    rails_are_fixed = high in fixed and low in fixed
    if rails_are_fixed:
        rails = fixed[high], fixed[low]
        limits = opamp.core_limits(parameters, rails)
        core = Device(part.ref, opamp.CORE, (*constants, *rails), limits, controls, rate, (4, 5))
    else:
        controls += [(_sparse((high, 1.0)), {}), (_sparse((low, 1.0)), {})]
        limits = opamp.core_limits(parameters, None)
        core = Device(part.ref, opamp.LIVE_CORE, constants, limits, controls, rate)
    elements.devices.append(core)
    _add_output(elements, part, w, rails_are_fixed)


def _add_output(elements: Elements, part: Part, w: int, rails_are_fixed: bool) -> None:
    """The output resistance or limited output, and the rail currents where they can move a rail."""
    _, _, out, high, low = (elements.node(name) for name in part.pins)
    parameters = part.parameters
    ohms, quiescent = parameters["output_ohms"], parameters["supply_current"]
    across = [(_sparse((out, -1.0)), {w: 1.0})]
    leaving: list[tuple[Sparse, Sparse]] = [(_sparse((out, -1.0)), {})]
    draws: list[tuple[Sparse, Sparse]] = [(_sparse((high, 1.0)), {}), (_sparse((low, -1.0)), {})]
    limit = parameters.get("output_current")
    if limit is None:
        elements.outputs.append((out, w, 1.0 / ohms))
    if rails_are_fixed:
        if limit is not None:
            limits = Limits((limit * ohms,), (float("inf"),), (-float("inf"),))
            elements.devices.append(Device(part.ref, opamp.LIMITED_OUTPUT, (limit, ohms), limits, across, leaving))
        return
    bend = Limits((limit * ohms if limit else 1e-4 * ohms,), (float("inf"),), (-float("inf"),))
    if limit is None:
        elements.devices.append(Device(part.ref, opamp.RAIL_DRAWS, (ohms, quiescent), bend, across, draws))
    else:
        constants = (limit, ohms, quiescent)
        both = [*leaving, *draws]
        elements.devices.append(Device(part.ref, opamp.LIMITED_OUTPUT_DRAWS, constants, bend, across, both))


def dense(rows: Iterable[Mapping[int, float]], width: int) -> np.ndarray:
    """Sparse coefficient rows as a matrix, shape (rows, width)."""
    listed = list(rows)
    matrix = np.zeros((len(listed), width))
    for row, terms in enumerate(listed):
        for column, coefficient in terms.items():
            matrix[row, column] = coefficient
    return matrix


def solve_constraints(elements: Elements) -> tuple[np.ndarray, np.ndarray, list[int]]:
    """Node voltages under the ideal sources: v = T · (free node voltages) + Tu · (take, steady).

    Returns T, shape (nodes, free), Tu, shape (nodes, 2), and the numbers of the free nodes. Gauss-Jordan elimination;
    the coefficients are small whole numbers and rail ratios. Raises InputError where sources contradict each other.
    """
    count = len(elements.names)
    left = dense((constraint.nodes for constraint in elements.constraints), count)
    right = np.array([[constraint.take, constraint.steady] for constraint in elements.constraints]).reshape(-1, 2)
    pivots: list[int] = []
    for row, constraint in enumerate(elements.constraints):
        if not np.any(np.abs(left[row]) > 1e-12):
            raise InputError(
                "is an ideal source whose two ends are already fixed by other sources",
                part=constraint.ref,
                expected="put a resistance in series or take one source out",
            )
        column = int(np.argmax(np.abs(left[row])))
        scale = left[row, column]
        left[row] /= scale
        right[row] /= scale
        for other in range(len(elements.constraints)):
            if other != row and left[other, column] != 0.0:
                right[other] -= left[other, column] * right[row]
                left[other] -= left[other, column] * left[row]
        pivots.append(column)
    free = [node for node in range(count) if node not in pivots]
    T, Tu = np.zeros((count, len(free))), np.zeros((count, 2))
    for column, node in enumerate(free):
        T[node, column] = 1.0
    for row, node in enumerate(pivots):
        T[node] = -left[row, free]
        Tu[node] = right[row]
    return T, Tu, free


def fixed_volts(elements: Elements) -> dict[int, float]:
    """The nodes whose voltage never moves (steady ideal sources alone), with their volts; ground is -1."""
    T, Tu, _ = solve_constraints(elements)
    fixed = {-1: 0.0}
    for node in range(len(elements.names)):
        if not np.any(T[node]) and Tu[node, TAKE] == 0.0:
            fixed[node] = float(Tu[node, STEADY])
    return fixed
