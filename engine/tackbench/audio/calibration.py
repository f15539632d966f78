"""How many volts one full-scale sample of a take stands for, and the words that say where this number comes from."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType

from tackbench.errors import InputError, nearest

ASSUMED_VOLTS = 0.7
"""What the loudest sample of a set of takes is taken to be when no calibration is given."""

PICKUP_VOLTS: Mapping[str, float] = MappingProxyType({"low": 0.35, "medium": 0.7, "hot": 1.4})
"""Peak volts of the hardest stroke for a plain pickup class; from memory, no source.

Low stands for an old single coil (0.1 to 0.5 V from soft to hard), hot for an overwound humbucker (1.5 V and more).
"""

ZERO_DBU_VOLTS = math.sqrt(0.6)
"""RMS volts of 0 dBu: the voltage that gives 1 mW in 600 ohms."""

_MOST_VOLTS, _MOST_DECIBELS = 1e4, 100.0


def _number(value: object, key: str, unit: str) -> float:
    """The value as a finite number; InputError naming the key otherwise."""
    try:
        number = float(value)  # type: ignore[arg-type]
    except (TypeError, ValueError):
        number = math.nan
    if not math.isfinite(number):
        raise InputError(f"{value!r} cannot be read as a number of {unit}", key=key, expected="for instance 12")
    return number


def _volts(value: object, key: str) -> float:
    volts = _number(value, key, "volts")
    if not 0.0 < volts <= _MOST_VOLTS:
        raise InputError(f"{volts:g} V cannot be a calibration", key=key, expected="a voltage above 0, up to 10000 V")
    return volts


def _decibels(value: object, key: str) -> float:
    decibels = _number(value, key, "decibels")
    if abs(decibels) > _MOST_DECIBELS:
        raise InputError(f"{decibels:g} dB is out of reach", key=key, expected="a value from -100 to 100 dB")
    return decibels


@dataclass(frozen=True)
class Calibration:
    """One way of turning samples into volts, made by one of the class methods below.

    Either ``full_scale`` is set (volts of a full-scale sample, known without looking at the take) or ``loudest`` is
    (volts of the loudest sample of the whole set of takes). ``reason`` says in words where the number comes from.
    """

    full_scale: float | None
    loudest: float | None
    reason: str
    is_assumed: bool = False

    @classmethod
    def full_scale_volts(cls, volts: float) -> Calibration:
        """Volts (peak) of a full-scale sample, as they are."""
        return cls(_volts(volts, "--full-scale-volts"), None, "as stated")

    @classmethod
    def full_scale_dbu(cls, dbu: float, input_gain_db: float = 0.0, trimmed_db: float = 0.0) -> Calibration:
        """The interface's level for 0 dBFS in dBu (0 dBu is 0.7746 V RMS; a full-scale sine peaks at sqrt(2) of it).

        ``input_gain_db`` is the gain that stood on the input knob: it lowers the volts of full scale. ``trimmed_db``
        is by how many decibels the take was turned down since: it raises them (negative: turned up).
        """
        return cls._from_level(dbu, "dBu", ZERO_DBU_VOLTS, input_gain_db, trimmed_db)

    @classmethod
    def full_scale_dbv(cls, dbv: float, input_gain_db: float = 0.0, trimmed_db: float = 0.0) -> Calibration:
        """The same in dBV (0 dBV is 1 V RMS)."""
        return cls._from_level(dbv, "dBV", 1.0, input_gain_db, trimmed_db)

    @classmethod
    def _from_level(cls, level: float, unit: str, zero: float, gain: float, trimmed: float) -> Calibration:
        level = _decibels(level, f"--full-scale-{unit.lower()}")
        gain, trimmed = _decibels(gain, "--input-gain-db"), _decibels(trimmed, "--trimmed-db")
        volts = math.sqrt(2.0) * zero * 10.0 ** ((level - gain + trimmed) / 20.0)
        reason = f"{level:g} {unit} at 0 dBFS, {gain:g} dB input gain"
        return cls(volts, None, f"{reason}, turned down by {trimmed:g} dB since" if trimmed else reason)

    @classmethod
    def peak_volts(cls, volts: float) -> Calibration:
        """The loudest sample of the set of takes is this many volts."""
        return cls(None, _volts(volts, "--peak-volts"), f"the loudest sample is {float(volts):g} V, as stated")

    @classmethod
    def pickup(cls, name: str) -> Calibration:
        """A plain pickup class, ``low``, ``medium`` or ``hot``: see PICKUP_VOLTS."""
        if name not in PICKUP_VOLTS:
            known = ", ".join(f"{key} ({volts:g} V)" for key, volts in PICKUP_VOLTS.items())
            hint = nearest(str(name), PICKUP_VOLTS)
            raise InputError(f"{name!r} is no pickup class: {hint}", key="--pickup", expected=f"one of {known}")
        volts = PICKUP_VOLTS[name]
        return cls(None, volts, f"{name} pickup: the loudest sample is taken to be {volts:g} V, a figure from memory")

    @classmethod
    def assumed(cls) -> Calibration:
        """Nothing is known: the loudest sample of the set is taken to be 0.7 V, and everything says so."""
        reason = f"the loudest sample is taken to be {ASSUMED_VOLTS:g} V; your guitar may be hotter or weaker"
        return cls(None, ASSUMED_VOLTS, reason, is_assumed=True)

    def volts_per_full_scale(self, loudest_sample: float) -> float:
        """Volts of a full-scale sample for a set whose loudest sample is this (in full scale).

        A silent set has no loudest sample: the volts that it would have had then stand for full scale.
        """
        if self.full_scale is not None:
            return self.full_scale
        assert self.loudest is not None
        return self.loudest / loudest_sample if loudest_sample > 0.0 else self.loudest

    def words(self, volts_per_full_scale: float) -> str:
        """One sentence for the terminal and for every record."""
        equals = f"0 dBFS = {volts_per_full_scale:.3g} V"
        return f"assumed: {self.reason} ({equals})" if self.is_assumed else f"{equals} ({self.reason})"


_MAKERS = ("full_scale_volts", "full_scale_dbu", "full_scale_dbv", "peak_volts", "pickup")


def choose_calibration(
    *,
    full_scale_volts: float | None = None,
    full_scale_dbu: float | None = None,
    full_scale_dbv: float | None = None,
    peak_volts: float | None = None,
    pickup: str | None = None,
    input_gain_db: float | None = None,
    trimmed_db: float | None = None,
) -> Calibration:
    """The calibration of a command's options, None for each that was not given; assumed when none was.

    InputError when two are given, or an input gain or trim without the level that it belongs to.
    """
    values = (full_scale_volts, full_scale_dbu, full_scale_dbv, peak_volts, pickup)
    given = {name: value for name, value in zip(_MAKERS, values, strict=True) if value is not None}
    if len(given) > 1:
        options = " and ".join("--" + name.replace("_", "-") for name in given)
        raise InputError(f"{options} are given together", expected="a take has one calibration")
    corrections = {"input_gain_db": input_gain_db, "trimmed_db": trimmed_db}
    corrections = {name: value for name, value in corrections.items() if value is not None}
    name = next(iter(given), "assumed")
    if corrections and name not in ("full_scale_dbu", "full_scale_dbv"):
        option = "--" + next(iter(corrections)).replace("_", "-")
        raise InputError(f"{option} corrects a level of the interface", expected="give --full-scale-dbu or -dbv too")
    made: Calibration = getattr(Calibration, name)(*given.values(), **corrections)
    return made
