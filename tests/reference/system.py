"""A netlist turned into the equations' tables: merged nodes, ideal voltages eliminated, index reduced."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field

import numpy as np

from tackbench.circuit import GROUND, Circuit, Part

from .residual import System

BOLTZMANN = 1.380649e-23  # J/K, exact in the SI
ELEMENTARY_CHARGE = 1.602176634e-19  # C, exact in the SI
MODEL_TEMPERATURE = 298.15
JUNCTION_CONDUCTANCE = 1e-12
BODY_DIODE_AMPERES = 1e-14
_CONSTANT, _SUPPLY, _TAKE = 0, 1, 2


def thermal_volts(temperature: float) -> float:
    """k·T/q in volts."""
    return BOLTZMANN * temperature / ELEMENTARY_CHARGE


def saturation_at(temperature: float, parameters, ideality: float) -> float:
    """The saturation current (A) moved from 25 degrees C to ``temperature`` (K)."""
    ratio = temperature / MODEL_TEMPERATURE
    tilt = parameters["band_gap"] * ELEMENTARY_CHARGE / BOLTZMANN * (1 / MODEL_TEMPERATURE - 1 / temperature)
    power = parameters["temperature_exponent"] / ideality
    return parameters["saturation_current"] * ratio**power * math.exp(tilt / ideality)


class Groups:
    """Disjoint sets of names (union-find)."""

    def __init__(self, names: Iterable[str]) -> None:
        self.parent = {name: name for name in names}

    def find(self, name: str) -> str:
        while self.parent[name] != name:
            name = self.parent[name]
        return name

    def join(self, names: Sequence[str]) -> None:
        for name in names[1:]:
            self.parent[self.find(name)] = self.find(names[0])


@dataclass
class Affine:
    """A node voltage as scale × (voltage of the node ``root``) + offset · (1, supply factor, take)."""

    root: str | None
    scale: float
    offset: np.ndarray


class Potentials:
    """The node voltages left free by the ideal sources; each node hangs on at most one free node."""

    def __init__(self, nodes: Iterable[str]) -> None:
        self.of = {name: Affine(name, 1.0, np.zeros(3)) for name in nodes}
        self.of[GROUND] = Affine(None, 0.0, np.zeros(3))

    def tie(self, plus: str, ratio: float, minus: str, offset: np.ndarray) -> None:
        """Impose v(plus) = ratio·v(minus) + offset."""
        a, b = self.of[plus], self.of[minus]
        weights: dict[str, float] = {}
        for term, factor in ((a, 1.0), (b, -ratio)):
            if term.root is not None:
                weights[term.root] = weights.get(term.root, 0.0) + factor * term.scale
        weights = {name: w for name, w in weights.items() if abs(w) > 1e-12}
        rest = offset - a.offset + ratio * b.offset
        if not weights:
            if np.max(np.abs(rest)) > 1e-9:
                raise ValueError(f"ideal sources contradict each other at {plus!r}")
            return
        pivot = max(weights, key=lambda name: abs(weights[name]))
        others = [name for name in weights if name != pivot]
        root = others[0] if others else None
        scale = -weights[root] / weights[pivot] if root else 0.0
        self._replace(pivot, Affine(root, scale, rest / weights[pivot]))

    def _replace(self, pivot: str, by: Affine) -> None:
        for name, term in self.of.items():
            if term.root == pivot:
                scale = term.scale * by.scale
                self.of[name] = Affine(by.root, scale, term.offset + term.scale * by.offset)

    def free(self) -> list[str]:
        return [name for name, term in self.of.items() if term.root == name]


@dataclass
class Junction:
    """A junction between two nodes, or on an internal unknown when it stands behind a series resistance."""

    pins: tuple[str, str]
    law: tuple[float, float, float, float, float]
    count: int = 1
    series_ohms: float = 0.0
    capacitance: float = 0.0


@dataclass
class Parts:
    """The circuit's parts by equation type, nodes merged across wires and zero-ohm resistors."""

    resistors: list[tuple[str, str, float]] = field(default_factory=list)
    capacitors: list[tuple[str, str, float]] = field(default_factory=list)
    inductors: list[tuple[str, str, float, float]] = field(default_factory=list)
    sources: list[tuple[str, str, float]] = field(default_factory=list)
    junctions: list[Junction] = field(default_factory=list)
    bipolars: list[tuple[tuple[str, ...], tuple[float, ...]]] = field(default_factory=list)
    channels: list[tuple[tuple[str, ...], tuple[float, ...]]] = field(default_factory=list)
    opamps: list[tuple[str, tuple[str, ...], tuple[float, ...]]] = field(default_factory=list)


