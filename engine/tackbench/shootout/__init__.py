"""The main job: several variants of a stage rendered from one take, matched, measured and written."""

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
