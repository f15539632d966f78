"""Just-in-time compilation whose cache folder is named by a hash of all compiled sources of this folder.

Numba's own cache looks only at the file of the function asked for, so a change in a callee would go unseen.
"""

from __future__ import annotations

import hashlib
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numba
from numba.core import config

_HERE = Path(__file__).parent
_SOURCES = ("laws.py", "residual.py", "linear.py", "drive.py", "radau.py", "newton.py")


def _cache_folder() -> str:
    digest = hashlib.sha256(numba.__version__.encode())
    for name in _SOURCES:
        digest.update((_HERE / name).read_bytes())
    return str(_HERE / "__pycache__" / f"compiled-{digest.hexdigest()[:16]}")


_FOLDER = _cache_folder()


def jit(function: Callable[..., Any]) -> Any:
    """Compile without fast-math, cached; the process-wide cache folder is left as it was."""
    before = config.CACHE_DIR
    config.CACHE_DIR = _FOLDER
    try:
        return numba.njit(cache=True, error_model="numpy", nogil=True)(function)
    finally:
        config.CACHE_DIR = before
