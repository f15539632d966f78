"""A place for a file that must not be there yet."""

from __future__ import annotations

import os
from pathlib import Path

from tackbench.audio.place import check_output
from tackbench.errors import InputError


def fresh_place(path: str | Path) -> Path:
    """``path`` as the place of a new file. Raises InputError when something stands there already, whatever it is, or
    when its folder cannot be written to."""
    place = Path(path)
    if "\0" not in str(place) and os.path.lexists(place):
        raise InputError("already exists", file=place, expected="choose another name; nothing is ever overwritten")
    return check_output(place)
