"""The guitar in the circuit: what its pickup, pots and cable do to a stage that loads them, for a take already made.

A take was recorded with the guitar's knobs full up, through a cable into a recorder's input resistance. Its samples
are the volts v at the recorder's jack, so the loading by pots, cable and recorder is in them already; a stage with a
low input resistance, or a nonlinear one, loads the guitar otherwise. A filter ahead of the stage could not tell: what
a nonlinear input draws is not known before it is solved. So the guitar itself must stand in the circuit, and the
loading of the recording must not be counted twice.

Let P be the hot end of the pickup. Its coil (R and L in series, behind the string's voltage e), its capacitance and
all that the recording hung on it make one linear network, and so e = v + (R + sL) · v · Y, with Y the sum of the
admittances from P to ground when recorded. By Norton's theorem the source is a current v · (1/(R + sL) + Y) into P,
and the coil stands from P to ground. Now a branch of admittance y from the take (an ideal source of v) to P injects
v · y and loads P with y. Therefore, exactly and without any filter or derivative:

- what was there when the take was recorded and is there when it is played (coil, its capacitance, and with the knobs
  full up the pots and the cable too) stands from the take to P;
- what was there only when recorded (the recorder; with a knob turned down, the pot as it was) stands from the take to
  P too, and once more from P to ground with its sign reversed, which takes its load away again;
- what is there only when played (the pot as it is, the cable behind it, the stage) stands from P to ground, as built.

A take recorded into the very load that the stage presents comes out untouched, to the last digit. The sum of all
branches at P is what a real guitar has, so the negative ones make nothing unstable. What holds only as far as the
model goes: a linear coil of three elements without the losses of its metal parts, knobs full up when recorded, and
the figures of the pickup, which are rarely those of yours.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace
from typing import Any

from tackbench.circuit import GROUND, Circuit, Part
from tackbench.stage.tapers import TAPERS

END_OHMS = 20.0
"""Ohms that a guitar's pot keeps at its lower end (from memory)."""


@dataclass(frozen=True)
class Guitar:
    """The guitar as it is played, and how its take was recorded. ``pickup`` holds the parameters of a pickup entry,
    ``volume`` and ``tone`` the knobs (0 to 1, audio tapers); ``cable`` and ``recorded_cable`` are farads to ground
    behind the volume pot, ``recorded_into`` ohms."""

    pickup: Mapping[str, Any]
    volume: float
    tone: float
    cable: float
    recorded_cable: float
    recorded_into: float


def with_guitar(circuit: Circuit, guitar: Guitar) -> Circuit:
    """``circuit`` played by ``guitar``: the take drives the guitar's network, which takes the place of the input's
    series resistance."""
    taken = set(circuit.nodes())
    take, hot, inner = (_free(name, taken) for name in ("take", "pickup", "tone"))
    jack = circuit.input_node
    if guitar.volume >= 1.0:
        hot = jack
    parts = (*_coil(guitar, take, hot), *_pots(guitar, take, hot, jack), *_tone(guitar, take, hot, inner, taken))
    return replace(circuit, parts=(*parts, *circuit.parts), input_node=take, input_ohms=0.0)


def _free(name: str, taken: set[str]) -> str:
    """A node name that the stage does not use."""
    while name in taken:
        name += "'"
    taken.add(name)
    return name


def _coil(guitar: Guitar, take: str, hot: str) -> Iterator[Part]:
    pickup = guitar.pickup
    yield Part("pickup coil", "inductor", (take, hot), pickup["coil_henries"], series_ohms=pickup["coil_ohms"])
    yield Part("pickup capacitance", "capacitor", (take, hot), pickup["coil_farads"])


def _pots(guitar: Guitar, take: str, hot: str, jack: str) -> Iterator[Part]:
    """The volume pot, the cable, the recorder: as recorded from the take, as played to ground."""
    volume = guitar.pickup["volume_ohms"]
    yield Part("recorded load", "resistor", (take, hot), 1.0 / (1.0 / volume + 1.0 / guitar.recorded_into))
    yield Part("recorded cable", "capacitor", (take, hot), guitar.recorded_cable)
    if guitar.volume >= 1.0:
        yield Part("recorder taken off", "resistor", (hot, GROUND), -guitar.recorded_into)
        if guitar.cable != guitar.recorded_cable:
            yield Part("cable exchanged", "capacitor", (hot, GROUND), guitar.cable - guitar.recorded_cable)
        return
    yield Part(
        "recorded load taken off", "resistor", (hot, GROUND), -1.0 / (1.0 / volume + 1.0 / guitar.recorded_into)
    )
    yield Part("recorded cable taken off", "capacitor", (hot, GROUND), -guitar.recorded_cable)
    lower = max(volume * TAPERS["audio"](guitar.volume), END_OHMS)
    yield Part("guitar volume", "resistor", (hot, jack), max(volume - lower, END_OHMS), "first")
    yield Part("guitar volume", "resistor", (jack, GROUND), lower, "second")
    yield Part("cable", "capacitor", (jack, GROUND), guitar.cable)


def _tone(guitar: Guitar, take: str, hot: str, inner: str, taken: set[str]) -> Iterator[Part]:
    """The tone pot with its capacitor, on the pickup's side of the volume pot."""
    ohms, farads = guitar.pickup["tone_ohms"], guitar.pickup["tone_farads"]
    yield Part("recorded tone", "resistor", (hot, inner), ohms)
    yield Part("recorded tone capacitor", "capacitor", (inner, take), farads)
    if guitar.tone >= 1.0:
        return
    off, on = _free("tone taken off", taken), _free("tone played", taken)
    yield Part("recorded tone taken off", "resistor", (hot, off), -ohms)
    yield Part("recorded tone capacitor taken off", "capacitor", (off, GROUND), -farads)
    yield Part("guitar tone", "resistor", (hot, on), max(ohms * TAPERS["audio"](guitar.tone), END_OHMS))
    yield Part("guitar tone capacitor", "capacitor", (on, GROUND), farads)
