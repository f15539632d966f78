"""One name space for everything that can be chosen: mods, controls, parts, supply and temperature."""

from __future__ import annotations

from collections.abc import Iterable

from tackbench.stage.model import RESERVED_IN_POSITIONS, SUPPLY, TEMPERATURE, Control, Mod
from tackbench.stage.spec import PartSpec
from tackbench.values import Where, shown

_MARKS = "=+,"


def check_name(name: str, what: str, where: Where, marks: str = _MARKS) -> str:
    """Refuse a name that a command line could not carry: empty, blank at its ends, or holding ``=``, ``+``, ``,``."""
    if not name or name != name.strip() or not name.isprintable():
        raise where.fault(f"{shown(name)} cannot name a {what}", "use letters, digits and dashes")
    bad = next((mark for mark in marks if mark in name), None)
    if bad is not None:
        raise where.fault(f"the {what} name {shown(name)} holds {bad!r}", "use letters, digits and dashes")
    return name


def check_designator(ref: str, where: Where) -> None:
    """Refuse designators that mean something else in a mod's position, or that a command line cannot carry."""
    if ref in RESERVED_IN_POSITIONS:
        raise where.fault(f"{ref!r} is a reserved word and cannot name a part", "give the part another designator")
    check_name(ref, "part", where)


def check_name_space(parts: Iterable[str], controls: Iterable[Control], mods: Iterable[Mod], where: Where) -> None:
    """Refuse two things of one name. Parts that different positions fit under one designator are one thing."""
    taken = {SUPPLY: "the supply", TEMPERATURE: "the temperature"}
    for control in controls:
        _take(taken, control.name, "a control", where.at(part="controls", key=control.name))
    fitted: dict[str, PartSpec] = {}
    listed = list(mods)
    for mod in listed:
        _take(taken, mod.name, "a mod", where.at(part="mods", key=mod.name))
        for position in mod.positions.values():
            fitted.update(position.fit)
    for ref in dict.fromkeys([*parts, *fitted]):
        _take(taken, ref, "a part", where.at(part=ref))


def _take(taken: dict[str, str], name: str, what: str, where: Where) -> None:
    if name in taken:
        raise where.fault(f"{name!r} already names {taken[name]}", f"give {what} another name")
    taken[name] = what
