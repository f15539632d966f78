"""The operating point: where the circuit rests before the take begins."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from tackbench.circuit import Circuit
from tackbench.devices import opamp
from tackbench.devices.bank import DeviceBank
from tackbench.devices.table import LAWS
from tackbench.devices.trace import NUMBERS
from tackbench.errors import WorkError
from tackbench.network.margins import margin_warnings
from tackbench.network.model import NetworkModel, network_model
from tackbench.network.newton import newton
from tackbench.network.steady import SteadyEquations, steady_equations

_LEAKS = (1e-3, 1e-4, 1e-5, 1e-6, 1e-7, 1e-8, 1e-9, 1e-10, 1e-11, 1e-12)


@dataclass(frozen=True)
class OperatingPoint:
    """Node voltages (V, by node name), op-amp output voltages (V, by designator), the current out of the supply (A,
    None without one), and the solver's own variables at rest: controls ``c``, currents ``j`` and state ``X``."""

    node_volts: Mapping[str, float]
    opamp_out: Mapping[str, float]
    supply_current: float | None
    warnings: tuple[str, ...]
    c: np.ndarray
    j: np.ndarray
    X: np.ndarray


def operating_point(circuit: Circuit | object) -> OperatingPoint:
    """The resting voltages and currents of a circuit (or of a variant's circuit).

    Damped Newton from zero; where that fails, or where there are several, the supply is raised in steps, then
    conductances to ground are taken away in steps. Raises WorkError when none of these finds it.
    """
    return settle(network_model(as_circuit(circuit)))


def as_circuit(circuit: Circuit | object) -> Circuit:
    """The circuit itself, also of a variant."""
    inner = getattr(circuit, "circuit", circuit)
    if not isinstance(inner, Circuit):
        raise TypeError(f"a Circuit or a Variant is needed, not {type(circuit).__name__}")
    return inner


def settle(model: NetworkModel) -> OperatingPoint:
    """The operating point of a network model."""
    equations = steady_equations(model.assembly)
    c, warnings = solve_at_rest(model, equations)
    j, _ = model.bank.evaluate(c)
    unknown = equations.solved @ np.concatenate([[1.0], c, j])
    free = unknown[: equations.nodes]
    currents = unknown[equations.nodes : equations.nodes + equations.inductors]
    internals = unknown[equations.nodes + equations.inductors :]
    state, assembly = model.state, model.assembly
    steady = np.array([0.0, 1.0])
    X = np.concatenate(
        [
            state.charge_map @ free + state.charge_map_drive @ steady,
            currents[list(state.independent)],
            internals,
        ]
    )
    volts = assembly.T @ free + assembly.Tu @ steady
    elements = assembly.elements
    node_volts = {
        name: float(volts[place]) if place >= 0 else 0.0
        for name, place in elements.place.items()
        if name == "0" or name in set(elements.circuit.nodes())
    }
    outputs = {part.ref: node_volts[part.pin("out")] for part in elements.circuit.parts if part.kind == "opamp"}
    supply = _supply_current(model, volts, currents, internals, j)
    warnings += margin_warnings(elements.circuit, node_volts)
    return OperatingPoint(node_volts, outputs, supply, warnings, c, j, X)


_FAR = 20.0  # of a control's scale: a start that an amplifier takes for full drive

SEVERAL = (
    "this circuit can rest in more than one way; it is taken to rest where it comes to as the supply rises from zero"
)


def solve_at_rest(model: NetworkModel, equations: SteadyEquations) -> tuple[np.ndarray, tuple[str, ...]]:
    """Control voltages at rest, and a warning where there is more than one solution.

    Resistors and junctions have one; with amplifying devices there may be several. Other starts that end elsewhere
    tell so (not every one is found); then the one that counts is followed from a supply of zero.
    """
    bank = model.bank
    if not bank.controls:
        return np.zeros(0), ()
    start = np.zeros(bank.controls)
    found = newton(bank, equations.Y, equations.N, equations.r, start, 1.0)
    several = False
    if found is not None and any(len(LAWS[law].controls) > 1 for law in bank.laws):
        starts = [found + far * bank.scales for far in (-_FAR, _FAR)]
        others = [newton(bank, equations.Y, equations.N, equations.r, other, 1.0) for other in starts]
        several = any(_apart(bank, found, other) for other in others)
    if found is None or several:
        risen = _raise_supply(bank, equations)
        several = several or (found is not None and risen is not None and _apart(bank, found, risen))
        found = found if risen is None else risen
    if found is None:
        found = _lower_leaks(model)
    if found is None:
        raise WorkError(f"no operating point was found for {model.assembly.elements.circuit.title!r}")
    return found, (SEVERAL,) if several else ()


