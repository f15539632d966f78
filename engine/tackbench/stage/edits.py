"""Changing one part: what ``REF = …`` in a mod's position, or a part chosen for a variant, makes of it."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

from tackbench.errors import nearest
from tackbench.parts import PartsLibrary
from tackbench.stage.kinds import KINDS
from tackbench.stage.spec import PartSpec, read_model, read_part, read_value
from tackbench.values import Where, shown


def edited(part: PartSpec, raw: Any, where: Where, library: PartsLibrary) -> PartSpec:
    """``part`` after the edit ``raw``: text or a number is a new value or model for the same part, a table with a
    kind key replaces the part (keeping nodes that it does not name), a table without one is a model.

    Raises InputError at ``where``.
    """
    kind = KINDS[part.kind]
    if isinstance(raw, dict):
        return _edited_by_table(part, raw, where, library)
    if kind.takes_model:
        if not isinstance(raw, str):
            raise where.fault(
                f"{shown(raw)} is no model for {part.ref}, a {kind.key}", "name one of the parts library"
            )
        return replace(part, model=read_model(part.kind, raw, where, library))
    if isinstance(raw, list):
        raise where.fault(
            f"{shown(raw)} is no value for {part.ref}", f"write a value, for example {part.value_words()!r}"
        )
    return replace(part, value=read_value(kind, raw, where))


def _edited_by_table(part: PartSpec, raw: dict[str, Any], where: Where, library: PartsLibrary) -> PartSpec:
    kind = KINDS[part.kind]
    if any(key in KINDS for key in raw):
        return read_part(part.ref, raw, where, library, replaced=part)
    if not kind.takes_model:
        key = next(iter(raw), None)
        hint = nearest(key, KINDS) if key is not None else f'write {kind.key} = "…" in it'
        raise where.fault(f"the table for {part.ref}, a {kind.key}, has no kind key", hint)
    for key in raw:
        if key in kind.keys:
            raise where.at(key=key).fault(
                f"{key} is no parameter of a model", f'write the kind key too: {kind.key} = "…", {key} = …'
            )
    return replace(part, model=read_model(part.kind, raw, where, library))
