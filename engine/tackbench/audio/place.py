"""Files that appear whole or not at all: written beside their place under another name, then moved there."""

from __future__ import annotations

import errno
import os
import secrets
import shutil
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from pathlib import Path

from tackbench.errors import InputError, TackbenchError, WorkError

_NO_ROOM = (errno.ENOSPC, getattr(errno, "EDQUOT", errno.ENOSPC), errno.EFBIG)
_NO_RIGHT = (errno.EACCES, errno.EPERM, errno.EROFS)


def storage_error(trouble: OSError, path: Path) -> TackbenchError:
    """The sentence for an operating-system error met while writing ``path``."""
    if trouble.errno in _NO_ROOM:
        return WorkError(f"{path}: no room left to write it; free some space or choose another folder")
    if trouble.errno in _NO_RIGHT:
        return InputError("may not be written", file=path, expected="choose a folder that you may write to")
    reason = (trouble.strerror or str(trouble)).rstrip(".").lower()
    return WorkError(f"{path}: could not be written ({reason})")


def _existing(path: Path) -> InputError:
    return InputError("already exists", file=path, expected="choose another name, or give --overwrite to replace it")


def check_folder(folder: Path) -> None:
    """InputError unless ``folder`` is a folder that may be written to; leaves nothing in it."""
    try:
        if not folder.exists():
            raise InputError("there is no such folder", file=folder, expected="make it first, or choose another")
        if not folder.is_dir():
            raise InputError("is not a folder", file=folder, expected="choose a folder")
        trial = folder / f".{secrets.token_hex(8)}.part"
        os.close(os.open(trial, os.O_CREAT | os.O_EXCL | os.O_WRONLY, 0o600))
        trial.unlink()
    except OSError as trouble:
        raise storage_error(trouble, folder) from None
    except ValueError:
        raise InputError("cannot be the name of a folder", file=repr(str(folder))) from None


def check_output(path: str | os.PathLike[str], overwrite: bool = False) -> Path:
    """The place for a new file, asked before any work starts; InputError naming what is in the way."""
    place = Path(path)
    if "\0" in str(place):
        raise InputError("a file name cannot hold a zero byte", file=repr(str(place)))
    check_folder(place.parent)
    try:
        if place.is_dir():
            raise InputError("is a folder", file=place, expected="give the name of a file")
        if os.path.lexists(place):
            if not overwrite:
                raise _existing(place)
            if not os.access(place, os.W_OK):
                raise InputError("may not be replaced", file=place, expected="choose another name")
    except (OSError, ValueError) as trouble:
        reason = getattr(trouble, "strerror", None) or str(trouble)
        raise InputError(f"cannot be the name of a file ({reason.lower()})", file=place) from None
    return place


def check_room(folder: str | os.PathLike[str], bytes_needed: int) -> None:
    """WorkError when the disk that ``folder`` (or its nearest existing parent) is on has less than that free."""
    place = Path(folder).absolute()
    while not place.exists() and place != place.parent:
        place = place.parent
    try:
        free = shutil.disk_usage(place).free
    except OSError as trouble:
        raise storage_error(trouble, place) from None
    if free < bytes_needed:
        raise WorkError(
            f"{folder}: {size_words(bytes_needed)} are needed and {size_words(free)} are free; "
            "free some space or choose another folder"
        )


def size_words(size: float) -> str:
    """Bytes in the largest unit that keeps the number at 1 or above: ``3.1 GB``."""
    for unit in ("bytes", "kB", "MB", "GB"):
        if size < 1000:
            return f"{size:.0f} bytes" if unit == "bytes" else f"{size:.3g} {unit}"
        size /= 1000
    return f"{size:.3g} TB"


@contextmanager
def written_beside(path: str | os.PathLike[str], overwrite: bool = False) -> Iterator[Path]:
    """Give a fresh name beside ``path`` to write to, and move the file into place when the block ends well.

    On any exception, an interrupt too, nothing is left and an existing file is untouched. OSError from the block or
    from moving comes out as InputError or WorkError. Without ``overwrite`` a file that has appeared meanwhile stays.
    """
    place = Path(path)
    # the tail keeps the extension, by which some writers choose the format; a long name must not become too long
    beside = place.with_name(f".{secrets.token_hex(8)}.part{place.suffix}")
    try:
        yield beside
        _move(beside, place, overwrite)
    except OSError as trouble:
        raise storage_error(trouble, place) from None
    finally:
        with suppress(OSError):
            beside.unlink(missing_ok=True)


def _move(beside: Path, place: Path, overwrite: bool) -> None:
    if overwrite:
        os.replace(beside, place)
        return
    try:
        os.link(beside, place)  # unlike a rename on POSIX, refuses when the name is taken
    except FileExistsError:
        raise _existing(place) from None
    except (OSError, NotImplementedError, AttributeError):  # a file system without hard links
        if os.path.lexists(place):
            raise _existing(place) from None
        os.rename(beside, place)