def _apart(bank: DeviceBank, one: np.ndarray, other: np.ndarray | None) -> bool:
    """Whether a second solution was found that differs by more than the devices' own bends."""
    return other is not None and bool(np.max(np.abs(one - other) / bank.scales) > 1.0)


def _raise_supply(bank: DeviceBank, equations: SteadyEquations) -> np.ndarray | None:
    """Follow the solution while every steady source rises from zero, in steps that shrink where it is hard."""
    c: np.ndarray | None = newton(
        bank, equations.Y, equations.N, 0.0 * equations.r, np.zeros(bank.controls), 0.0, 200
    )
    level, step = 0.0, 1.0 / 64
    while c is not None and level < 1.0:
        target = min(1.0, level + step)
        trial = newton(bank, equations.Y, equations.N, target * equations.r, c, target)
        if trial is not None:
            c, level, step = trial, target, min(2.0 * step, 1.0 / 16)
        elif step < 1e-5:
            return None
        else:
            step *= 0.25
    return c


def _lower_leaks(model: NetworkModel) -> np.ndarray | None:
    """Start with a conductance from every node to ground and take it away decade by decade."""
    c = np.zeros(model.bank.controls)
    for leak in (*_LEAKS, 0.0):
        equations = steady_equations(model.assembly, leak)
        trial = newton(model.bank, equations.Y, equations.N, equations.r, c, 1.0, 200)
        if trial is None:
            return None
        c = trial
    return c


def _supply_current(
    model: NetworkModel, volts: np.ndarray, inductors: np.ndarray, internals: np.ndarray, j: np.ndarray
) -> float | None:
    """Current out of the supply: what leaves its node, plus what each rail's load draws through its converter."""
    elements = model.assembly.elements
    supply = elements.circuit.supply
    if supply is None:
        return None
    weights = {supply.node: 1.0, **dict(supply.rails)}
    if supply.ohms > 0:
        live = elements.node(supply.node)
        return float((supply.volts - (volts[live] if live >= 0 else 0.0)) / supply.ohms)
    total = 0.0
    for name, ratio in weights.items():
        total += ratio * _leaving(model, elements.node(name), volts, inductors, internals, j)
    return total


def _leaving(
    model: NetworkModel,
    node: int,
    volts: np.ndarray,
    inductors: np.ndarray,
    internals: np.ndarray,
    j: np.ndarray,
) -> float:
    """Current that leaves ``node`` at rest through everything but ideal sources, amperes."""
    elements = model.assembly.elements

    def at(place: int) -> float:
        return float(volts[place]) if place >= 0 else 0.0

    total = 0.0
    for branch in elements.conductances:
        total += branch.value * (at(branch.a) - at(branch.b)) * ((branch.a == node) - (branch.b == node))
    for branch, current in zip(elements.inductors, inductors, strict=True):
        total += current * ((branch.a == node) - (branch.b == node))
    for place, internal, siemens in elements.outputs:
        total += siemens * (at(place) - internals[internal]) * (place == node)
    leaving = [nodes.get(node, 0.0) for device in elements.devices for nodes, _ in device.currents]
    total += float(np.dot(leaving, j))
    for index, part in enumerate(part for part in elements.circuit.parts if part.kind == "opamp"):
        total += _draw(model, part.ref, index, node, at, internals)
    return total


def _draw(model: NetworkModel, ref: str, index: int, node: int, at: object, internals: np.ndarray) -> float:
    """What an op-amp on fixed rails draws from ``node``; on live rails its law is among the devices already."""
    elements = model.assembly.elements
    part = next(part for part in elements.circuit.parts if part.ref == ref)
    if any(device.ref == ref and "positive rail" in device.law.currents for device in elements.devices):
        return 0.0
    _, _, out, high, low = (elements.node(name) for name in part.pins)
    if node not in (high, low):
        return 0.0
    parameters = part.parameters
    across = [internals[index] - at(out)]  # type: ignore[operator]
    if "output_current" in parameters:
        constants = (parameters["output_current"], parameters["output_ohms"], parameters["supply_current"])
        positive, negative = opamp.limited_output_draws(NUMBERS, across, constants)[1:]
    else:
        positive, negative = opamp.rail_draws(
            NUMBERS, across, (parameters["output_ohms"], parameters["supply_current"])
        )
    return float(positive * (node == high) - negative * (node == low))
