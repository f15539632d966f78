"""Ratings against the volts that are certain before anything is solved."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import TYPE_CHECKING

from tackbench.circuit import Part
from tackbench.circuit.graph import nominal_volts
from tackbench.values import format_quantity

if TYPE_CHECKING:
    from tackbench.stage.variant import Variant

NEAR = 0.9
"""A part that sees more than this share of its rating is near its limit."""


@dataclass(frozen=True)
class Strain:
    """Volts across a part against its rating (None where the file or the library gives none)."""

    part: Part
    volts: float
    rating: float | None
    rating_words: str

    def sentence(self, verb: str) -> str:
        limit = format_quantity(self.rating or 0.0, "V")
        return f"{self.part.ref} ({self.rating_words} {limit}) {verb} {format_quantity(self.volts, 'V')}"


def strains(variant: Variant) -> Iterator[Strain]:
    """Every op-amp and capacitor whose volts at rest are certain."""
    volts = nominal_volts(variant.circuit)
    for part in variant.circuit.parts:
        if part.kind not in ("opamp", "capacitor"):
            continue
        ends = part.pins[3:] if part.kind == "opamp" else part.pins
        if not all(node in volts for node in ends):
            continue
        across = abs(volts[ends[0]] - volts[ends[1]])
        if part.kind == "opamp":
            yield Strain(part, across, part.parameters.get("max_supply"), f"{part.model}, largest supply")
        elif across > 0:
            yield Strain(part, across, part.rated_volts, "capacitor, rated")


def over_limits_of(variant: Variant) -> tuple[str, ...]:
    """One sentence for each rating that is exceeded."""
    return tuple(
        strain.sentence("stands at")
        for strain in strains(variant)
        if strain.rating is not None and strain.volts > strain.rating
    )


def limit_notes(variant: Variant) -> Iterator[str]:
    """One sentence for each rating that is nearly reached, and for ratings that are not given."""
    for strain in strains(variant):
        if strain.rating is None:
            continue
        if NEAR * strain.rating < strain.volts <= strain.rating:
            yield strain.sentence("is within 10 % of it at")


def unrated(variant: Variant) -> tuple[str, ...]:
    """Designators of capacitors that certainly see volts and whose rating the file does not give."""
    return tuple(
        strain.part.ref for strain in strains(variant) if strain.rating is None and strain.part.kind == "capacitor"
    )
