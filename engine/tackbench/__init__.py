"""tackbench: hear circuit changes of a guitar stage on your own dry take, before you solder.

The public names are few: ``load_stage``, ``load_take``, ``operating_point``, ``response``, ``render`` and
``shootout``. They are imported on first use, so that ``import tackbench`` stays light.
"""

from __future__ import annotations

from importlib import import_module
from typing import Any

__version__ = "0.1.0"

_PUBLIC = {
    "load_stage": "tackbench.stage",
    "load_take": "tackbench.audio",
    "operating_point": "tackbench.network",
    "response": "tackbench.network",
    "render": "tackbench.render",
    "shootout": "tackbench.shootout",
    "TackbenchError": "tackbench.errors",
    "InputError": "tackbench.errors",
    "WorkError": "tackbench.errors",
}

__all__ = ["__version__", *_PUBLIC]


def __getattr__(name: str) -> Any:
    if name in _PUBLIC:
        return getattr(import_module(_PUBLIC[name]), name)
    raise AttributeError(f"module 'tackbench' has no attribute {name!r}")
