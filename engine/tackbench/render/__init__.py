"""Takes times variants to volts."""

from tackbench.compiled import kernels_are_cached
from tackbench.render.prepared import NUMERICS, QUALITIES, PreparedStage, prepare
from tackbench.render.stream import SolveCounts, StageStream
from tackbench.render.whole import render, warm_up

__all__ = [
    "NUMERICS",
    "QUALITIES",
    "PreparedStage",
    "SolveCounts",
    "StageStream",
    "kernels_are_cached",
    "prepare",
    "render",
    "warm_up",
]
