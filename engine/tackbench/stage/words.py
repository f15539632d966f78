"""What sets one variant apart from another, in words with values."""

from __future__ import annotations

from collections.abc import Iterable
from typing import TYPE_CHECKING

from tackbench.stage.model import SUPPLY, TEMPERATURE
from tackbench.stage.surroundings import BATTERY, GUITAR, SURROUNDINGS, free_surroundings
from tackbench.values import format_position, format_quantity

if TYPE_CHECKING:
    from tackbench.stage.variant import Variant

AS_BUILT, THE_SAME = "as built", "as the reference"


def difference_words(variant: Variant, reference: Variant) -> str:
    """What ``variant`` has that ``reference`` has not: mods, controls, supply, temperature, then part values."""
    items = [*_setting_words(variant, reference), *_part_words(variant, reference)]
    if items:
        return ", ".join(items)
    return THE_SAME if reference.choices else AS_BUILT


def _setting_words(variant: Variant, reference: Variant) -> Iterable[str]:
    stage = variant.stage
    around = set(free_surroundings(stage))
    fed = BATTERY in around and BATTERY in variant.settings
    for name, value in variant.settings.items():
        if value == reference.settings.get(name, SURROUNDINGS[name].default if name in around else None):
            continue
        if name in stage.mods:
            mod = stage.mods[name]
            yield f"{mod.label} {mod.positions[value].label}"
        elif name in stage.controls:
            yield f"{stage.controls[name].label} {format_position(value)}"
        elif name == SUPPLY:
            yield from () if fed else (format_quantity(value, "V"),)
        elif name == TEMPERATURE:
            yield format_quantity(value, "celsius")
        elif name in around:
            yield f"{SURROUNDINGS[name].label} {SURROUNDINGS[name].spell(value)}"
    if GUITAR in around and GUITAR in reference.settings and GUITAR not in variant.settings:
        yield "no guitar in the circuit"


def _part_words(variant: Variant, reference: Variant) -> Iterable[str]:
    """Chosen part values that differ; parts that went the same way stand together."""
    known = variant.stage.known_parts()
    chosen = [name for name in dict.fromkeys([*variant.choices, *reference.choices]) if name in known]
    changes: dict[str, list[str]] = {}
    for ref in chosen:
        new, old = variant.parts.get(ref), reference.parts.get(ref)
        if new is None or new == old:
            continue
        before = "" if old is None or old.value_words() == new.value_words() else f"{old.value_words()} → "
        changes.setdefault(f"{before}{new.value_words()}", []).append(ref)
    for words, refs in changes.items():
        yield f"{'+'.join(refs)} {words}"