class Sorter:
    """Sorts netlist parts into ``Parts``, turning each device's parameters into law coefficients."""

    def __init__(self, circuit: Circuit) -> None:
        self.temperature = circuit.temperature
        self.vt = thermal_volts(circuit.temperature)
        self.parts = Parts()
        groups = Groups([*circuit.nodes(), GROUND])
        for part in circuit.parts:
            if part.kind == "wire" or (part.kind == "resistor" and part.value == 0.0):
                groups.join(part.pins)
        ground = groups.find(GROUND)
        self.merged = {n: GROUND if groups.find(n) == ground else groups.find(n) for n in groups.parent}
        for part in circuit.parts:
            getattr(self, part.kind)(part, tuple(self.merged[pin] for pin in part.pins))

    def wire(self, part: Part, pins: tuple[str, ...]) -> None:
        """Merged already."""

    def resistor(self, part: Part, pins: tuple[str, ...]) -> None:
        if part.value:
            self.parts.resistors.append((*pins, part.value))

    def capacitor(self, part: Part, pins: tuple[str, ...]) -> None:
        self.parts.capacitors.append((*pins, part.value))

    def inductor(self, part: Part, pins: tuple[str, ...]) -> None:
        self.parts.inductors.append((*pins, part.value, part.series_ohms))

    def source(self, part: Part, pins: tuple[str, ...]) -> None:
        self.parts.sources.append((*pins, part.value))

    def diode(self, part: Part, pins: tuple[str, ...]) -> None:
        p = part.parameters
        n_vt = p["ideality"] * self.vt
        law = (
            saturation_at(self.temperature, p, p["ideality"]),
            n_vt,
            p.get("breakdown_current", 0.0),
            p.get("breakdown_volts", 0.0),
            p.get("breakdown_ideality", 1.0) * self.vt,
        )
        series, capacitance = p.get("series_ohms", 0.0), p.get("junction_capacitance", 0.0)
        self.parts.junctions.append(Junction(pins, law, part.count, series, capacitance))

    def _plain_junction(self, anode: str, cathode: str, saturation: float) -> None:
        self.parts.junctions.append(Junction((anode, cathode), (saturation, self.vt, 0.0, 0.0, self.vt)))

    def _capacitance(self, a: str, b: str, farads: float) -> None:
        if farads:
            self.parts.capacitors.append((a, b, farads))

    def bipolar(self, part: Part, pins: tuple[str, ...]) -> None:
        p = part.parameters
        collector, base, emitter = pins
        early = 1.0 / p["early_volts"] if "early_volts" in p else 0.0
        leakage = p.get("leakage_current", 0.0) * 2 ** ((self.temperature - MODEL_TEMPERATURE) / 10.0)
        law = (saturation_at(self.temperature, p, 1.0), p["forward_gain"], p["reverse_gain"], early, leakage, self.vt)
        self.parts.bipolars.append((pins, (float(part.polarity), *law)))
        for other, key in ((emitter, "base_emitter_capacitance"), (collector, "base_collector_capacitance")):
            self.parts.resistors.append((base, other, 1 / JUNCTION_CONDUCTANCE))
            self._capacitance(base, other, p.get(key, 0.0))

    def _gate_capacitances(self, part: Part, pins: tuple[str, ...]) -> None:
        drain, gate, source = pins
        self._capacitance(gate, source, part.parameters.get("gate_source_capacitance", 0.0))
        self._capacitance(gate, drain, part.parameters.get("gate_drain_capacitance", 0.0))

    def jfet(self, part: Part, pins: tuple[str, ...]) -> None:
        p = part.parameters
        sign = part.polarity
        pinch = sign * p["pinch_off_volts"]
        law = (float(sign), p["drain_current"] / pinch**2, pinch, p.get("channel_modulation", 0.0))
        self.parts.channels.append((pins, law))
        for end in (pins[0], pins[2]):
            anode, cathode = (pins[1], end) if sign > 0 else (end, pins[1])
            self._plain_junction(anode, cathode, p.get("gate_current", 1e-14))
        self._gate_capacitances(part, pins)

    def mosfet(self, part: Part, pins: tuple[str, ...]) -> None:
        p = part.parameters
        sign = part.polarity
        law = (
            float(sign),
            p["transconductance"] / 2,
            sign * p["threshold_volts"],
            p.get("channel_modulation", 0.0),
        )
        self.parts.channels.append((pins, law))
        drain, source = pins[0], pins[2]
        self._plain_junction(*((source, drain) if sign > 0 else (drain, source)), BODY_DIODE_AMPERES)
        self._gate_capacitances(part, pins)

    def opamp(self, part: Part, pins: tuple[str, ...]) -> None:
        p = part.parameters
        law = (
            p["slew_rate"],
            2 * math.pi * p["gain_bandwidth"],
            p["open_loop_gain"],
            p["swing_high"],
            p["swing_low"],
            p["output_ohms"],
            p.get("output_current", 0.0),
            p.get("supply_current", 0.0),
        )
        self.parts.opamps.append((part.ref, pins, law))
        if "input_ohms" in p:
            self.parts.resistors.append((pins[0], pins[1], p["input_ohms"]))


