"""Reading the mods of a stage file, and checking what their positions change."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from types import MappingProxyType
from typing import Any

from tackbench.errors import InputError, nearest
from tackbench.parts import PartsLibrary
from tackbench.stage.edits import edited
from tackbench.stage.model import RESERVED_IN_POSITIONS, Mod, Position, Stage
from tackbench.stage.names import check_designator, check_name
from tackbench.stage.spec import PartSpec, read_node, read_part
from tackbench.stage.tables import check_keys, read_text
from tackbench.values import Where, shown


def place(mod: str, position: str) -> str:
    """How errors name a position: the table's name in the file."""
    return f"mods.{mod}.positions.{position}"


def read_mods(table: Mapping[str, Any], where: Where, library: PartsLibrary) -> dict[str, Mod]:
    """The mods in the file's order. What their positions edit is checked by ``check_edits`` once all are known."""
    return {name: _read_mod(name, raw, where.at(part=f"mods.{name}"), library) for name, raw in table.items()}


def _read_mod(name: str, raw: Any, where: Where, library: PartsLibrary) -> Mod:
    check_name(name, "mod", where)
    if not isinstance(raw, dict):
        raise where.fault(f"{shown(raw)} is no table", f"write tables [mods.{name}] and [mods.{name}.positions.…]")
    check_keys(raw, ("label", "about", "at", "positions"), where)
    table = raw.get("positions")
    if not isinstance(table, dict) or len(table) < 2:
        raise where.at(key="positions").fault(
            "a mod has two positions or more", f"write tables headed [mods.{name}.positions.…]"
        )
    positions = {key: _read_position(name, key, item, where, library) for key, item in table.items()}
    return Mod(
        name,
        read_text(raw, "label", where, default=name),
        read_text(raw, "about", where),
        _read_at(raw, positions, where.at(key="at")),
        MappingProxyType(positions),
    )


def _read_at(raw: Mapping[str, Any], positions: Mapping[str, Position], where: Where) -> str:
    if "at" not in raw:
        raise where.fault("the position of the circuit as built is missing", f'write at = "{next(iter(positions))}"')
    at = raw["at"]
    if not isinstance(at, str) or at not in positions:
        hint = nearest(at, positions) if isinstance(at, str) else f"known: {', '.join(positions)}"
        raise where.fault(f"{shown(at)} is no position of this mod", hint)
    return at


def _read_position(mod: str, name: str, raw: Any, where: Where, library: PartsLibrary) -> Position:
    here = where.at(part=place(mod, name))
    check_name(name, "position", here, marks=",")
    if not isinstance(raw, dict):
        raise here.fault(f"{shown(raw)} is no table", f"write a table headed [{place(mod, name)}]")
    return Position(
        name,
        read_text(raw, "label", here, default=name),
        read_text(raw, "about", here),
        MappingProxyType({key: item for key, item in raw.items() if key not in RESERVED_IN_POSITIONS}),
        _read_lift(raw, here.at(key="lift")),
        _read_links(raw, here.at(key="link")),
        MappingProxyType(_read_fit(raw, here, library)),
    )


def _read_lift(raw: Mapping[str, Any], where: Where) -> tuple[str, ...]:
    refs = raw.get("lift", [])
    if not isinstance(refs, list) or not all(isinstance(ref, str) for ref in refs):
        raise where.fault(f"{shown(refs)} is no list of parts", 'write lift = ["D1"]')
    if len(set(refs)) != len(refs):
        raise where.fault("a part is lifted twice", "name each part once")
    return tuple(refs)


def _read_links(raw: Mapping[str, Any], where: Where) -> tuple[tuple[str, str], ...]:
    links = raw.get("link", [])
    if not isinstance(links, list) or not all(isinstance(pair, list) and len(pair) == 2 for pair in links):
        raise where.fault(f"{shown(links)} is no list of node pairs", 'write link = [["a", "b"]]')
    pairs = tuple((read_node(a, where), read_node(b, where)) for a, b in links)
    for a, b in pairs:
        if a == b:
            raise where.fault(f"the link joins node {a!r} with itself", "name two nodes")
    return pairs


def _read_fit(raw: Mapping[str, Any], where: Where, library: PartsLibrary) -> dict[str, PartSpec]:
    table = raw.get("fit", {})
    if not isinstance(table, dict):
        raise where.at(key="fit").fault(f"{shown(table)} is no table", "write fit.D2 = { diode = …, … }")
    parts = {}
    for ref, item in table.items():
        here = Where(where.file, f"{where.part} fit.{ref}")
        check_designator(ref, here)
        parts[ref] = read_part(ref, item, here, library)
    return parts


def check_edits(stage: Stage) -> list[PartSpec]:
    """Check every edit of every position against the parts it can meet.

    Returns every part that any variant can hold: as drawn, fitted, and replaced by an edit. Raises InputError for
    an edit of a part that is absent, an edit that does not suit the part, and a fit of a part that is there.
    """
    known: dict[str, tuple[PartSpec, ...]] = {ref: (part,) for ref, part in stage.parts.items()}
    every: list[PartSpec] = list(stage.parts.values())
    for mod in stage.mods.values():
        fitted: dict[str, tuple[PartSpec, ...]] = {}
        for position in mod.positions.values():
            where = stage.where.at(part=place(mod.name, position.name))
            every.extend(_checked_edits(position, known, where, stage.library))
            _check_fit(stage, position, where)
            every.extend(position.fit.values())
            for ref, part in position.fit.items():
                fitted[ref] = one_per_kind((*fitted.get(ref, ()), part))
        for ref, parts in fitted.items():
            known[ref] = one_per_kind((*known.get(ref, ()), *parts))
    return every


def one_per_kind(parts: Iterable[PartSpec]) -> tuple[PartSpec, ...]:
    """The first part of each kind: enough to tell what an edit may be."""
    first: dict[str, PartSpec] = {}
    for part in parts:
        first.setdefault(part.kind, part)
    return tuple(first.values())


def _checked_edits(
    position: Position, known: Mapping[str, tuple[PartSpec, ...]], where: Where, library: PartsLibrary
) -> list[PartSpec]:
    for ref in position.lift:
        if ref not in known:
            raise where.at(key="lift").fault(f"there is no part {ref!r} to lift", nearest(ref, known))
    changed: list[PartSpec] = []
    for ref, raw in position.edits.items():
        here = where.at(key=ref)
        if ref not in known:
            raise here.fault(f"there is no part {ref!r} to change", nearest(ref, [*known, *RESERVED_IN_POSITIONS]))
        if ref in position.lift or ref in position.fit:
            raise here.fault(
                f"the position both changes and {'lifts' if ref in position.lift else 'fits'} {ref}", "do one"
            )
        changed.extend(_results(known[ref], raw, here, library))
    return changed


def _results(parts: tuple[PartSpec, ...], raw: Any, where: Where, library: PartsLibrary) -> list[PartSpec]:
    """The parts that the edit makes of each part it may meet; it must suit one of them at least."""
    results, errors = [], []
    for part in parts:
        try:
            results.append(edited(part, raw, where, library))
        except InputError as error:
            errors.append(error)
    if not results:
        raise errors[0]
    return results


def _check_fit(stage: Stage, position: Position, where: Where) -> None:
    for ref in position.fit:
        if ref in stage.parts and ref not in position.lift:
            raise where.at(key=f"fit.{ref}").fault(
                f"the stage already has a part {ref}", f"write {ref} = … to change it, or fit it under a new name"
            )
