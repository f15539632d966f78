"""Reading a TOML file that someone wrote by hand: each way in which it can be unreadable is one sentence."""

from __future__ import annotations

import re
import stat
import tomllib
from importlib.resources.abc import Traversable
from pathlib import Path
from typing import Any

from tackbench.errors import InputError
from tackbench.values import Where

SIZE_LIMIT = 1 << 20
"""Bytes; the largest file that is read. Real ones have a few thousand."""

FORMAT = 1


def read_toml(path: Path | Traversable, what: str, shown_as: object = None) -> dict[str, Any]:
    """The tables of the TOML file at ``path``; ``what`` names its kind in errors ("stage file", "part file").

    Raises InputError naming the file when it is missing, no plain file, too large, not UTF-8, empty, or not TOML.
    """
    name = path if shown_as is None else shown_as
    return parse_toml(_bytes_of(path, what, name), what, name)


def _bytes_of(path: Path | Traversable, what: str, name: object) -> bytes:
    try:
        if isinstance(path, Path):
            _check_plain_file(path, what, name)
        with path.open("rb") as file:
            data: bytes = file.read(SIZE_LIMIT + 1)
    except FileNotFoundError:
        raise InputError("there is no such file", file=name, expected=f"give the path of a {what}") from None
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or str(error)
        raise InputError(f"the file cannot be read ({reason})", file=name, expected=f"give a {what}") from None
    if len(data) > SIZE_LIMIT:
        raise InputError(
            f"the file is larger than {SIZE_LIMIT >> 20} MiB",
            file=name,
            expected=f"a {what} has a few thousand bytes",
        )
    return data


def _check_plain_file(path: Path, what: str, name: object) -> None:
    mode = path.stat().st_mode
    if stat.S_ISDIR(mode):
        raise InputError("this is a folder", file=name, expected=f"give the path of a {what}")
    if not stat.S_ISREG(mode):
        raise InputError("this is no plain file", file=name, expected=f"give the path of a {what}")


def parse_toml(data: bytes, what: str, name: object) -> dict[str, Any]:
    """The tables in ``data``. A leading byte-order mark is skipped. Raises InputError naming ``name``."""
    try:
        text = data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
        raise InputError(
            f"the text in line {line} is not UTF-8", file=name, expected=f"save the {what} as UTF-8 text"
        ) from None
    if not text.strip():
        raise InputError("the file is empty", file=name, expected=f"expected a {what}")
    try:
        return tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise InputError(f"this is not valid TOML: {_reason(str(error))}", file=name) from None
    except RecursionError:
        raise InputError("its tables or lists are nested too deeply", file=name) from None
    except ValueError as error:  # a number too long, a date that does not exist
        raise InputError(f"this is not valid TOML: {_reason(str(error))}", file=name) from None


def _reason(message: str) -> str:
    """The decoder's message on one line, with its place put as line and column, shortened when it quotes the file."""
    text = " ".join(message.split())
    place = re.search(r"\(at ([^()]*)\)$", text)
    if place:
        text = f"{text[: place.start()].strip()} in {place[1]}" if "line" in place[1] else text
    text = text.replace("in line", "at line")
    return text if len(text) <= 200 else text[:197] + "…"


def check_format(document: dict[str, Any], what: str, name: object) -> None:
    """Refuse a document whose ``format`` is missing or not the one this version reads."""
    where = Where(name, key="format")
    if "format" not in document:
        raise where.fault("the format number is missing", f"a {what} begins with: format = {FORMAT}")
    value = document["format"]
    if isinstance(value, bool) or value != FORMAT or not isinstance(value, int):
        raise where.fault(f"format {value!r} is unknown to this version"[:120], f"it reads format = {FORMAT}")
