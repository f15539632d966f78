"""The shootout's folder: built beside its place and moved into it whole; files of others are never touched."""

from __future__ import annotations

import json
import os
import shutil
import tempfile
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path

from tackbench.audio.names import safe_name
from tackbench.audio.place import check_folder as check_writable
from tackbench.audio.place import storage_error
from tackbench.errors import InputError

DATA_FILE = "shootout.json"
PAGE_FILE = "index.html"
SCHEMA = "tackbench.shootout"


def default_folder(take: Path, stage: str) -> Path:
    """The folder that is used when none is named, in the current directory: named after the take and the stage."""
    return Path(f"{safe_name(take.stem)}-{safe_name(stage)}")


def check_folder(folder: Path, overwrite: bool) -> None:
    """Say before any work whether the folder may be made or filled; ``InputError`` when not."""
    if folder.exists() and not folder.is_dir():
        raise InputError("this is a file, not a folder", file=folder, expected="choose another folder with -o")
    check_writable(folder.absolute().parent)
    if folder.is_dir():
        check_writable(folder)
    if folder.is_dir() and any(folder.iterdir()) and not overwrite:
        raise InputError(
            "this folder already holds files",
            file=folder,
            expected="choose another with -o, or replace an earlier shootout's files with --overwrite",
        )


def check_names(folder: Path, names: Sequence[str]) -> None:
    """Refuse to replace a file that no earlier shootout wrote; ``InputError`` names it."""
    if not folder.is_dir():
        return
    ours = files_of(folder)
    for name in names:
        if (folder / name).exists() and name not in ours:
            raise InputError(
                "this file is in the way and no earlier shootout wrote it",
                file=folder / name,
                expected="move it away, or choose another folder with -o",
            )


def files_of(folder: Path) -> set[str]:
    """The names of the files that an earlier shootout wrote into this folder, by its own ``shootout.json``."""
    try:
        data = json.loads((folder / DATA_FILE).read_text(encoding="utf-8"))
    except (OSError, ValueError):
        return set()
    if not isinstance(data, dict) or data.get("schema") != SCHEMA:
        return set()
    entries = [data.get("bypass"), *(data.get("variants") or [])]
    names = {entry.get("file") for entry in entries if isinstance(entry, dict)}
    return {name for name in names if isinstance(name, str) and _is_plain(name)} | {DATA_FILE, PAGE_FILE}


def _is_plain(name: str) -> bool:
    """Whether this is one file's name, without a way out of the folder."""
    return Path(name).name == name and name not in ("", ".", "..")


@contextmanager
def built_beside(folder: Path) -> Iterator[Path]:
    """A new empty folder beside ``folder``; gone at the end, whatever happens, with all that is left in it."""
    try:
        building = Path(tempfile.mkdtemp(prefix=f".{folder.name}-", suffix=".part", dir=folder.absolute().parent))
    except OSError as trouble:
        raise storage_error(trouble, folder) from None
    try:
        yield building
    finally:
        shutil.rmtree(building, ignore_errors=True)


def move_into_place(building: Path, folder: Path, names: Sequence[str]) -> None:
    """Move the named finished files to ``folder``: the whole folder at once when it is new.

    In a folder that holds an earlier shootout each file replaces its namesake, ``shootout.json`` last, and then the
    earlier shootout's other files go; nothing else in the folder is touched.
    """
    try:
        if not folder.exists():
            _move_whole(building, folder)
        else:
            _move_files(building, folder, names)
    except OSError as trouble:
        raise storage_error(trouble, folder) from None


def _move_whole(building: Path, folder: Path) -> None:
    os.chmod(building, 0o777 & ~_umask())  # a temporary folder is private; the result is like any other
    building.rename(folder)


def _move_files(building: Path, folder: Path, names: Sequence[str]) -> None:
    earlier = files_of(folder)
    for name in sorted(names, key=lambda name: name == DATA_FILE):
        os.replace(building / name, folder / name)
    for name in earlier - set(names):
        (folder / name).unlink(missing_ok=True)


def _umask() -> int:
    mask = os.umask(0)
    os.umask(mask)
    return mask
