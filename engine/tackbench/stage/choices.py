"""Reading what is chosen for a variant: mods, controls, the supply, the temperature, part values."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from typing import Any

from tackbench.errors import InputError, nearest
from tackbench.stage.edits import edited
from tackbench.stage.model import SUPPLY, TEMPERATURE, Stage
from tackbench.stage.spec import PartSpec
from tackbench.stage.supply import signed_volts
from tackbench.stage.surroundings import SURROUNDINGS, free_surroundings
from tackbench.values import Where, parse_position, parse_quantity, shown

COLDEST_CELSIUS, HOTTEST_CELSIUS = -55.0, 125.0


def parse_choice(stage: Stage, key: str, text: str) -> dict[str, object]:
    """``key`` (names joined by ``+``) set to ``text``, as normalised choices. Raises InputError."""
    names = [name.strip() for name in key.split("+")]
    if len(set(names)) != len(names):
        raise _where(stage, key).fault("a name stands twice", "name each once")
    return {name: normal(stage, name, text) for name in names}


def normalised(stage: Stage, choices: Mapping[str, object]) -> dict[str, object]:
    """Every choice under its own name, in order; values that depend on other choices (parts) stay as they are."""
    read: dict[str, object] = {}
    for key, raw in choices.items():
        if not isinstance(key, str):
            raise _where(stage, shown(key)).fault("a choice is named by text", "write for example 'supply'")
        for name in (part.strip() for part in key.split("+")):
            if name in read:
                raise _where(stage, name).fault("it is chosen twice", "choose it once")
            read[name] = normal(stage, name, raw)
    return read


def normal(stage: Stage, name: str, raw: Any) -> object:
    """One choice in its normal form: a position's name, 0 to 1, volts, degrees Celsius, a value or a model."""
    where = _where(stage, name)
    if name in stage.mods:
        return _position(stage, name, raw, where)
    if name in stage.controls:
        return parse_position(raw, where)
    if name == SUPPLY:
        if stage.supply is None:
            raise where.fault("this stage has no supply to choose", "it is passive; leave the supply out")
        return signed_volts(raw, stage.supply.volts, where)
    if name == TEMPERATURE:
        return _temperature(raw, where)
    known = stage.known_parts()
    if name in known:
        return _part_choice(stage, known[name], raw, where)
    if name in free_surroundings(stage):
        return SURROUNDINGS[name].read(stage, raw, where)
    raise _where(stage, None).fault(
        f"{shown(name)} is no mod, control or part of this stage", nearest(name, _names(stage, known))
    )


def _names(stage: Stage, parts: Iterable[str]) -> list[str]:
    supply = [SUPPLY] if stage.supply is not None else []
    return [*stage.mods, *stage.controls, *supply, TEMPERATURE, *parts, *free_surroundings(stage)]


def _where(stage: Stage, name: str | None) -> Where:
    return Where(stage.name, name)


def _position(stage: Stage, name: str, raw: Any, where: Where) -> str:
    positions = stage.mods[name].positions
    text = raw.strip() if isinstance(raw, str) else str(raw) if isinstance(raw, int | float) else ""
    if text not in positions:
        raise where.fault(f"{shown(raw)} is no position of this mod", nearest(text, positions))
    return text


def _temperature(raw: Any, where: Where) -> float:
    celsius = parse_quantity(raw, "celsius", "any", where)
    if not COLDEST_CELSIUS <= celsius <= HOTTEST_CELSIUS:
        raise where.fault(
            f"{shown(raw)} is outside {COLDEST_CELSIUS:g} to {HOTTEST_CELSIUS:g} °C",
            "choose degrees Celsius within it",
        )
    return celsius


def _part_choice(stage: Stage, parts: Iterable[PartSpec], raw: Any, where: Where) -> object:
    """The choice in normal form for the first part of that designator that it suits."""
    errors: list[InputError] = []
    for part in (*parts, *_replacements(stage, where.part or "")):
        try:
            return choice_of(changed(part, raw, stage, where), raw)
        except InputError as error:
            errors.append(error)
    raise errors[0]


def _replacements(stage: Stage, ref: str) -> Iterable[PartSpec]:
    """The parts that positions put in the place of ``ref``."""
    drawn = stage.parts.get(ref)
    if drawn is None:
        return
    for mod in stage.mods.values():
        for position in mod.positions.values():
            if isinstance(position.edits.get(ref), dict):
                yield edited(drawn, position.edits[ref], stage.where, stage.library)


def changed(part: PartSpec, raw: Any, stage: Stage, where: Where) -> PartSpec:
    """``part`` with what was chosen for it. A pot's choice is its resistance: a position is refused with advice."""
    if part.kind == "pot" and _looks_like_position(raw):
        turn = (
            f"turn the control {part.control!r}" if part.control else "it is a trimmer: its position is in the file"
        )
        raise where.fault(f"{shown(raw)} is no resistance for the pot {part.ref}", turn)
    return edited(part, raw, where, stage.library)


def _looks_like_position(raw: Any) -> bool:
    try:
        parse_position(raw)
    except InputError:
        return False
    return True


def choice_of(part: PartSpec, raw: Any) -> object:
    """The normal form of a part choice: its value, its model's name, or the table that was given."""
    if isinstance(raw, dict):
        return raw
    return part.value if part.model is None else part.model.name
