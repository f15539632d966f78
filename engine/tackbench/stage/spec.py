"""A part as the stage file describes it, before pots are turned and polarities resolved; and reading one."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from tackbench.errors import nearest
from tackbench.parts import KIND_FAMILIES, PartEntry, PartsLibrary, read_parameters
from tackbench.stage.kinds import KINDS, Kind
from tackbench.stage.tapers import check_no_taper_letter, check_taper
from tackbench.values import Where, format_quantity, parse_position, parse_quantity, parse_tolerance, shown

IN_PLACE = "in place"
LONGEST_STRING = 1000


@dataclass(frozen=True)
class Model:
    """A device model: its library name (with the bound of its spread, or "in place"), its complete parameters, its
    library entry if it has one."""

    name: str
    parameters: Mapping[str, Any]
    entry: PartEntry | None = None


@dataclass(frozen=True)
class PartSpec:
    """One part of a stage. ``pins`` are nodes in the order of its kind's pin keys (a pot: end, wiper, other end).

    ``value`` is in the base unit of the kind (None for devices, which have a ``model``); ``ohms`` is an
    inductor's winding; ``at`` a trimmer's position; ``rated`` volts; ``tolerance`` a fraction.
    """

    ref: str
    kind: str
    pins: tuple[str, ...]
    value: float | None = None
    model: Model | None = None
    count: int = 1
    ohms: float = 0.0
    taper: str = "linear"
    control: str | None = None
    at: float = 0.5
    rated: float | None = None
    tolerance: float | None = None

    def value_words(self) -> str:
        """The value or model as people write it: ``22 nF``, ``1N270``, ``2 × 1N4148``."""
        if self.model is None:
            return format_quantity(self.value or 0.0, KINDS[self.kind].unit)
        name = "own model" if self.model.entry is None else self.model.name
        return f"{self.count} × {name}" if self.count != 1 else name


def read_part(
    ref: str, table: Any, where: Where, library: PartsLibrary, replaced: PartSpec | None = None
) -> PartSpec:
    """The part that ``table`` describes; nodes that it does not name are those of the part it replaces.

    ``where`` names the file and the part. Raises InputError for everything that the format does not allow.
    """
    if not isinstance(table, dict):
        raise where.fault(
            f"{shown(table)} is no part", 'write a table such as { resistor = "1k", pins = ["a", "b"] }'
        )
    kind = _kind_of(table, where)
    for key in table:
        if key not in kind.keys:
            raise where.at(key=key).fault(f"{shown(key)} is no key of a {kind.key}", nearest(key, kind.keys))
    pins = _pins(kind, table, where, replaced)
    if kind.takes_model:
        model = read_model(kind.key, table[kind.key], where.at(key=kind.key), library)
        return PartSpec(ref, kind.key, pins, model=model, count=_count(table, where))
    value = read_value(kind, table[kind.key], where.at(key=kind.key))
    return PartSpec(ref, kind.key, pins, value, **_options(kind, table, value, where))


def _kind_of(table: Mapping[str, Any], where: Where) -> Kind:
    found = [key for key in table if key in KINDS]
    if len(found) > 1:
        raise where.fault(f"it has two kinds, {found[0]} and {found[1]}", "one part has one kind")
    if not found:
        known_options = {key for kind in KINDS.values() for key in kind.keys} - set(KINDS)
        strange = next((key for key in table if key not in known_options), None)
        if strange is not None:
            raise where.at(key=strange).fault(f"{shown(strange)} is no kind of part", nearest(strange, KINDS))
        raise where.fault("its kind is missing", f"write one of {', '.join(KINDS)}")
    return KINDS[found[0]]


def read_node(raw: Any, where: Where) -> str:
    """A node name. Numbers are refused: ground is the text ``"0"``."""
    if isinstance(raw, int | float) and not isinstance(raw, bool):
        raise where.fault(f"the node {shown(raw)} is a number", f'write it as text: "{raw}"'[:80])
    if not isinstance(raw, str):
        raise where.fault(f"{shown(raw)} is no node", 'write a node name as text; "0" is ground')
    if not raw or raw != raw.strip() or not raw.isprintable():
        raise where.fault(
            f"the node name {shown(raw)} is empty, or has blanks at its ends or control characters",
            'write for example "a"',
        )
    return raw


def _pins(kind: Kind, table: Mapping[str, Any], where: Where, replaced: PartSpec | None) -> tuple[str, ...]:
    kept: tuple[str, ...] | None = None
    if replaced is not None and KINDS[replaced.kind].shape == kind.shape:
        kept = replaced.pins
    nodes: list[str] = []
    for key, count in kind.pin_keys:
        here = where.at(key=key)
        if key in table:
            nodes.extend(_pin_list(table[key], count, here))
        elif kept is not None:
            nodes.extend(kept[len(nodes) : len(nodes) + count])
        else:
            example = f"[{', '.join(repr('abc'[i]) for i in range(count))}]" if count > 1 else "'a'"
            raise here.fault(f"a {kind.key} needs the key {key}", f"write {key} = {example}".replace("'", '"'))
    return tuple(nodes)


def _pin_list(raw: Any, count: int, where: Where) -> list[str]:
    if count == 1:
        return [read_node(raw, where)]
    if not isinstance(raw, list) or len(raw) != count:
        found = f"{shown(raw)} is no list of nodes" if not isinstance(raw, list) else _count_words(len(raw))
        raise where.fault(found, f"list {count} nodes")
    return [read_node(item, where) for item in raw]


def _count_words(count: int) -> str:
    return "1 node stands here" if count == 1 else f"{count} nodes stand here"


def read_model(kind_key: str, raw: Any, where: Where, library: PartsLibrary) -> Model:
    """A device model: a library name, alone or with a bound of its spread, or a table of parameters in place."""
    if isinstance(raw, str):
        return Model(*library.model(raw, kind_key, where))
    if not isinstance(raw, Mapping):
        raise where.fault(
            f"{shown(raw)} is no model", "name a model of the parts library or write a table of parameters"
        )
    family, polarity = KIND_FAMILIES[kind_key]
    inner = Where(where.file, f"{where.part} {where.key}" if where.key else where.part)
    return Model(IN_PLACE, read_parameters(family, polarity, raw, inner))


def read_value(kind: Kind, raw: Any, where: Where) -> float:
    """The value of a kind that has one."""
    if kind.key != "resistor" and kind.rule == ">0" and _is_zero(raw):
        raise where.fault(
            f"a {kind.key} of {shown(raw)} is not allowed", "give a value above zero, or leave the part out"
        )
    if kind.key == "pot" and isinstance(raw, str):
        check_no_taper_letter(raw, where)
    return parse_quantity(raw, kind.unit, kind.rule, where)


def _is_zero(raw: Any) -> bool:
    return (isinstance(raw, int | float) and not isinstance(raw, bool) and raw == 0) or raw == "0"


def _count(table: Mapping[str, Any], where: Where) -> int:
    raw = table.get("count", 1)
    value = int(raw) if isinstance(raw, str) and raw.isascii() and raw.isdigit() and len(raw) < 9 else raw
    if isinstance(value, bool) or not isinstance(value, int | float) or value != value // 1:
        raise where.at(key="count").fault(f"{shown(raw)} is no count", "write how many stand in series, 1 or more")
    if not 1 <= value <= LONGEST_STRING:
        raise where.at(key="count").fault(f"{shown(raw)} is no count", f"write 1 to {LONGEST_STRING}")
    return int(value)


def _options(kind: Kind, table: Mapping[str, Any], value: float, where: Where) -> dict[str, Any]:
    """The further keys of a kind with a value, read."""
    read: dict[str, Any] = {}
    if "ohms" in table:
        read["ohms"] = parse_quantity(table["ohms"], "ohm", ">=0", where.at(key="ohms"))
    if "rated" in table:
        read["rated"] = parse_quantity(table["rated"], "V", ">0", where.at(key="rated"))
    if "tolerance" in table:
        farads = value if kind.key == "capacitor" else None
        read["tolerance"] = parse_tolerance(table["tolerance"], where.at(key="tolerance"), farads)
    if kind.key == "pot":
        read.update(_pot_options(table, where))
    return read


def _pot_options(table: Mapping[str, Any], where: Where) -> dict[str, Any]:
    read: dict[str, Any] = {"taper": check_taper(table.get("taper", "linear"), where.at(key="taper"))}
    if "control" in table:
        control, here = table["control"], where.at(key="control")
        if not isinstance(control, str):
            raise here.fault(f"{shown(control)} is no name of a control", "write the name of a table in [controls]")
        if "at" in table:
            raise where.at(key="at").fault(
                "the pot has both a control and a position of its own", f"put at into [controls.{control}]"
            )
        read["control"] = control
    elif "at" in table:
        read["at"] = parse_position(table["at"], where.at(key="at"))
    return read
