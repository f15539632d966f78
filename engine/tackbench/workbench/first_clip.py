"""What clips first as the take gets louder: an estimate from the small-signal gains to every device.

For each device there is a voltage that its signal has to reach before it bends: an op-amp's output its nearer rail
limit, diodes (and MOSFETs with gate at drain, and rows of them) their voltage at ``KNEE_AMPERES``, a bipolar
transistor's base-emitter voltage kT/q and its collector what is left to its emitter, a field-effect transistor's gate
its distance to pinch-off and its drain what is left until the channel is a resistor.
Divided by the gain from the take to that voltage it is the
peak of a sine at which the device begins to bend. Nothing is said about how the others change once one bends, so only
the first few mean anything; a render or a sweep tells the rest.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from itertools import combinations
from math import inf, log, log1p, sqrt

import numpy as np

from tackbench.circuit import GROUND, Circuit, Part
from tackbench.devices.physics import saturation_current_at, thermal_volts
from tackbench.network.model import network_model
from tackbench.network.operating_point import OperatingPoint, settle
from tackbench.network.small_signal import small_signal

KNEE_AMPERES = 1e-4
"""A diode is taken to conduct from here: about where a pair behind a few kilohm begins to hold a signal down."""

SATURATION_VOLTS = 0.2
"""What a bipolar transistor needs from collector to emitter."""

_BODY_AMPERES = 1e-14  # of a MOSFET's body diode, by its law

FREQUENCIES = np.geomspace(100.0, 5_000.0, 36)
"""Hertz at which the gains are asked: where a guitar has its weight."""


@dataclass(frozen=True)
class Bend:
    """A device, the peak of the take in volts at which it begins to bend, where that is lowest (hertz), and what
    happens there in words."""

    ref: str
    take_volts: float
    hertz: float
    words: str


def bends(circuit: Circuit, rest: OperatingPoint | None = None) -> list[Bend]:
    """Every device that the take reaches, the first to bend first. Raises WorkError without an operating point."""
    model = network_model(circuit)
    settled = rest if rest is not None else settle(model)
    linear = small_signal(model, settled)
    places = model.assembly.elements.place
    gains: dict[str, np.ndarray] = {}

    def gain(node: str) -> np.ndarray:
        if node not in gains:
            gains[node] = linear.transfer(FREQUENCIES, places[node])
        return gains[node]

    found = []
    for item in _rooms(circuit, settled.node_volts):
        size = np.abs(gain(item.high) - (gain(item.low) if item.low else 0.0))
        best = int(np.argmax(size))
        if size[best] > 1e-6:
            found.append(
                Bend(item.ref, max(item.volts, 0.0) / float(size[best]), float(FREQUENCIES[best]), item.words)
            )
    return sorted(found, key=lambda bend: bend.take_volts)


@dataclass(frozen=True)
class _Room:
    """Volts that the signal at node ``high`` over node ``low`` ("" is none) may reach before ``words`` happens."""

    ref: str
    high: str
    low: str
    volts: float
    words: str


@dataclass(frozen=True)
class _Valve:
    """What conducts one way from ``forward`` volts on, and the other way from ``backward`` volts on: a diode, a
    string, a MOSFET with its gate at its drain, or several of them in a row."""

    ref: str
    plus: str
    minus: str
    forward: float
    backward: float

    def turned(self) -> _Valve:
        return _Valve(self.ref, self.minus, self.plus, self.backward, self.forward)


def _rooms(circuit: Circuit, volts: Mapping[str, float]) -> Iterator[_Room]:
    for part in circuit.parts:
        yield from _device_rooms(part, volts, circuit.temperature)
    for valve in _in_rows(circuit):
        across = volts[valve.plus] - volts[valve.minus]
        if valve.forward < inf:
            yield _Room(valve.ref, valve.plus, valve.minus, valve.forward - across, "conducts")
        if valve.backward < inf:
            yield _Room(valve.ref, valve.minus, valve.plus, valve.backward + across, "conducts the other way")


def _device_rooms(part: Part, volts: Mapping[str, float], kelvin: float) -> Iterator[_Room]:
    if part.kind == "opamp":
        out = volts[part.pin("out")]
        up = volts[part.pin("positive_rail")] - part.parameters["swing_high"] - out
        down = out - volts[part.pin("negative_rail")] - part.parameters["swing_low"]
        words = "meets both rails" if abs(up - down) < 0.05 else f"meets its {'upper' if up < down else 'lower'} rail"
        yield _Room(part.ref, part.pin("out"), "", min(up, down), words)
    elif part.kind == "bipolar":
        words = "bends: its base-emitter signal reaches kT/q"
        yield _Room(part.ref, part.pin("base"), part.pin("emitter"), thermal_volts(kelvin), words)
        left = abs(volts[part.pin("collector")] - volts[part.pin("emitter")]) - SATURATION_VOLTS
        yield _Room(part.ref, part.pin("collector"), part.pin("emitter"), left, "saturates")
    elif part.kind in ("jfet", "mosfet") and part.pin("gate") != part.pin("drain"):
        turn_on = part.parameters["pinch_off_volts" if part.kind == "jfet" else "threshold_volts"]
        over = part.polarity * (volts[part.pin("gate")] - volts[part.pin("source")] - turn_on)
        yield _Room(part.ref, part.pin("gate"), part.pin("source"), over, "closes its channel")
        left = abs(volts[part.pin("drain")] - volts[part.pin("source")]) - max(over, 0.0)
        yield _Room(part.ref, part.pin("drain"), part.pin("source"), left, "has its drain too near its source")


def _in_rows(circuit: Circuit) -> list[_Valve]:
    """The valves of the circuit; those that meet at a node where nothing else is are one valve in a row."""
    valves = [valve for part in circuit.parts for valve in _valves(part, circuit.temperature)]
    pins = Counter(pin for part in circuit.parts for pin in set(part.pins))
    pins.update([circuit.output_node, circuit.input_node, GROUND, GROUND, GROUND])
    merged = True
    while merged:
        merged = False
        for one, other in combinations(valves, 2):
            shared = {one.plus, one.minus} & {other.plus, other.minus}
            node = next((name for name in shared if pins[name] == 2), None)
            if node is not None and len(shared) == 1:
                first = one if one.minus == node else one.turned()
                second = other if other.plus == node else other.turned()
                row = _Valve(
                    f"{one.ref}+{other.ref}",
                    first.plus,
                    second.minus,
                    first.forward + second.forward,
                    first.backward + second.backward,
                )
                valves = [valve for valve in valves if valve not in (one, other)] + [row]
                merged = True
                break
    return valves


def _valves(part: Part, kelvin: float) -> Iterator[_Valve]:
    if part.kind == "diode":
        broken = part.count * _breakdown(part, kelvin)
        yield _Valve(part.ref, part.pin("anode"), part.pin("cathode"), _knee(part, kelvin), broken)
    elif part.kind == "mosfet" and part.pin("gate") == part.pin("drain"):
        over = sqrt(2.0 * KNEE_AMPERES / part.parameters["transconductance"])
        valve = _Valve(
            part.ref,
            part.pin("drain"),
            part.pin("source"),
            part.polarity * part.parameters["threshold_volts"] + over,
            thermal_volts(kelvin) * log1p(KNEE_AMPERES / _BODY_AMPERES),
        )
        yield valve if part.polarity > 0 else valve.turned()


def _breakdown(part: Part, kelvin: float) -> float:
    """Volts in reverse at which one diode of the string lets ``KNEE_AMPERES`` through; infinite without breakdown."""
    p = part.parameters
    if "breakdown_volts" not in p:
        return inf
    softness = p["breakdown_ideality"] * thermal_volts(kelvin)
    return float(max(p["breakdown_volts"] + softness * log(KNEE_AMPERES / p["breakdown_current"]), 0.0))


def _knee(part: Part, kelvin: float) -> float:
    """Volts of the whole string at ``KNEE_AMPERES``."""
    parameters = part.parameters
    current = saturation_current_at(
        parameters["saturation_current"],
        parameters["ideality"],
        parameters["band_gap"],
        parameters["temperature_exponent"],
        kelvin,
    )
    scale = parameters["ideality"] * thermal_volts(kelvin)
    return float(part.count * (scale * log1p(KNEE_AMPERES / current) + parameters["series_ohms"] * KNEE_AMPERES))
