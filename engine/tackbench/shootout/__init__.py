"""The main job: several variants of a stage rendered from one take, matched, measured and written.

The room and its main function share a name: ``tackbench.shootout`` is the function until this package is imported,
and from then on the package, as the import system has it. So the package can be called as well.
"""

import sys
from types import ModuleType
from typing import Any

from tackbench.shootout.plan import read_choices
from tackbench.shootout.run import Job, Shootout, prepare_shootout, shootout
from tackbench.shootout.single import FileJob, RenderedFile, gain_words, prepare_file

__all__ = [
    "FileJob",
    "Job",
    "RenderedFile",
    "Shootout",
    "gain_words",
    "prepare_file",
    "prepare_shootout",
    "read_choices",
    "shootout",
]


class _Room(ModuleType):
    """This package, callable as its main function."""

    def __call__(self, *arguments: Any, **named: Any) -> Shootout:
        return shootout(*arguments, **named)


sys.modules[__name__].__class__ = _Room
