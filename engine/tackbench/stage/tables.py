"""Reading the plain things that tables of a stage file hold: known keys, texts, sub-tables."""

from __future__ import annotations

import unicodedata
from collections.abc import Iterable, Mapping
from typing import Any

from tackbench.errors import nearest
from tackbench.values import Where, shown


def check_keys(table: Mapping[str, Any], known: Iterable[str], where: Where) -> None:
    """Refuse keys that are not among ``known``."""
    names = tuple(known)
    for key in table:
        if key not in names:
            raise where.at(key=key).fault(f"{shown(key)} is no key here", nearest(key, names))


def read_text(table: Mapping[str, Any], key: str, where: Where, default: str = "") -> str:
    """The text under ``key`` on one line, or ``default`` when it is absent or blank. Control characters, which
    could garble a terminal or a page, are refused."""
    raw = table.get(key, default)
    if not isinstance(raw, str):
        raise where.at(key=key).fault(f"{shown(raw)} is no text", f'write {key} = "…"')
    text = " ".join(raw.split())
    if any(unicodedata.category(character) == "Cc" for character in text):
        raise where.at(key=key).fault(f"{shown(raw)} holds control characters", "write plain text")
    return text or default


def read_table(document: Mapping[str, Any], key: str, where: Where, required: bool = False) -> dict[str, Any]:
    """The table under ``key``; an absent one is empty unless ``required``."""
    if key not in document:
        if required:
            raise where.at(key=key).fault("this table is missing", f"a stage file has a table [{key}]")
        return {}
    table = document[key]
    if not isinstance(table, dict):
        raise where.at(key=key).fault(f"{shown(table)} is no table", f"write a table headed [{key}]")
    return table
