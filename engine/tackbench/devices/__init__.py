"""Device families: parameter keys and laws, each law written once."""

from tackbench.devices.schema import FAMILIES, MATERIALS, Key, fill_defaults

__all__ = ["FAMILIES", "MATERIALS", "Key", "fill_defaults"]
