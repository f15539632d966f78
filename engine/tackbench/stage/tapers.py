"""How a potentiometer's resistance divides at a position of its shaft."""

from __future__ import annotations

from collections.abc import Callable, Mapping

from tackbench.errors import InputError, nearest
from tackbench.values import Where, parse_quantity, shown

LEAST_OHMS = 1.0
"""Ohms; no half of a potentiometer goes below this (its end resistance)."""

_LETTERS = ("A", "B", "C", "W", "S")
"""What makers print for a taper. Which letter means which has differed by region and by decade."""

_BASE = (1.0 / 0.15 - 1.0) ** 2  # puts 15 % of the resistance at mid travel


def _audio(x: float) -> float:
    return (_BASE**x - 1.0) / (_BASE - 1.0)


TAPERS: Mapping[str, Callable[[float], float]] = {
    "linear": lambda x: x,
    "audio": _audio,
    "reverse audio": lambda x: 1.0 - _audio(1.0 - x),
}
"""The share of the resistance between the first end and the wiper, by taper, as a function of position 0 to 1."""


def halves(ohms: float, taper: str, position: float) -> tuple[float, float]:
    """Ohms from the first end to the wiper and from the wiper to the other end at ``position`` (0 to 1)."""
    share = TAPERS[taper](position)
    return max(ohms * share, LEAST_OHMS), max(ohms * (1.0 - share), LEAST_OHMS)


def check_taper(raw: object, where: Where) -> str:
    """The taper that ``raw`` names. A marked letter is refused: what A, B and C mean differs between regions."""
    if isinstance(raw, str) and raw in TAPERS:
        return raw
    if isinstance(raw, str) and raw.strip().upper() in _LETTERS:
        raise _letter_fault(raw.strip(), where)
    hint = nearest(raw, TAPERS) if isinstance(raw, str) else f"known: {_names()}"
    raise where.fault(f"{shown(raw)} is no known taper", hint)


def check_no_taper_letter(raw: str, where: Where) -> None:
    """Refuse a pot's resistance with a taper's letter at its front or end, as on pots: ``A500k``, ``500kA``."""
    text = raw.strip()
    for letter, rest in ((text[:1], text[1:]), (text[-1:], text[:-1])):
        if letter.upper() in _LETTERS and _is_resistance(rest):
            raise _letter_fault(letter, where, f'write pot = "{rest.strip()}" and ')


def _is_resistance(text: str) -> bool:
    try:
        parse_quantity(text, "ohm")
    except InputError:
        return False
    return True


def _letter_fault(letter: str, where: Where, advice: str = "") -> InputError:
    return where.fault(
        f"the letter {letter!r} on a pot means different tapers in different regions",
        f"{advice}name the taper: {_names()}",
    )


def _names() -> str:
    return ", ".join(repr(name) for name in TAPERS)