class Equations:
    """The tables of one circuit: ``.transient`` and ``.standing`` (for the operating point) systems.

    ``open_supply`` leaves the supply's source out: the row of its node then tells the current it must give.
    ``open_take`` leaves an ideal take (``input_ohms`` zero) out in the same way.
    """

    def __init__(self, circuit: Circuit, *, open_supply: bool = False, open_take: bool = False) -> None:
        self.circuit = circuit
        self.open_supply, self.open_take = open_supply, open_take
        sorter = Sorter(circuit)
        self.parts = sorter.parts
        self.merged = sorter.merged
        self.potentials = Potentials(dict.fromkeys(self.merged.values()))
        self._tie_sources()
        self._number_unknowns()
        self._stamp()
        self.transient = self._system(self._inductor_cutsets())
        self.standing = self._system([*self._floating_charges(), *self._inductor_loops()])

    # ------------------------------------------------------------ unknowns

    def _tie_sources(self) -> None:
        circuit, tie = self.circuit, self.potentials.tie
        supply = circuit.supply
        if supply is not None:
            node = self.merged[supply.node]
            for rail, ratio in supply.rails:
                tie(self.merged[rail], ratio, node, np.zeros(3))
            if supply.ohms == 0.0 and not self.open_supply:
                tie(node, 0.0, GROUND, np.array([0.0, supply.volts, 0.0]))
        for plus, minus, value in self.parts.sources:
            tie(plus, 1.0, minus, np.array([value, 0.0, 0.0]))
        if circuit.input_ohms == 0.0 and not self.open_take:
            tie(self.merged[circuit.input_node], 0.0, GROUND, np.array([0.0, 0.0, 1.0]))

    def _number_unknowns(self) -> None:
        self.names = list(self.potentials.of)
        self.number = {name: k for k, name in enumerate(self.names)}
        self.column = {name: k for k, name in enumerate(self.potentials.free())}
        self.free_count = len(self.column)
        inner = [j for j in self.parts.junctions if j.series_ohms > 0.0]
        self.first_inductor = self.free_count + len(inner)
        self.first_opamp = self.first_inductor + len(self.parts.inductors)
        self.size = self.first_opamp + len(self.parts.opamps)

    def _place(self, name: str) -> tuple[int, float, np.ndarray]:
        term = self.potentials.of[name]
        return (-1 if term.root is None else self.column[term.root]), term.scale, term.offset

    # ------------------------------------------------------------ stamps

    def _stamp(self) -> None:
        n = self.size
        self.mass, self.mass_load = np.zeros((n, n)), np.zeros((n, 3))
        self.stiffness, self.load = np.zeros((n, n)), np.zeros((n, 3))
        for a, b, ohms in self.parts.resistors:
            self._two_pole(self.stiffness, self.load, a, b, 1.0 / ohms)
        for a, b, farads in self.parts.capacitors:
            self._two_pole(self.mass, self.mass_load, a, b, farads)
        self._stamp_ports()
        for k, inductor in enumerate(self.parts.inductors):
            self._stamp_inductor(self.first_inductor + k, *inductor)
        self._stamp_junctions()
        for k in range(len(self.parts.opamps)):
            self.mass[self.first_opamp + k, self.first_opamp + k] = 1.0

    def _stamp_ports(self) -> None:
        circuit = self.circuit
        if circuit.output_load_ohms is not None:
            node = self.merged[circuit.output_node]
            self._two_pole(self.stiffness, self.load, node, GROUND, 1.0 / circuit.output_load_ohms)
        if circuit.input_ohms > 0.0:
            self._behind(circuit.input_node, circuit.input_ohms, np.array([0.0, 0.0, 1.0]))
        supply = circuit.supply
        if supply is not None and supply.ohms > 0.0 and not self.open_supply:
            self._behind(supply.node, supply.ohms, np.array([0.0, supply.volts, 0.0]))

    def _behind(self, node: str, ohms: float, source: np.ndarray) -> None:
        """A source (constant, per supply, per take) behind a resistance."""
        node = self.merged[node]
        self._two_pole(self.stiffness, self.load, node, GROUND, 1.0 / ohms)
        row, scale, _ = self._place(node)
        if row >= 0:
            self.load[row] -= scale * source / ohms

    def _two_pole(self, matrix: np.ndarray, load: np.ndarray, a: str, b: str, value: float) -> None:
        ends = [(self._place(a), 1.0), (self._place(b), -1.0)]
        for (row, row_scale, _), row_sign in ends:
            if row < 0:
                continue
            for (col, scale, offset), sign in ends:
                if col >= 0:
                    matrix[row, col] += row_sign * row_scale * value * sign * scale
                load[row] += row_sign * row_scale * value * sign * offset

    def _stamp_inductor(self, row: int, a: str, b: str, henries: float, ohms: float) -> None:
        self.mass[row, row] = henries
        self.stiffness[row, row] = ohms
        for name, sign in ((a, 1.0), (b, -1.0)):
            col, scale, offset = self._place(name)
            self.load[row] -= sign * offset
            if col >= 0:
                self.stiffness[row, col] -= sign * scale
                self.stiffness[col, row] += sign * scale

    def _stamp_junctions(self) -> None:
        count = len(self.parts.junctions)
        self.junction_index = np.full((count, 2), -1)
        self.junction_gain, self.junction_row = np.zeros((count, 2)), np.zeros((count, 2))
        self.junction_offset = np.zeros((count, 3))
        inner = self.free_count
        for k, junction in enumerate(self.parts.junctions):
            if junction.series_ohms > 0.0:
                self._inner_junction(k, inner, junction)
                inner += 1
            else:
                self._outer_junction(k, junction)

    def _outer_junction(self, k: int, junction: Junction) -> None:
        a, b = junction.pins
        share = 1.0 / junction.count
        self._two_pole(self.stiffness, self.load, a, b, JUNCTION_CONDUCTANCE * share)
        if junction.capacitance:
            self._two_pole(self.mass, self.mass_load, a, b, junction.capacitance * share)
        for side, (name, sign) in enumerate(((a, 1.0), (b, -1.0))):
            col, scale, offset = self._place(name)
            self.junction_index[k, side] = col
            self.junction_gain[k, side] = sign * scale * share
            self.junction_row[k, side] = sign * scale
            self.junction_offset[k] += sign * share * offset

    def _inner_junction(self, k: int, inner: int, junction: Junction) -> None:
        """The unknown ``inner`` is the voltage of one junction; i = (v/count − vj)/RS flows through all."""
        g, share = 1.0 / junction.series_ohms, 1.0 / junction.count
        self.junction_index[k, 0] = inner
        self.junction_gain[k, 0] = self.junction_row[k, 0] = 1.0
        self.mass[inner, inner] = junction.capacitance
        self.stiffness[inner, inner] += g + JUNCTION_CONDUCTANCE
        a, b = junction.pins
        self._two_pole(self.stiffness, self.load, a, b, g * share)
        for name, sign in ((a, 1.0), (b, -1.0)):
            col, scale, offset = self._place(name)
            self.load[inner] -= sign * g * share * offset
            if col >= 0:
                self.stiffness[inner, col] -= sign * scale * g * share
                self.stiffness[col, inner] -= sign * scale * g

    # ------------------------------------------------------------ replaced rows

    def _groups(self, *, by_inductors: bool, by_capacitors: bool) -> list[list[str]]:
        """Sets of nodes that hang together, those with ground left out, as lists of free nodes."""
        groups = Groups(self.names)
        parts = self.parts
        pairs: list[tuple[str, ...]] = [pins[:2] for pins in parts.resistors]
        pairs += [j.pins for j in parts.junctions] + [pins for pins, _ in parts.bipolars]
        pairs += [(pins[0], pins[2]) for pins, _ in parts.channels]
        pairs += [pins[2:] for _, pins, _ in parts.opamps]
        pairs += [c[:2] for c in parts.capacitors] if by_capacitors else []
        pairs += [c[:2] for c in parts.inductors] if by_inductors else []
        for name, term in self.potentials.of.items():
            pairs.append((GROUND if term.root is None else term.root, name))
        pairs += [(GROUND, name) for name in self._grounded()]
        for pins in pairs:
            groups.join(pins)
        found: dict[str, list[str]] = {}
        for name in self.column:
            root = groups.find(name)
            if root != groups.find(GROUND):
                found.setdefault(root, []).append(name)
        return list(found.values())

    def _grounded(self) -> list[str]:
        circuit = self.circuit
        names = [self.merged[circuit.input_node]]
        if circuit.output_load_ohms is not None:
            names.append(self.merged[circuit.output_node])
        if circuit.supply is not None:
            names.append(self.merged[circuit.supply.node])
            names += [self.merged[rail] for rail, _ in circuit.supply.rails]
        return names

    def _inductor_cutsets(self) -> list[tuple[int, np.ndarray, np.ndarray]]:
        """Nodes joined to the rest by inductors alone: their currents sum to zero, so do their rates (index 1).

        A set joined to nothing at all is put at zero volts.
        """
        rows = []
        for group in self._groups(by_inductors=False, by_capacitors=True):
            row, load = np.zeros(self.size), np.zeros(3)
            columns = [self.column[name] for name in group]
            for k, (_, _, henries, _) in enumerate(self.parts.inductors):
                branch = self.first_inductor + k
                into = self.stiffness[columns, branch].sum()
                row += into / henries * self.stiffness[branch]
                load += into / henries * self.load[branch]
            if not row.any():
                row[columns[0]] = 1.0
            rows.append((columns[0], row, load))
        return rows

    def _floating_charges(self) -> list[tuple[int, np.ndarray, np.ndarray]]:
        """Nodes with no DC path to ground hold zero net charge; joined to nothing at all, zero volts."""
        rows = []
        for group in self._groups(by_inductors=True, by_capacitors=False):
            columns = [self.column[name] for name in group]
            row, load = self.mass[columns].sum(axis=0), self.mass_load[columns].sum(axis=0)
            if not np.abs(row).max() > 1e-9 * np.abs(self.mass[columns]).max(initial=1e-30):
                row, load = np.zeros(self.size), np.zeros(3)
                row[columns[0]] = 1.0
            rows.append((columns[0], row, load))
        return rows

    def _inductor_loops(self) -> list[tuple[int, np.ndarray, np.ndarray]]:
        """A loop of ideal inductors holds zero flux."""
        rows = []
        kept: list[int] = []
        for k, (_, _, henries, ohms) in enumerate(self.parts.inductors):
            branch = self.first_inductor + k
            if ohms > 0.0:
                continue
            voltage = self.stiffness[branch, : self.free_count]
            others = self.stiffness[kept, : self.free_count].T
            weights = np.linalg.lstsq(others, voltage, rcond=None)[0] if kept else np.zeros(0)
            if np.abs(voltage - (others @ weights if kept else 0.0)).max(initial=0.0) > 1e-9:
                kept.append(branch)
                continue
            row = np.zeros(self.size)
            row[branch] = henries
            row[kept] = -weights * np.array([self.mass[b, b] for b in kept])
            rows.append((branch, row, np.zeros(3)))
        return rows

    # ------------------------------------------------------------ tables

    def _system(self, overrides: list[tuple[int, np.ndarray, np.ndarray]]) -> System:
        places = [self._place(name) for name in self.names]
        mass, mass_load = self.mass.copy(), self.mass_load[:, _TAKE].copy()
        for row, _, _ in overrides:
            mass[row] = 0.0
            mass_load[row] = 0.0
        parts = self.parts
        return System(
            mass=mass,
            mass_load=mass_load,
            stiffness=self.stiffness,
            load=self.load,
            node_index=np.array([p[0] for p in places]),
            node_scale=np.array([p[1] for p in places]),
            node_offset=np.array([p[2] for p in places]).reshape(-1, 3),
            junction_index=self.junction_index,
            junction_gain=self.junction_gain,
            junction_row=self.junction_row,
            junction_offset=self.junction_offset,
            junction_law=_table([j.law for j in parts.junctions], 5),
            bipolar_node=self._nodes([pins for pins, _ in parts.bipolars], 3),
            bipolar_law=_table([law for _, law in parts.bipolars], 7),
            channel_node=self._nodes([pins for pins, _ in parts.channels], 3),
            channel_law=_table([law for _, law in parts.channels], 4),
            opamp_node=self._nodes([pins for _, pins, _ in parts.opamps], 5),
            opamp_index=self.first_opamp + np.arange(len(parts.opamps)),
            opamp_law=_table([law for _, _, law in parts.opamps], 8),
            override_row=np.array([row for row, _, _ in overrides], dtype=np.int64),
            override=_table([row for _, row, _ in overrides], self.size),
            override_load=_table([load for _, _, load in overrides], 3),
        )

    def _nodes(self, pins: Sequence[Sequence[str]], width: int) -> np.ndarray:
        rows = [[self.number[name] for name in row] for row in pins]
        return np.array(rows, dtype=np.int64).reshape(-1, width)


def _table(rows: Sequence[Sequence[float]], width: int) -> np.ndarray:
    return np.ascontiguousarray(np.array(rows, dtype=float).reshape(-1, width))
