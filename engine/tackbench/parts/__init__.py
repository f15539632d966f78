"""The parts library: reading it, looking a model up, and the places where part files are kept."""

from tackbench.parts.entries import PartEntry
from tackbench.parts.families import KEYS
from tackbench.parts.library import PartsLibrary, known_kinds, load_parts
from tackbench.parts.parameters import KIND_FAMILIES, read_parameters
from tackbench.parts.places import models_root
from tackbench.parts.tomlfile import check_format, parse_toml, read_toml

__all__ = [
    "KEYS",
    "KIND_FAMILIES",
    "PartEntry",
    "PartsLibrary",
    "check_format",
    "known_kinds",
    "load_parts",
    "models_root",
    "parse_toml",
    "read_parameters",
    "read_toml",
]
