"""Takes times variants to volts."""

from tackbench.compiled import kernels_are_cached
from tackbench.kernel.lanes import MOST_LANES
from tackbench.render.prepared import NUMERICS, QUALITIES, PreparedStage, prepare
from tackbench.render.stream import GroupStream, SolveCounts, StageStream, UnsolvedError, side_by_side
from tackbench.render.whole import render, warm_up

__all__ = [
    "MOST_LANES",
    "NUMERICS",
    "QUALITIES",
    "GroupStream",
    "PreparedStage",
    "SolveCounts",
    "StageStream",
    "UnsolvedError",
    "kernels_are_cached",
    "prepare",
    "render",
    "side_by_side",
    "warm_up",
]
