"""Make the demo take: an invented guitar part on digital waveguide strings, the same bytes every time.

Run ``python demo_audio/make_take.py``; it writes ``take.wav`` beside itself (48 kHz, 24 bit, mono).

Each string is a delay line one period long whose loop filter holds three things at once: the loss per period at
every frequency, the stretch of the partials by stiffness, and the fraction of a sample that tuning needs. What is
plucked in is the velocity wave of an ideal pluck, a pulse as long as the plucked part of the string; what is picked
up is a comb at the pickup's place, then the pickup's own resonance under its load. Every number that comes from a
transcendental function is rounded, and the rest is plain sums and products, so every machine makes the same file.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np
import soundfile
from numpy.typing import NDArray

Samples = NDArray[np.float64]

RATE = 48_000
SECONDS = 12.5
SEED = 20_240_611
PEAK = 0.5 / 0.7  # full scale: the hardest chord. At 0.7 V per full scale it is 0.5 V.
NOISE = 4e-5  # root mean square of the noise floor, full scale: -88 dB
PICKUP_AT = 0.13  # of the string's length, from the bridge
ROUNDED = 8  # decimals kept of every designed coefficient

OPEN_STRINGS = (40, 45, 50, 55, 59, 64)  # semitones, 69 = 440 Hz; lowest string first
STIFFNESS = (6e-5, 5e-5, 3.5e-5, 4e-5, 2.5e-5, 1.5e-5)  # inharmonicity of each open string
SUSTAIN = (8.0, 7.5, 7.0, 6.0, 5.5, 5.0)  # seconds to fall by 60 dB at the lowest frequencies


@dataclass(frozen=True)
class Note:
    """One pluck: start (s), string (0 lowest), fret, force (0 to 1), length (s), and whether the palm rests on it."""

    start: float
    string: int
    fret: int
    force: float
    length: float
    muted: bool = False

    @property
    def semitone(self) -> int:
        return OPEN_STRINGS[self.string] + self.fret

    @property
    def frequency(self) -> float:
        """Hertz, equal temperament on 440 Hz."""
        return float(440.0 * 2.0 ** ((self.semitone - 69) / 12.0))


def score() -> list[Note]:
    """The part: soft picking, two hard chords, a muted riff, a short line, one chord that rings out.

    In order of time. A note ends at the latest where its string is plucked again.
    """
    notes = _picked(0.20)
    notes += _chord(2.00, (None, 0, 2, 2, 1, 0), 0.80, 1.15)
    notes += _chord(3.20, (3, 2, 0, 0, 0, 3), 1.00, 1.15)
    notes += _riff(4.40)
    notes += _line(6.80)
    notes += _chord(8.30, (0, 2, 2, 1, 0, 0), 0.95, 4.0)
    notes.sort(key=lambda note: note.start)
    return [_until_next(note, notes[i + 1 :]) for i, note in enumerate(notes)]


def _until_next(note: Note, later: list[Note]) -> Note:
    """The note, cut short where the same string is wanted again (its 60 ms of stopping included)."""
    again = next((other.start for other in later if other.string == note.string), np.inf)
    return replace(note, length=min(note.length, again - note.start - 0.06))


def _picked(start: float) -> list[Note]:
    """Soft single notes that ring into each other."""
    steps = ((1, 0, 0.16), (2, 2, 0.14), (3, 4, 0.18), (4, 1, 0.22), (3, 2, 0.16), (5, 0, 0.30))
    return [
        Note(start + 0.30 * i, string, fret, force, 1.75 - 0.30 * i) for i, (string, fret, force) in enumerate(steps)
    ]


def _chord(start: float, frets: tuple[int | None, ...], force: float, length: float) -> list[Note]:
    """A downstroke: string after string, 11 ms apart, the later ones a little lighter."""
    played = [(string, fret) for string, fret in enumerate(frets) if fret is not None]
    return [
        Note(start + 0.011 * i, string, fret, force * (1.0 - 0.05 * i), length - 0.011 * i)
        for i, (string, fret) in enumerate(played)
    ]


def _riff(start: float) -> list[Note]:
    """Palm-muted low notes in eighths, the accents open."""
    steps = ((0, 0), (0, 0), (0, 3), (0, 0), (1, 0), (0, 0), (1, 1), (1, 0))
    accents = (2, 6)
    return [
        Note(start + 0.30 * i, string, fret, 0.95 if i in accents else 0.75, 0.27, muted=i not in accents)
        for i, (string, fret) in enumerate(steps)
    ]


def _line(start: float) -> list[Note]:
    """Five firm notes on the upper strings."""
    steps = ((3, 9, 0.25), (4, 8, 0.25), (4, 10, 0.45), (4, 8, 0.20), (3, 9, 0.30))
    notes = []
    for string, fret, length in steps:
        notes.append(Note(start, string, fret, 0.70, length))
        start += length
    return notes


def partial_number(frequency: Samples, fundamental: float, stiffness: float) -> Samples:
    """The (real) number n of the partial at a frequency: f = n f0 sqrt(1 + B n^2), f0 such that n = 1 is in tune.

    The law of the stiff string is that of Fletcher, Blackham and Stratton, JASA 34 (1962), from memory.
    """
    lowest = fundamental / np.sqrt(1.0 + stiffness)
    square = (np.sqrt(1.0 + 4.0 * stiffness * (frequency / lowest) ** 2) - 1.0) / (2.0 * stiffness)
    return np.asarray(np.sqrt(square))


def decay_rate(frequency: Samples, sustain: float, muted: bool) -> Samples:
    """1 / (seconds to fall by 60 dB) at each frequency: friction rises with it, a palm adds much more."""
    kilohertz = frequency / 1000.0
    bent = np.sqrt(kilohertz**2 + 0.25) - 0.5  # straight from 0.5 kHz on, without a corner at zero
    rate = 1.0 / sustain + 0.10 * bent + 0.045 * kilohertz**2
    return rate + (4.0 + 9.0 * bent) if muted else rate


def loop_filter(fundamental: float, stiffness: float, sustain: float, muted: bool) -> tuple[int, Samples]:
    """(delay of the first tap in samples, taps) of one trip along the string and back.

    The taps are the inverse transform of the wanted loss and phase, cut to where the energy is, faded at both ends.
    """
    frequency = (np.arange(4096) + 0.5) * (RATE / 2.0 / 4096.0)
    number = partial_number(frequency, fundamental, stiffness)
    loss = 10.0 ** (-3.0 * decay_rate(frequency, sustain, muted) / fundamental)
    loss *= 0.5 + 0.5 * np.cos(np.pi * np.clip((frequency - 8000.0) / 5000.0, 0.0, 1.0))
    delay = RATE * np.gradient(number, frequency)
    first = int(delay[frequency < 9000.0].min()) - 40
    last = int(delay.max()) + 40
    lag = np.arange(first, last + 1)
    phase = 2.0 * np.pi * (np.outer(lag, frequency) / RATE - number)
    taps = (np.cos(phase) * loss).mean(axis=1)
    fade = 0.5 - 0.5 * np.cos(np.pi * (np.arange(24) + 0.5) / 24.0)
    taps[:24] *= fade
    taps[-24:] *= fade[::-1]
    return first, np.round(taps, ROUNDED)


def pluck(fundamental: float, force: float, muted: bool, hand: np.random.RandomState) -> Samples:
    """The velocity wave put into the string: a pulse as long as the plucked part, with softer edges when soft."""
    place = 0.10 if muted else 0.16 + 0.02 * hand.random_sample()
    width = place * RATE / fundamental
    edge = RATE * (0.00035 - 0.00022 * force)
    time = np.arange(int(width + 2.0 * edge) + 2)
    rise, fall = np.clip(time / edge, 0.0, 1.0), np.clip((time - width) / edge, 0.0, 1.0)
    pulse = np.round(0.5 * (np.cos(np.pi * fall) - np.cos(np.pi * rise)), ROUNDED)
    scrape = 0.06 * force * (hand.random_sample(len(pulse)) - 0.5)
    return np.asarray(force * (pulse + scrape * pulse))


def ring(excitation: Samples, first: int, taps: Samples, length: int) -> Samples:
    """The string's wave: what was put in plus the loop filter's view of what it was one period ago."""
    reach = first + len(taps)
    wave = np.zeros(reach + length)
    wave[reach : reach + len(excitation)] += excitation[:length]
    for start in range(reach, reach + length, first):
        stop = min(start + first, reach + length)
        block = wave[start:stop]
        for index, tap in enumerate(taps):
            lag = first + index
            block += tap * wave[start - lag : stop - lag]
    return wave[reach:]


def delayed(wave: Samples, samples: float) -> Samples:
    """The wave later by a number of samples, by linear interpolation between neighbours."""
    whole = int(samples)
    part = round(samples - whole, ROUNDED)
    late = np.concatenate([np.zeros(whole + 1), wave])
    return np.asarray((1.0 - part) * late[1 : len(wave) + 1] + part * late[: len(wave)])


def play(note: Note, hand: np.random.RandomState) -> Samples:
    """One note as the pickup's coil sees it, stopped by the hand within 60 ms at its end."""
    length, stop = int(RATE * (note.length + 0.06)), int(RATE * 0.06)
    stretch = STIFFNESS[note.string] * 2.0 ** (note.fret / 6.0)  # B goes as 1 / length^2
    first, taps = loop_filter(note.frequency, stretch, SUSTAIN[note.string], note.muted)
    wave = ring(pluck(note.frequency, note.force, note.muted, hand), first, taps, length)
    coil = wave - delayed(wave, PICKUP_AT * RATE / note.frequency)
    coil[-stop:] *= (1.0 - (np.arange(stop) + 1.0) / stop) ** 3
    return np.asarray(coil)


