"""The circuit for small signals: its equations made linear, exactly, at the operating point."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from tackbench.circuit import Circuit
from tackbench.network.elements import TAKE
from tackbench.network.model import NetworkModel, network_model
from tackbench.network.operating_point import OperatingPoint, as_circuit, settle


@dataclass(frozen=True)
class SmallSignal:
    """dX/dt = A X + b u, all node voltages = C X + d u; u is the take (V); all are deviations from rest."""

    A: np.ndarray
    b: np.ndarray
    C: np.ndarray
    d: np.ndarray
    output: int

    def poles(self) -> np.ndarray:
        """Natural frequencies (radians per second); a positive real part means that the stage oscillates."""
        return np.asarray(np.linalg.eigvals(self.A))

    def transfer(self, frequencies: np.ndarray, node: int) -> np.ndarray:
        """Voltage of ``node`` per volt of the take at ``frequencies`` (hertz), complex, shape (frequencies,)."""
        if node < 0:
            return np.zeros(len(frequencies), dtype=complex)
        n = len(self.A)
        direct = np.full(len(frequencies), self.d[node], dtype=complex)
        if n == 0:
            return direct
        systems = 2j * np.pi * frequencies[:, None, None] * np.eye(n) - self.A
        states = np.linalg.solve(systems, np.broadcast_to(self.b[:, None], (len(frequencies), n, 1)))[..., 0]
        return np.asarray(states @ self.C[node] + direct)


def small_signal(model: NetworkModel, rest: OperatingPoint) -> SmallSignal:
    """Make the equations of ``model`` linear at ``rest``."""
    state, K = model.state, model.state.controls
    _, slopes = model.bank.evaluate(rest.c)
    root = state.F[:, :K] + state.F[:, K:] @ slopes
    c_X = np.linalg.solve(root, state.R) if K else np.zeros((0, state.states))
    c_u = np.linalg.solve(root, state.S[:, TAKE]) if K else np.zeros(0)
    s_of_c = np.vstack([np.eye(K), slopes])
    return SmallSignal(
        A=state.A + state.B @ s_of_c @ c_X,
        b=state.E[:, TAKE] + state.B @ s_of_c @ c_u,
        C=state.nodes_X + state.nodes_s @ s_of_c @ c_X,
        d=state.nodes_U[:, TAKE] + state.nodes_s @ s_of_c @ c_u,
        output=model.assembly.elements.node(model.assembly.elements.circuit.output_node),
    )


FASTEST_HARMLESS_GROWTH = 1.0
"""Per second: what grows more slowly than this is rounding or takes longer than anybody waits."""


def natural_frequencies(circuit: Circuit | object) -> np.ndarray:
    """The circuit's natural frequencies at its operating point, complex, in radians per second."""
    model = network_model(as_circuit(circuit))
    return small_signal(model, settle(model)).poles()


def stability_warnings(model: NetworkModel, rest: OperatingPoint) -> tuple[str, ...]:
    """A sentence when the circuit does not stay at its operating point by itself."""
    poles = small_signal(model, rest).poles()
    growing = poles[poles.real > FASTEST_HARMLESS_GROWTH]
    if len(growing) == 0:
        return ()
    worst = growing[int(np.argmax(growing.real))]
    hertz = abs(worst.imag) / (2 * np.pi)
    if hertz > 0.0:
        size = f"{hertz / 1e3:.3g} kHz" if hertz >= 1e3 else f"{hertz:.3g} Hz"
        return (f"this stage oscillates by itself, at first near {size}: expect that in the sound",)
    return ("this stage does not stay at its resting voltages: it tips over by itself as soon as it is touched",)


def response(circuit: Circuit | object, frequencies: Sequence[float] | np.ndarray) -> np.ndarray:
    """Small-signal response, output volts per volt of the take, complex, shape of ``frequencies`` (hertz)."""
    model = network_model(as_circuit(circuit))
    linear = small_signal(model, settle(model))
    wanted = np.asarray(frequencies, dtype=float)
    return linear.transfer(wanted.ravel(), linear.output).reshape(wanted.shape)
