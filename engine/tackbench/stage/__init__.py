"""Stage files: reading and checking them, choosing a variant, and the circuit that comes of it."""

from tackbench.stage.model import Control, Jack, Mod, Position, Stage, SupplySpec
from tackbench.stage.reader import read_stage
from tackbench.stage.shipped import load_stage, shipped_stages
from tackbench.stage.spec import Model, PartSpec
from tackbench.stage.surroundings import SURROUNDINGS, free_surroundings
from tackbench.stage.variant import Variant

__all__ = [
    "SURROUNDINGS",
    "Control",
    "Jack",
    "Mod",
    "Model",
    "PartSpec",
    "Position",
    "Stage",
    "SupplySpec",
    "Variant",
    "free_surroundings",
    "load_stage",
    "read_stage",
    "shipped_stages",
]