def pickup_coefficients() -> tuple[float, float, float, float]:
    """The coil's low pass b (1 + z^-1)^2 / (1 + a1 z^-1 + a2 z^-2), bilinear: b, a1, a2 and its corner in hertz.

    A single coil of 2.4 H and 6 kilohm with 110 pF of its own, 490 pF of cable, two 250 kilohm pots and 1 megohm.
    """
    inductance, ohms, farads, load = 2.4, 6e3, 600e-12, 1.0 / (2.0 / 250e3 + 1.0 / 1e6)
    square = inductance * farads
    damping = inductance / load + ohms * farads
    constant = 1.0 + ohms / load
    corner = np.sqrt(constant / square)
    k = corner / np.tan(corner / (2.0 * RATE))  # the corner keeps its place
    norm = square * k * k + damping * k + constant
    a1, a2 = 2.0 * (constant - square * k * k) / norm, (square * k * k - damping * k + constant) / norm
    b = (1.0 + a1 + a2) / 4.0 / constant
    return round(float(b), 12), round(float(a1), 12), round(float(a2), 12), float(corner / (2.0 * np.pi))


def pickup(coil: Samples) -> Samples:
    """The coil's voltage under its load: a resonance near 4.3 kHz, then falling by 12 dB an octave."""
    b, a1, a2, _ = pickup_coefficients()
    padded = np.concatenate([np.zeros(2), coil])
    drive = (b * (padded[2:] + 2.0 * padded[1:-1] + padded[:-2])).tolist()
    out, last, before = [], 0.0, 0.0
    for sample in drive:
        last, before = sample - a1 * last - a2 * before, last
        out.append(last)
    return np.array(out)


def make_take() -> NDArray[np.int32]:
    """The whole take as 24-bit samples in the upper bits of 32-bit integers."""
    hand = np.random.RandomState(SEED)  # this generator's numbers are frozen for good
    coil = np.zeros(int(RATE * SECONDS))
    for note in score():
        start, wave = int(RATE * note.start), play(note, hand)
        coil[start : start + len(wave)] += wave[: len(coil) - start]
    volts = pickup(coil)
    volts *= PEAK / np.abs(volts).max()
    hiss = (hand.random_sample((4, len(volts))) - 0.5) * np.sqrt(3.0)
    volts += NOISE * (hiss[0] + hiss[1] + hiss[2] + hiss[3])
    return (np.rint(volts * 2.0**23).astype(np.int32)) << 8


def write_take(path: Path) -> None:
    """Write the take to ``path`` as a 24-bit WAV file."""
    soundfile.write(path, make_take(), RATE, subtype="PCM_24", format="WAV")


if __name__ == "__main__":
    write_take(Path(__file__).resolve().with_name("take.wav"))
