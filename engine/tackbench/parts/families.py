"""The families of the parts library: the devices, which have laws, and what stands around a stage, which has none."""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType
from typing import Any

from tackbench.devices.schema import FAMILIES, Key, fill_defaults

SOURCES: Mapping[str, tuple[Key, ...]] = MappingProxyType(
    {
        "battery": (
            Key("open_volts", "V", required=True),
            Key("internal_ohms", "ohm", rule=">=0", required=True),
            Key("nominal_volts", "V", default=9.0),
        ),
        "pickup": (
            Key("coil_ohms", "ohm", required=True),
            Key("coil_henries", "H", required=True),
            Key("coil_farads", "F", required=True),
            Key("volume_ohms", "ohm", required=True),
            Key("tone_ohms", "ohm", required=True),
            Key("tone_farads", "F", required=True),
        ),
    }
)
"""A battery (or adapter): volts without load, the resistance behind them, and the volts it is sold by. A pickup: its
coil as a resistance and an inductance in series with a capacitance across both, and the guitar's volume pot, tone pot
and tone capacitor."""

KEYS: Mapping[str, tuple[Key, ...]] = MappingProxyType({**FAMILIES, **SOURCES})
"""Every key that an entry of each family may have."""


def complete(family: str, given: Mapping[str, Any]) -> dict[str, Any]:
    """The complete parameter set of an entry: ``given`` (SI, checked) with defaults and material values filled in."""
    if family in FAMILIES:
        return fill_defaults(family, given)
    defaults = {key.name: key.default for key in SOURCES[family] if key.default is not None}
    return {**defaults, **given}
