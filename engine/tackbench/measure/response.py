"""What a circuit does to small signals: gain, corners, third octaves, impedances, from its linearised equations."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from tackbench.circuit import Circuit, Part
from tackbench.network import response

LOWEST, HIGHEST, POINTS = 1.0, 200e3, 1201
"""The span that corners are looked for in, in hertz, and how many points (more than 220 a decade)."""


@dataclass(frozen=True)
class Corners:
    """Gains in dB, frequencies in Hz; a corner is None where the gain stays within 3 dB to that end of the span."""

    gain_db_1khz: float
    peak_db: float
    peak_hz: float
    low_hz: float | None
    high_hz: float | None


def frequencies() -> NDArray[np.float64]:
    """The frequencies in Hz to ask a response at, evenly spaced in logarithm."""
    return np.geomspace(LOWEST, HIGHEST, POINTS)


def corners(hertz: NDArray[np.float64], response: NDArray[np.complex128]) -> Corners | None:
    """The corners 3.01 dB (half power) below the peak, interpolated; None when nothing comes through at all."""
    size = np.abs(response)
    if not np.any(size > 0):
        return None
    level = 20 * np.log10(np.maximum(size, 1e-300))
    peak = int(np.argmax(level))
    edge = level[peak] - 10 * math.log10(2)
    return Corners(
        gain_db_1khz=float(np.interp(math.log(1000.0), np.log(hertz), level)),
        peak_db=float(level[peak]),
        peak_hz=float(hertz[peak]),
        low_hz=_crossing(hertz[peak::-1], level[peak::-1], edge),
        high_hz=_crossing(hertz[peak:], level[peak:], edge),
    )


def _crossing(hertz: NDArray[np.float64], level: NDArray[np.float64], edge: float) -> float | None:
    """Where the level first falls below the edge, going along the arrays."""
    below = np.flatnonzero(level < edge)
    if below.size == 0:
        return None
    after = int(below[0])
    share = (level[after - 1] - edge) / (level[after - 1] - level[after])
    return float(hertz[after - 1] * (hertz[after] / hertz[after - 1]) ** share)


@dataclass(frozen=True)
class ThirdOctave:
    """A band by its nominal and exact mid-band frequency (hertz), the gain there (dB) and the phase (degrees)."""

    nominal_hz: float
    exact_hz: float
    gain_db: float
    phase_degrees: float


_NOMINAL = (1.0, 1.25, 1.6, 2.0, 2.5, 3.15, 4.0, 5.0, 6.3, 8.0)  # of a decade, ISO 266


def third_octaves(circuit: Circuit) -> list[ThirdOctave]:
    """Gain and phase at the thirty-one mid-band frequencies from 20 Hz to 20 kHz.

    Exact frequencies 1000 * 10^(n/10), as IEC 61260-1 has them for base ten. Where nothing comes through the gain is
    -inf dB.
    """
    numbers = np.arange(-17, 14)
    exact = 1000.0 * 10.0 ** (numbers / 10.0)
    gains = response(circuit, exact)
    with np.errstate(divide="ignore"):
        levels = 20 * np.log10(np.abs(gains))
    phases = np.degrees(np.unwrap(np.angle(gains)))
    return [
        ThirdOctave(_nominal(int(number)), float(hertz), float(level), float(phase))
        for number, hertz, level, phase in zip(numbers, exact, levels, phases, strict=True)
    ]


def _nominal(number: int) -> float:
    decade, place = divmod(number, 10)
    return float(f"{_NOMINAL[place] * 10.0 ** (3 + decade):.6g}")


_PROBE, _PROBE_OHMS, _COUPLING_FARADS, _CHOKE_HENRIES = "probe", 1e6, 1e3, 1e12


def impedances(circuit: Circuit, hertz: NDArray[np.float64]) -> tuple[NDArray[np.complex128], NDArray[np.complex128]]:
    """Input and output impedance (ohms, complex) at ``hertz``, for small signals at the stage's own operating point.

    The input's: what a source sees at the jack's node; the input's own series resistance is not part of it. The
    output's: what a load sees, the take silent behind its series resistance and the stage's own load taken away. A
    probe of one megohm is coupled to the node by a capacitor, so that nothing shifts the resting voltages; what
    stands at the node only to be taken away is subtracted as an admittance.
    """
    return _seen(circuit, circuit.input_node, circuit.input_ohms, hertz), _seen(
        circuit, circuit.output_node, circuit.output_load_ohms, hertz
    )


def _seen(circuit: Circuit, node: str, own_ohms: float | None, hertz: NDArray[np.float64]) -> NDArray[np.complex128]:
    """The impedance at ``node`` without ``own_ohms``, the jack's own resistor from it to ground."""
    at_input, at_output = node == circuit.input_node, node == circuit.output_node
    parts = [*circuit.parts, Part("probe", "capacitor", (_PROBE, node), _COUPLING_FARADS)]
    if circuit.input_ohms:
        parts.append(Part("source", "resistor", (circuit.input_node, "0"), circuit.input_ohms))
    elif at_input:  # an ideal source holds the node's direct voltage; a choke does so and lets the probe see past it
        parts.append(Part("source", "inductor", (circuit.input_node, "0"), _CHOKE_HENRIES))
    else:
        parts.append(Part("source", "wire", (circuit.input_node, "0")))
    if circuit.output_load_ohms and not (at_input and at_output):
        parts.append(Part("load", "resistor", (circuit.output_node, "0"), circuit.output_load_ohms))
    probed = replace(
        circuit,
        parts=tuple(parts),
        input_node=_PROBE,
        input_ohms=_PROBE_OHMS,
        output_node=_PROBE,
        output_load_ohms=None,
    )
    share = response(probed, hertz)
    admittance = (1 - share) / (_PROBE_OHMS * share)
    if own_ohms:
        admittance = admittance - 1 / own_ohms
    with np.errstate(divide="ignore"):
        return np.asarray(1 / admittance)
