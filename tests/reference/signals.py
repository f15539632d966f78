"""Takes as smooth functions of time (seconds in, volts out), band-limited far below half of 48 kHz to −140 dB."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

Signal = Callable[[np.ndarray], np.ndarray]

ONSET = 0.008
"""Seconds over which a signal rises from nothing."""


def _onset(t: np.ndarray) -> np.ndarray:
    """A rise with many smooth derivatives: one minus the ninth power of a cosine's half wave."""
    part = np.clip(t / ONSET, 0.0, 1.0)
    return np.sin(0.5 * np.pi * np.sin(0.5 * np.pi * part) ** 4) ** 4


def sine(hertz: float, peak: float) -> Signal:
    return lambda t: peak * np.sin(2 * np.pi * hertz * t) * _onset(t)


def _strings(notes: tuple[float, ...], peak: float, decay: float, brightness: float) -> Signal:
    """Decaying partials of plucked strings; the higher the partial the faster it dies."""

    def volts(t: np.ndarray) -> np.ndarray:
        total = np.zeros_like(t)
        for place, note in enumerate(notes):
            for partial in range(1, 1 + int(5000.0 // note)):
                size = np.sin(np.pi * partial * 0.21) / partial**brightness
                phase = 0.7 * place + 1.3 * partial
                total += (
                    size * np.exp(-decay * (1 + 0.2 * partial) * t) * np.sin(2 * np.pi * note * partial * t + phase)
                )
        return peak / (1.6 * len(notes) ** 0.7) * total * _onset(t)

    return volts


SIGNALS: dict[str, Signal] = {
    "110 Hz": sine(110.0, 0.35),
    "997 Hz": sine(997.0, 0.35),
    "4999 Hz": sine(4999.0, 0.35),
    "chord": _strings((82.41, 123.47, 164.81, 207.65), 0.7, 3.0, 1.2),
    "pluck": _strings((196.0,), 0.5, 6.0, 0.9),
    "quiet": _strings((146.83, 220.0), 0.01, 4.0, 1.1),
}
"""The takes that renders are judged by."""
