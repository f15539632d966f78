"""From the tables of a stage file to a checked stage."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from pathlib import Path
from types import MappingProxyType
from typing import Any

from tackbench.errors import nearest
from tackbench.parts import PartsLibrary, check_format
from tackbench.stage.connections import check_connections
from tackbench.stage.model import Control, Jack, Stage, SupplySpec
from tackbench.stage.mods import check_edits, read_mods
from tackbench.stage.names import check_designator, check_name, check_name_space
from tackbench.stage.spec import PartSpec, read_node, read_part
from tackbench.stage.supply import signed_volts
from tackbench.stage.tables import check_keys, read_table, read_text
from tackbench.values import Where, parse_position, parse_quantity, shown

_TOP = ("format", "title", "about", "input", "output", "supply", "parts", "controls", "mods")
MOST_PARTS = 1000


def read_stage(document: dict[str, Any], name: str, file: Path | None, library: PartsLibrary) -> Stage:
    """The stage that ``document`` describes, checked as a whole: its variant as built is a sound circuit.

    Raises InputError naming the file (or ``name``), the part and the key.
    """
    where = Where(file if file is not None else name)
    check_format(document, "stage file", where.file)
    check_keys(document, _TOP, where)
    parts = _read_parts(document, where, library)
    controls = _read_controls(document, where)
    mods = read_mods(read_table(document, "mods", where), where, library)
    check_name_space(parts, controls.values(), mods.values(), where)
    stage = Stage(
        name=name,
        title=read_text(document, "title", where, default=name),
        about=read_text(document, "about", where),
        file=file,
        input=_read_jack(document, "input", "series", where),
        output=_read_jack(document, "output", "load", where),
        supply=_read_supply(document, where),
        parts=MappingProxyType(parts),
        controls=MappingProxyType(controls),
        mods=MappingProxyType(mods),
        library=library,
    )
    every_part = check_edits(stage)
    _check_controls(controls, every_part, where)
    check_connections(stage, every_part)
    stage.variant()
    return stage


def _read_parts(document: Mapping[str, Any], where: Where, library: PartsLibrary) -> dict[str, PartSpec]:
    table = read_table(document, "parts", where, required=True)
    if not table:
        raise where.at(key="parts").fault("the stage has no parts", "list its parts under [parts]")
    if len(table) > MOST_PARTS:
        raise where.at(key="parts").fault(
            f"the stage has {len(table)} parts", f"at most {MOST_PARTS} can be computed"
        )
    parts: dict[str, PartSpec] = {}
    for ref, raw in table.items():
        check_designator(ref, where.at(part=ref))
        parts[ref] = read_part(ref, raw, where.at(part=ref), library)
    return parts


def _read_controls(document: Mapping[str, Any], where: Where) -> dict[str, Control]:
    controls: dict[str, Control] = {}
    for name, raw in read_table(document, "controls", where).items():
        here = where.at(part=f"controls.{name}")
        check_name(name, "control", here)
        if not isinstance(raw, dict):
            raise here.fault(f"{shown(raw)} is no table", f'write {name} = {{ label = "…", at = 0.5 }}')
        check_keys(raw, ("label", "at"), here)
        at = parse_position(raw["at"], here.at(key="at")) if "at" in raw else 0.5
        controls[name] = Control(name, read_text(raw, "label", here, default=name), at)
    return controls


def _check_controls(controls: Mapping[str, Control], parts: Iterable[PartSpec], where: Where) -> None:
    """Every control turns a pot and every pot's control is there."""
    used: set[str] = set()
    for part in parts:
        if part.control is not None and part.control not in controls:
            raise where.at(part=part.ref, key="control").fault(
                f"there is no control {part.control!r}",
                nearest(part.control, controls) if controls else f"add {part.control} = {{ }} under [controls]",
            )
        used.update([part.control] if part.control is not None else [])
    for name in controls:
        if name not in used:
            raise where.at(part=f"controls.{name}").fault(
                "no pot names this control", f'write control = "{name}" in the pot that it turns'
            )


def _read_jack(document: Mapping[str, Any], side: str, key: str, where: Where) -> Jack:
    here = where.at(part=side)
    table = read_table(document, side, where, required=True)
    check_keys(table, ("node", key), here)
    node = _own_node(table, here)
    if key not in table:
        return Jack(node, 0.0 if side == "input" else None, assumed=True)
    raw, at_key = table[key], here.at(key=key)
    if side == "output" and isinstance(raw, str) and raw.strip().casefold() == "none":
        return Jack(node, None)
    return Jack(node, parse_quantity(raw, "ohm", ">=0" if side == "input" else ">0", at_key))


def _own_node(table: Mapping[str, Any], where: Where) -> str:
    """The ``node`` of a jack or supply: given, and not ground."""
    here = where.at(key="node")
    if "node" not in table:
        raise here.fault("the node is missing", 'write node = "…"')
    node = read_node(table["node"], here)
    if node == "0":
        raise here.fault("the node is ground", "name the node that is not ground")
    return node


def _read_supply(document: Mapping[str, Any], where: Where) -> SupplySpec | None:
    if "supply" not in document:
        return None
    here = where.at(part="supply")
    table = read_table(document, "supply", where)
    check_keys(table, ("node", "volts", "try", "ohms", "rails"), here)
    node = _own_node(table, here)
    if "volts" not in table:
        raise here.at(key="volts").fault("the supply voltage is missing", "write volts = 9.0")
    volts = parse_quantity(table["volts"], "V", "!=0", here.at(key="volts"))
    ohms = parse_quantity(table.get("ohms", 0.0), "ohm", ">=0", here.at(key="ohms"))
    return SupplySpec(node, volts, _try_volts(table, volts, here), ohms, _rails(table, node, here))


def _try_volts(table: Mapping[str, Any], volts: float, where: Where) -> tuple[float, ...]:
    here = where.at(key="try")
    raw = table.get("try", [volts])
    if not isinstance(raw, list) or not raw:
        raise here.fault(f"{shown(raw)} is no list of voltages", "write try = [9.0, 18.0]")
    return tuple(dict.fromkeys(signed_volts(item, volts, here) for item in raw))


def _rails(table: Mapping[str, Any], supply_node: str, where: Where) -> tuple[tuple[str, float], ...]:
    raw = table.get("rails", {})
    here = where.at(key="rails")
    if not isinstance(raw, dict):
        raise here.fault(f"{shown(raw)} is no table", "write rails = { vee = -1.0 }")
    rails = []
    for node, ratio in raw.items():
        inner = where.at(key=f"rails.{node}")
        read_node(node, inner)
        if node in ("0", supply_node):
            raise inner.fault(
                f"a rail cannot be {'ground' if node == '0' else 'the supply node itself'}", "name it anew"
            )
        rails.append((node, parse_quantity(ratio, "", "!=0", inner)))
    return tuple(rails)
