"""Quantities with units, letter codes, control positions and tolerances: read from and written for people."""

from tackbench.values.formatting import format_position, format_quantity
from tackbench.values.positions import parse_position, parse_tolerance
from tackbench.values.quantities import parse_quantity
from tackbench.values.units import UNITS, Unit
from tackbench.values.where import Where, shown

__all__ = [
    "UNITS",
    "Unit",
    "Where",
    "format_position",
    "format_quantity",
    "parse_position",
    "parse_quantity",
    "parse_tolerance",
    "shown",
]
