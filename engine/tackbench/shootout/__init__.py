"""The main job: several variants of a stage rendered from one take, matched, measured and written."""

from tackbench.shootout.run import Job, Shootout, prepare_shootout, shootout

__all__ = ["Job", "Shootout", "prepare_shootout", "shootout"]
