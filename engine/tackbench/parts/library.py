"""The parts library: the shipped part files and the user's own, looked up by type number."""

from __future__ import annotations

import os
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from functools import cache
from importlib.resources.abc import Traversable
from pathlib import Path
from typing import Any

from tackbench.errors import InputError, nearest
from tackbench.parts.entries import BOUNDS, PartEntry, read_entries
from tackbench.parts.parameters import KIND_FAMILIES
from tackbench.parts.places import PARTS_FOLDER, PARTS_VARIABLE, models_root, user_parts_folder
from tackbench.parts.tomlfile import read_toml
from tackbench.values import Where


@dataclass(frozen=True)
class PartsLibrary:
    """Every known model. ``by_name`` maps folded names and aliases to entries; later folders replace earlier ones."""

    by_name: Mapping[str, PartEntry] = field(default_factory=dict, repr=False)

    def find(self, name: str, kind_key: str, where: Where | None = None) -> PartEntry:
        """The entry called ``name`` (in any case) that can be a ``kind_key`` ("diode", "npn", "p-jfet", "opamp", …).

        Raises InputError at ``where``, naming the nearest entry of that kind, or the kind that the name has.
        """
        where = where or Where()
        entry = self.by_name.get(name.strip().casefold())
        if entry is None:
            names = [known for item in self.entries(kind_key) for known in (item.name, *item.aliases)]
            raise where.fault(f"the parts library has no {kind_key} {name[:60]!r}", nearest(name, names))
        if entry.kind != kind_key:
            raise where.fault(f"{entry.name} is of kind {entry.kind}, not {kind_key}", f"write {entry.kind} = …")
        return entry

    def model(self, name: str, kind_key: str, where: Where | None = None) -> tuple[str, Mapping[str, Any], PartEntry]:
        """What ``name`` stands for as a model: its right spelling, its parameters, its entry.

        A name followed by ``low``, ``high`` or ``typical`` is that end (or the middle) of the entry's spread. Raises
        InputError at ``where`` like ``find``, and for a bound that the entry does not have.
        """
        where = where or Where()
        head, _, bound = name.strip().rpartition(" ")
        entry = self.by_name.get(head.strip().casefold())
        if bound.casefold() not in BOUNDS or entry is None or name.strip().casefold() in self.by_name:
            found = self.find(name, kind_key, where)
            return found.name, found.parameters, found
        entry = self.find(head, kind_key, where)
        parameters = entry.at_bound(bound.casefold())
        if parameters is None:
            raise where.fault(
                f"{entry.name} has no {bound.casefold()} bound", f"write {entry.name}, its typical self"
            )
        return f"{entry.name} {bound.casefold()}".removesuffix(" typical"), parameters, entry

    def entries(self, kind: str | None = None) -> tuple[PartEntry, ...]:
        """Every entry once, in order of name; of one ``kind`` key when given."""
        every = {id(entry): entry for entry in self.by_name.values() if kind is None or entry.kind == kind}
        return tuple(sorted(every.values(), key=lambda entry: entry.name.casefold()))


def load_parts(extra_folder: Path | str | None = None, neighbour: Path | None = None) -> PartsLibrary:
    """The shipped library, then the folder of the environment variable, then ``neighbour``, then ``extra_folder`` (or
    the folder that the command line names).

    ``neighbour`` is the folder ``parts`` beside a stage file and may be absent; the others must exist when
    named. An entry replaces one of the same name from an earlier folder. Raises InputError naming the file.
    """
    by_name = dict(_shipped())
    named = user_parts_folder()
    if named is not None:
        _add_folder(by_name, named, f"the environment variable {PARTS_VARIABLE}")
    if neighbour is not None and os.path.isdir(neighbour):
        _add_folder(by_name, neighbour, "the stage file's neighbour")
    asked = extra_folder if extra_folder is not None else PARTS_FOLDER.get()
    if asked is not None:
        _add_folder(by_name, Path(asked), "the parts folder option")
    return PartsLibrary(by_name)


@cache
def _shipped() -> Mapping[str, PartEntry]:
    by_name: dict[str, PartEntry] = {}
    folder = models_root() / "parts"
    if folder.is_dir():
        _add_files(by_name, _part_files(folder.iterdir()), own=False)
    return by_name


def _add_folder(by_name: dict[str, PartEntry], folder: Path, asked_by: str) -> None:
    try:
        files = _part_files(folder.iterdir())
    except (OSError, ValueError):
        raise InputError(
            f"{asked_by} names no folder that can be read", file=folder, expected="name a folder of part files"
        ) from None
    _add_files(by_name, files, own=True)


def _part_files(found: Iterable[Traversable]) -> list[Traversable]:
    return sorted((path for path in found if path.name.endswith(".toml")), key=lambda path: path.name)


def _add_files(by_name: dict[str, PartEntry], files: Iterable[Traversable], own: bool) -> None:
    """Add the entries of one folder's files; two of one name within a folder are an error."""
    here: dict[str, PartEntry] = {}
    for path in files:
        for entry in read_entries(read_toml(path, "part file"), path, own):
            for name in (entry.name, *entry.aliases):
                other = here.setdefault(name.strip().casefold(), entry)
                if other is not entry:
                    raise InputError(
                        f"the name {name!r} is taken by {other.name} in {other.file}",
                        file=path,
                        part=entry.name,
                        expected="give each name once",
                    )
    by_name.update(here)


def known_kinds() -> tuple[str, ...]:
    """The kinds of entry that the library may hold."""
    return tuple(KIND_FAMILIES)
