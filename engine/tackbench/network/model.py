"""A circuit's network, derived once: elements, equations, state, devices."""

from __future__ import annotations

from dataclasses import dataclass

from tackbench.circuit import Circuit
from tackbench.devices.bank import DeviceBank, device_bank
from tackbench.network.assembly import Assembly, assemble
from tackbench.network.elements import take_apart
from tackbench.network.state import StateEquations, state_equations


@dataclass(frozen=True)
class NetworkModel:
    """The equations of a circuit and its devices."""

    assembly: Assembly
    state: StateEquations
    bank: DeviceBank


def network_model(circuit: Circuit) -> NetworkModel:
    """Derive the network of ``circuit``."""
    elements = take_apart(circuit)
    assembly = assemble(elements)
    bank = device_bank(
        [
            (device.ref, device.law, device.constants, device.limits, device.steady_constants)
            for device in elements.devices
        ]
    )
    return NetworkModel(assembly, state_equations(assembly), bank)
