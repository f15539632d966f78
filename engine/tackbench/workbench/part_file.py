"""Writing a part file with one entry: whole or not at all, never over another file, and readable by the library."""

from __future__ import annotations

import math
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from tackbench.audio.names import safe_name
from tackbench.audio.place import check_folder, storage_error, written_beside
from tackbench.errors import InputError
from tackbench.parts import parse_toml
from tackbench.parts.entries import read_entries
from tackbench.workbench.fresh import fresh_place

PARTS_FOLDER = "parts"
"""The folder beside a stage file that its parts are looked for in."""


def place_for(name: str, output: str | None) -> Path:
    """The file to write the part ``name`` to: the one asked for, or ``parts/NAME.toml`` here. Raises InputError
    for a name that cannot head an entry, and when something stands there already."""
    if not name.strip() or name != name.strip() or not name.isprintable():
        raise InputError(f"{name!r} cannot name a part", expected='give a name such as "D-bag-3"')
    if output is not None:
        if not output.endswith(".toml"):
            raise InputError("a part file ends in .toml", file=output, expected=f"write {output}.toml")
        return fresh_place(output)
    place = Path(PARTS_FOLDER) / f"{safe_name(name)}.toml"
    if not place.parent.exists():
        check_folder(place.parent.parent)
        return place
    return fresh_place(place)


def write_part(place: Path, name: str, table: Mapping[str, Any]) -> None:
    """Write ``table`` as the entry ``name`` of a new part file at ``place``. Raises InputError or WorkError."""
    text = part_text(name, table)
    list(read_entries(parse_toml(text.encode(), "part file", place), place, own=True))
    try:
        if place.parent == Path(PARTS_FOLDER):
            place.parent.mkdir(exist_ok=True)
    except OSError as trouble:
        raise storage_error(trouble, place.parent) from None
    with written_beside(place) as beside:
        beside.write_text(text, encoding="utf-8")


def part_text(name: str, table: Mapping[str, Any]) -> str:
    """The text of a part file with one entry."""
    size = max(len(key) for key in table)
    lines = ["format = 1", "", f"[{quoted(name)}]"]
    lines += [f"{key.ljust(size)} = {_value(value)}" for key, value in table.items()]
    return "\n".join(lines) + "\n"


def _value(value: Any) -> str:
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, str):
        return quoted(value)
    if isinstance(value, Mapping):
        return "{ " + ", ".join(f"{key} = {_value(item)}" for key, item in value.items()) + " }"
    if isinstance(value, (list, tuple)):
        return "[" + ", ".join(_value(item) for item in value) + "]"
    return _number(float(value))


def _number(value: float) -> str:
    """Five significant digits, as TOML writes numbers."""
    assert math.isfinite(value)
    text = f"{value:.5g}"
    return text if "." in text or "e" in text else f"{text}.0"


def quoted(text: str) -> str:
    """A TOML basic string."""
    escaped = text.replace("\\", "\\\\").replace('"', '\\"')
    return '"' + "".join(c if c.isprintable() else f"\\U{ord(c):08X}" for c in escaped) + '"'
