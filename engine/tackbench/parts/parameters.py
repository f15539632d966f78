"""Reading a model's parameter table, from the library or from a stage file, against the keys of its family."""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType
from typing import Any

from tackbench.devices.schema import MATERIALS, Key
from tackbench.errors import nearest
from tackbench.parts.families import KEYS, complete
from tackbench.values import Where, parse_quantity, shown

KIND_FAMILIES: Mapping[str, tuple[str, str]] = MappingProxyType(
    {
        "diode": ("diode", ""),
        "opamp": ("opamp", ""),
        "npn": ("bipolar", "n"),
        "pnp": ("bipolar", "p"),
        "n-jfet": ("jfet", "n"),
        "p-jfet": ("jfet", "p"),
        "n-mosfet": ("mosfet", "n"),
        "p-mosfet": ("mosfet", "p"),
        "battery": ("battery", ""),
        "pickup": ("pickup", ""),
    }
)
"""Family and polarity of each kind of entry: the kind keys of the stage file that take a model, and the sources."""

FAMILY_KINDS = {pair: kind for kind, pair in KIND_FAMILIES.items()}


def read_parameters(family: str, polarity: str, table: Mapping[str, Any], where: Where) -> Mapping[str, Any]:
    """The complete, checked parameter set in ``table``: SI values, defaults filled in.

    Raises InputError at ``where`` (with the key) for an unknown, missing or unreadable parameter, a pinch-off
    voltage of the wrong sign, half a breakdown, or an LED without its band gap.
    """
    filled = complete(family, read_given(family, table, where))
    check_whole(family, polarity, filled, where)
    return MappingProxyType(filled)


def read_given(family: str, table: Mapping[str, Any], where: Where) -> dict[str, Any]:
    """The parameters that ``table`` gives, each read and checked alone."""
    keys = {key.name: key for key in KEYS[family]}
    for name in table:
        if name not in keys:
            raise where.at(key=name).fault(f"{shown(name)} is no parameter of this model", nearest(name, keys))
    return {name: _read_one(keys[name], raw, where.at(key=name)) for name, raw in table.items()}


def _read_one(key: Key, raw: Any, where: Where) -> Any:
    if key.unit == "word":
        if not isinstance(raw, str) or raw not in MATERIALS:
            hint = nearest(raw, MATERIALS) if isinstance(raw, str) else f"known: {', '.join(MATERIALS)}"
            raise where.fault(f"{shown(raw)} is no known {key.name}", hint)
        return raw
    if key.unit == "flag":
        if not isinstance(raw, bool):
            raise where.fault(f"{shown(raw)} is neither true nor false", "write true or false")
        return raw
    return parse_quantity(raw, key.unit, key.rule, where)


def check_whole(family: str, polarity: str, filled: Mapping[str, Any], where: Where) -> None:
    """Refuse a parameter set that is incomplete or contradicts itself or its polarity."""
    for key in KEYS[family]:
        if key.required and key.name not in filled:
            raise where.at(key=key.name).fault("this parameter is missing", f"give {key.name}, {key.rule_text()}")
    if "material" in filled and "band_gap" not in filled:
        raise where.at(key="band_gap").fault(
            f"a model of material {filled['material']!r} must say its band gap",
            "give band_gap in eV, for example 1.9",
        )
    if family == "diode":
        _check_breakdown(filled, where)
    if family == "jfet":
        _check_pinch_off(polarity, filled["pinch_off_volts"], where)


def _check_breakdown(filled: Mapping[str, Any], where: Where) -> None:
    given = [name for name in ("breakdown_volts", "breakdown_current") if name in filled]
    if len(given) == 1:
        missing = "breakdown_current" if given[0] == "breakdown_volts" else "breakdown_volts"
        raise where.at(key=missing).fault(f"{given[0]} stands without {missing}", "give both or neither")
    if not given and "breakdown_ideality" in filled:
        raise where.at(key="breakdown_ideality").fault(
            "breakdown_ideality stands without a breakdown", "give breakdown_volts and breakdown_current too"
        )


def _check_pinch_off(polarity: str, volts: float, where: Where) -> None:
    if (volts > 0) != (polarity == "p"):
        side, rule = ("p", "above") if polarity == "p" else ("n", "below")
        raise where.at(key="pinch_off_volts").fault(
            f"{volts:g} V has the wrong sign for a {side}-JFET", f"its pinch-off voltage lies {rule} zero"
        )
