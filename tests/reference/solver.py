"""The reference solver's face: operating point, small-signal response and transient of one circuit."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from tackbench.circuit import Circuit

from . import radau
from .drive import Drive, fit, slope, volts
from .operating import Rise, operating_unknowns
from .residual import System, evaluate
from .system import Equations

RELATIVE_TOLERANCE = 1e-9
ABSOLUTE_TOLERANCE_VOLTS = 1e-11
_AMPERES_PER_VOLT = 1e-3
_HALF_KERNEL = 22
_KERNEL_FINE = 512
_KERNEL_BETA = 15.57  # Kaiser's formula for 150 dB
_MOST_STEPS = 200_000_000


class NotSolvedError(RuntimeError):
    """The integrator gave up; the text says when and why."""


@dataclass(frozen=True)
class Transient:
    """A transient at ``times`` (s): ``output`` and ``nodes[name]`` in volts, ``supply_current`` in amperes out of the
    supply's source (None without a supply), and the integrator's ``counts``."""

    times: np.ndarray
    output: np.ndarray
    nodes: dict[str, np.ndarray]
    supply_current: np.ndarray | None
    counts: dict[str, int]


class ReferenceSolver:
    """Solves one circuit. Tolerances are of the integrator's embedded third-order estimate; the fifth-order result is
    better by orders of magnitude. ``absolute`` is in volts; currents of inductors count a thousandth of it."""

    def __init__(
        self, circuit: Circuit, *, relative: float = RELATIVE_TOLERANCE, absolute: float = ABSOLUTE_TOLERANCE_VOLTS
    ) -> None:
        self.circuit = circuit
        self.relative, self.absolute = relative, absolute
        self.equations = Equations(circuit)
        self.rise: Rise | None = None
        self._standing: np.ndarray | None = None
        self._supply_equations = Equations(circuit, open_supply=True) if circuit.supply is not None else None

    # ------------------------------------------------------------ operating point

    @property
    def standing(self) -> np.ndarray:
        """The unknowns at the operating point."""
        if self._standing is None:
            self._standing, self.rise = operating_unknowns(self.equations)
        return self._standing

    def operating_point(self) -> dict[str, float]:
        """Node voltages (V) with the take at zero. Raises NoOperatingPointError."""
        return {name: float(self._node(name, self.standing, 0.0)) for name in self.circuit.nodes()}

    def opamp_volts(self) -> dict[str, float]:
        """The op-amps' internal voltages w (V) at the operating point."""
        first = self.equations.first_opamp
        return {ref: float(self.standing[first + k]) for k, (ref, _, _) in enumerate(self.equations.parts.opamps)}

    def supply_current(self) -> float | None:
        """The current (A) out of the supply's source at the operating point; None without a supply."""
        if self._supply_equations is None:
            return None
        still = np.zeros_like(self.standing)
        return self._supply_amperes(self.standing, still, 0.0, 0.0)

    def _node(self, name: str, x: np.ndarray, u: float | np.ndarray) -> float | np.ndarray:
        """A node's voltage at unknowns ``x`` (…, n) and take ``u``."""
        system = self.equations.transient
        k = self.equations.number[self.equations.merged[name]]
        i, offset = system.node_index[k], system.node_offset[k]
        moving = system.node_scale[k] * x[..., i] if i >= 0 else 0.0
        return moving + offset[0] + offset[1] + offset[2] * u

    # ------------------------------------------------------------ small signal

    def _linearised(self, equations: Equations) -> np.ndarray:
        """dF/dx at the operating point."""
        F, J = np.zeros(equations.size), np.zeros((equations.size, equations.size))
        still = np.zeros_like(self.standing)
        x, _ = self._moved_to(equations, self.standing, still, 0.0, 0.0)
        evaluate(equations.transient, x, 0.0, 1.0, F, J, True)
        return J

    def _moved_to(
        self, other: Equations, x: np.ndarray, dx: np.ndarray, u: float, du: float
    ) -> tuple[np.ndarray, np.ndarray]:
        """The unknowns and their rates in the numbering of ``other``, the same circuit with a source left open."""
        full, rate = np.zeros(other.size), np.zeros(other.size)
        for name, column in other.column.items():
            full[column] = self._node(name, x, u)
            rate[column] = self._node(name, dx, du) - self._node(name, 0.0 * dx, 0.0)
        inner, own = other.free_count, self.equations.free_count
        full[inner:], rate[inner:] = x[own:], dx[own:]
        return full, rate

    def _driven(self) -> tuple[System, np.ndarray, np.ndarray, np.ndarray]:
        """(system, −dF/dx, mass, right-hand side) of the small-signal equations for one volt of take.

        An ideal take is left open and its node's row says that it stands at one volt.
        """
        if self.circuit.input_ohms > 0.0:
            system = self.equations.transient
            right = -system.load[:, 2]
            right[system.override_row] = -system.override_load[:, 2]
            return system, -self._linearised(self.equations), system.mass, right
        opened = Equations(self.circuit, open_take=True)
        system = opened.transient
        k = opened.number[opened.merged[self.circuit.input_node]]
        row = system.node_index[k]
        matrix, mass, right = -self._linearised(opened), system.mass.copy(), np.zeros(opened.size)
        matrix[row], mass[row] = 0.0, 0.0
        matrix[row, row], right[row] = system.node_scale[k], 1.0
        return system, matrix, mass, right

    def response(self, frequencies: Sequence[float] | np.ndarray) -> np.ndarray:
        """Small-signal output volts per take volt, complex, at ``frequencies`` (Hz)."""
        system, stiffness, mass, right = self._driven()
        k = self.equations.number[self.equations.merged[self.circuit.output_node]]
        i, scale = system.node_index[k], system.node_scale[k]
        found = []
        for frequency in np.asarray(frequencies, dtype=float):
            matrix = 2j * np.pi * frequency * mass + stiffness
            weights = 1.0 / np.max(np.abs(matrix), axis=1)
            x = np.linalg.solve(matrix * weights[:, None], right * weights)
            found.append(scale * x[i] if i >= 0 else 0.0)
        return np.array(found, dtype=complex)

    def natural_frequencies(self) -> np.ndarray:
        """The finite natural frequencies (complex, 1/s) at the operating point; a positive real part grows."""
        from scipy.linalg import eigvals

        J = self._linearised(self.equations)
        alpha, beta = eigvals(J, self.equations.transient.mass, homogeneous_eigvals=True)
        finite = np.abs(beta) > 1e-25 * np.abs(alpha)
        return alpha[finite] / beta[finite]

    # ------------------------------------------------------------ transient

    def transient(
        self,
        drive: Callable[[np.ndarray], np.ndarray],
        times: Sequence[float] | np.ndarray,
        nodes: Sequence[str] = (),
        largest_step: float = 20e-6,
    ) -> Transient:
        """From the settled operating point at 0 s to the rising ``times`` (s); ``drive`` takes and gives arrays."""
        times = np.ascontiguousarray(times, dtype=float)
        take = fit(drive, float(times[-1]))
        x, slopes, counts = self._march(take, times, float(times[-1]), largest_step, _no_sampling())
        u = np.array([volts(take, t) for t in times])
        currents = None
        if self._supply_equations is not None:
            du = [slope(take, t) for t in times]
            currents = np.array([self._supply_amperes(*row) for row in zip(x, slopes, u, du, strict=True)])
        wanted = {name: np.broadcast_to(self._node(name, x, u), times.shape) for name in nodes}
        output = np.broadcast_to(self._node(self.circuit.output_node, x, u), times.shape)
        return Transient(times, output, wanted, currents, counts)

    def render(
        self,
        drive: Callable[[np.ndarray], np.ndarray],
        frames: int,
        rate: float = 48000.0,
        largest_step: float | None = None,
    ) -> tuple[np.ndarray, dict[str, int]]:
        """``frames`` band-limited samples of the output at ``rate`` (flat to 0.38·rate), sample k at k/rate seconds.

        The output is projected on a windowed sinc by the integrator's own quadrature, step by step, so nothing is
        point-sampled and nothing aliases. Before 0 s the output is its operating value; the take is zero after its
        end only if ``drive`` says so.
        """
        samples = np.zeros(frames)
        stop = (frames + _HALF_KERNEL) / rate
        longest = largest_step or 1.0 / (16.0 * rate)
        sampling = (samples, float(rate), kernel(), float(_HALF_KERNEL), float(_KERNEL_FINE))
        _, _, counts = self._march(fit(drive, stop), np.zeros(0), stop, longest, sampling)
        rest = float(self._node(self.circuit.output_node, self.standing, 0.0))
        return samples + rest, counts

    def _march(self, take: Drive, times: np.ndarray, stop: float, longest: float, sampling: tuple):
        n = self.equations.size
        system = self.equations.transient
        k = self.equations.number[self.equations.merged[self.circuit.output_node]]
        output = (int(system.node_index[k]), float(system.node_scale[k]), float(system.node_offset[k, 2]))
        floor = np.full(n, self.absolute)
        floor[self.equations.first_inductor : self.equations.first_opamp] *= _AMPERES_PER_VOLT
        states, slopes = np.zeros((len(times), n)), np.zeros((len(times), n))
        stats = np.zeros(5, dtype=np.int64)
        limits = (self.relative, longest, _MOST_STEPS)
        code, at = radau.integrate(
            system, take, self.standing, (0.0, stop), times, states, slopes, limits, floor, output, sampling, stats
        )
        if code != radau.DONE:
            reason = "the step became too small" if code == radau.STEP_TOO_SMALL else "too many steps"
            raise NotSolvedError(f"{self.circuit.title}: {reason} at {at:.9f} s")
        names = ("steps", "rejected", "failed", "factored", "iterations")
        return states, slopes, dict(zip(names, stats.tolist(), strict=True))

    def _supply_amperes(self, x: np.ndarray, dx: np.ndarray, u: float, du: float) -> float:
        """The current (A) that the supply's source must give: the row of its node without the source."""
        opened = self._supply_equations
        system = opened.transient
        full, rate = self._moved_to(opened, x, dx, u, du)
        F = np.zeros(opened.size)
        evaluate(system, full, u, 1.0, F, np.zeros((1, 1)), False)
        k = opened.number[opened.merged[self.circuit.supply.node]]
        row = system.node_index[k]
        return float((system.mass[row] @ rate + system.mass_load[row] * du - F[row]) / system.node_scale[k])


def kernel() -> np.ndarray:
    """A Kaiser-windowed sinc of 44 samples, 512 points a sample, of unit area: −150 dB, edges at 0.5 ± 0.112."""
    from scipy.special import i0

    points = np.arange(-1, 2 * _HALF_KERNEL * _KERNEL_FINE + 3) / _KERNEL_FINE - _HALF_KERNEL
    inside = np.clip(1.0 - (points / _HALF_KERNEL) ** 2, 0.0, None)
    table = np.sinc(points) * i0(_KERNEL_BETA * np.sqrt(inside)) / i0(_KERNEL_BETA)
    table[np.abs(points) > _HALF_KERNEL] = 0.0
    return table / (table.sum() / _KERNEL_FINE)


def _no_sampling() -> tuple:
    return np.zeros(0), 0.0, np.zeros(8), 0.0, 1.0
