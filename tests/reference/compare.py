"""How far one render is from another, in the band that is heard."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

LOWEST, HIGHEST = 20.0, 18000.0
WINDOW = 0.05
"""Seconds of the windows of which the worst one counts."""

_QUIETEST_DB = -50.0


@dataclass(frozen=True)
class Distance:
    """``whole``: the error's RMS re the reference's AC RMS, dB. ``worst``: that of the worst 50 ms, re the larger of
    its own RMS and the whole's less 50 dB."""

    whole: float
    worst: float


def in_band(samples: np.ndarray, rate: float) -> np.ndarray:
    """What lies from 20 Hz to 18 kHz (or 0.45 of the rate), by a Fourier transform of the whole with eased ends."""
    ease = min(len(samples) // 8, int(0.01 * rate))
    window = np.ones(len(samples))
    window[len(window) - ease :] = 0.5 + 0.5 * np.cos(np.pi * np.arange(ease) / ease)
    spectrum = np.fft.rfft((samples - samples[0]) * window, 2 * len(samples))
    hertz = np.fft.rfftfreq(2 * len(samples), 1 / rate)
    spectrum[(hertz < LOWEST) | (hertz > min(HIGHEST, 0.45 * rate))] = 0.0
    return np.fft.irfft(spectrum, 2 * len(samples))[: len(samples)]


def distance(got: np.ndarray, reference: np.ndarray, rate: float = 48000.0) -> Distance:
    """The in-band distance of two renders of one length (V, shape (n,))."""
    signal = in_band(reference, rate)
    error = in_band(got - reference, rate)
    level = np.sqrt(np.mean(signal**2))
    frames = int(WINDOW * rate)
    worst = -np.inf
    for start in range(0, len(signal) - frames + 1, frames // 2):
        own = np.sqrt(np.mean(signal[start : start + frames] ** 2))
        against = max(own, level * 10 ** (_QUIETEST_DB / 20))
        worst = max(worst, _decibels(np.sqrt(np.mean(error[start : start + frames] ** 2)) / against))
    return Distance(_decibels(np.sqrt(np.mean(error**2)) / level), float(worst))


def _decibels(ratio: float) -> float:
    return float(20 * np.log10(max(ratio, 1e-15)))
