"""Where the files that ship with the package are: inside it when installed, beside engine/ in a checkout."""

from __future__ import annotations

import os
from contextvars import ContextVar
from importlib import resources
from importlib.resources.abc import Traversable
from pathlib import Path

from tackbench.errors import WorkError

PARTS_VARIABLE = "TACKBENCH_PARTS"
"""The environment variable that names a folder of the user's own part files."""


def models_root() -> Traversable:
    """The folder ``models`` with ``stages`` and ``parts`` in it. Raises WorkError when the installation lacks it."""
    shipped = resources.files("tackbench") / "models"
    if shipped.is_dir():
        return shipped
    checkout = Path(__file__).resolve().parents[3] / "models"
    if checkout.is_dir() and (checkout.parent / "pyproject.toml").is_file():
        return checkout
    raise WorkError(f"the shipped stages and parts were found neither at {shipped} nor at {checkout}; install again")


PARTS_FOLDER: ContextVar[Path | None] = ContextVar("parts folder", default=None)
"""The folder of the user's own part files that the command line's option names, while that command runs."""


def user_parts_folder() -> Path | None:
    """The folder that the environment variable names, or None when it names none."""
    named = os.environ.get(PARTS_VARIABLE)
    return Path(named) if named else None
