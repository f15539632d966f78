"""The entries of ``shootout.json``: one for the bypass, one for each variant, every number JSON-ready."""

from __future__ import annotations

import math
from typing import Any

from tackbench.audio import Take
from tackbench.audio.levels import Levels
from tackbench.shootout.identity import identity, json_ready
from tackbench.shootout.matching import Matching
from tackbench.shootout.survey import Survey
from tackbench.shootout.volts import Volts
from tackbench.shootout.writing import Written
from tackbench.stage import Variant


def bypass_entry(take: Take, looked: Survey, matching: Matching, written: Written) -> dict[str, Any]:
    """The take itself, in volts, at the common loudness."""
    scale = take.volts_per_full_scale
    return {
        "words": "bypass (the take)",
        "file": written.name,
        **_levels(looked.levels, scale),
        "dc_volts": None,
        "level_against_bypass_db": 0.0,
        **_gain(matching.bypass_gain, looked.levels.true_peak, scale),
        "polarity": "+",
        "loudness_lufs": looked.loudness.integrated().lufs,
        "seconds": None,
    }


def variant_entry(
    take: Take,
    looked: Survey,
    variant: Variant,
    words: str,
    volts: Volts,
    gain: float,
    silent: bool,
    written: Written,
) -> dict[str, Any]:
    """One rendered variant. ``gain`` is the factor on the take's own scale that the file was written with."""
    scale = take.volts_per_full_scale
    loudness = volts.loudness.integrated()
    return {
        "words": words,
        "file": written.name,
        "over_limits": [],
        "silent": silent,
        **_levels(volts.levels, 1.0),
        "dc_volts": volts.rest,
        "level_against_bypass_db": None if silent else _difference(loudness.lufs, looked.loudness.integrated().lufs),
        **_gain(gain, volts.levels.true_peak / scale, scale),
        "polarity": None if silent else volts.polarity,
        "correlation": written.correlation,
        "loudness_lufs": loudness.lufs,
        "seconds": volts.seconds,
        "solver": json_ready(volts.counts),
        "notes": [*variant.notes, *volts.warnings],
    }


def left_out_entry(words: str, over_limits: tuple[str, ...], notes: tuple[str, ...]) -> dict[str, Any]:
    """A variant that was not rendered because a part of it would be over its limit."""
    return {
        "words": words,
        "file": None,
        "over_limits": list(over_limits),
        "silent": False,
        "seconds": None,
        "solver": None,
        "notes": list(notes),
    }


def about_variant(take: Take, variant: Variant, fingerprint: str, quality: str) -> dict[str, Any]:
    """What a variant is, in full: the hash of everything its samples depend on, and its resolved record."""
    return {
        "identity": identity(variant.circuit, fingerprint, take.volts_per_full_scale, quality),
        "record": json_ready(variant.record()),
    }


def take_entry(take: Take, looked: Survey, fingerprint: str) -> dict[str, Any]:
    """The take and its calibration."""
    loudness = looked.loudness.integrated()
    return {
        "name": take.path.name,
        "rate": take.rate,
        "channels": take.channels,
        "frames": take.frames,
        "seconds": take.seconds,
        "subtype": take.subtype,
        "sha256_of_samples": fingerprint,
        "volts_per_full_scale": take.volts_per_full_scale,
        "calibration": take.calibration_words,
        "calibration_assumed": take.calibration_assumed,
        "peak_full_scale": take.peak,
        "loudness_lufs": loudness.lufs,
        "loudness_method": loudness.method,
        "notes": list(take.notes),
    }


def _levels(levels: Levels, scale: float) -> dict[str, Any]:
    """Levels in volts from levels in units of ``scale`` volts."""
    return {
        "output_vpp": levels.peak_to_peak * scale,
        "peak_volts": levels.peak_from_rest * scale,
        "true_peak_volts": levels.true_peak * scale,
        "rms_volts": levels.ac_rms * scale,
        "mean_volts": levels.mean * scale,
        "crest_factor_db": levels.crest_db,
    }


def _gain(gain: float, true_peak: float, scale: float) -> dict[str, Any]:
    """What the written file's samples mean. ``true_peak`` is on the take's own scale."""
    peak = true_peak * gain
    return {
        "applied_gain_db": 20 * math.log10(gain),
        "volts_per_full_scale": scale / gain,
        "true_peak_dbfs": 20 * math.log10(peak) if peak > 0 else None,
    }


def _difference(one: float | None, other: float | None) -> float | None:
    return None if one is None or other is None else one - other
