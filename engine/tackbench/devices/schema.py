"""The parameter keys of each device family: names, units, limits, defaults. The laws stand beside this file."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any

MATERIALS: Mapping[str, tuple[float | None, float]] = {
    "silicon": (1.11, 3.0),
    "germanium": (0.67, 3.0),
    "schottky": (0.69, 2.0),
    "led": (None, 3.0),
}
"""Band gap in eV (None: must be given) and temperature exponent by material."""

_RULES: Mapping[str, tuple[str, Callable[[float], bool]]] = {
    ">0": ("a number above zero", lambda x: x > 0),
    ">=0": ("zero or a number above it", lambda x: x >= 0),
    "!=0": ("a number other than zero", lambda x: x != 0),
    "any": ("a number", lambda x: True),
}


@dataclass(frozen=True)
class Key:
    """One parameter key: its SI unit ("" for a bare number, "word" for text, "flag" for true/false),
    its rule (one of the keys of the rule table), whether it must be given, and its default (None: left out)."""

    name: str
    unit: str
    rule: str = ">0"
    required: bool = False
    default: float | str | bool | None = None
    report_only: bool = False

    def rule_text(self) -> str:
        return _RULES[self.rule][0]

    def allows(self, value: float) -> bool:
        return _RULES[self.rule][1](value)


_SEMICONDUCTOR = (
    Key("material", "word", default="silicon"),
    Key("band_gap", "eV"),
    Key("temperature_exponent", "", rule="any"),
)

FAMILIES: Mapping[str, tuple[Key, ...]] = {
    "diode": (
        Key("saturation_current", "A", required=True),
        Key("ideality", "", required=True),
        Key("series_ohms", "ohm", rule=">=0", default=0.0),
        Key("breakdown_volts", "V"),
        Key("breakdown_current", "A"),
        Key("breakdown_ideality", ""),
        Key("junction_capacitance", "F", rule=">=0", default=0.0),
        *_SEMICONDUCTOR,
        Key("max_current", "A", report_only=True),
        Key("max_reverse_volts", "V", report_only=True),
    ),
    "bipolar": (
        Key("saturation_current", "A", required=True),
        Key("forward_gain", "", required=True),
        Key("reverse_gain", "", required=True),
        Key("early_volts", "V"),
        Key("leakage_current", "A", rule=">=0", default=0.0),
        Key("base_emitter_capacitance", "F", rule=">=0", default=0.0),
        Key("base_collector_capacitance", "F", rule=">=0", default=0.0),
        *_SEMICONDUCTOR,
        Key("max_collector_volts", "V", report_only=True),
        Key("max_current", "A", report_only=True),
    ),
    "jfet": (
        Key("drain_current", "A", required=True),
        Key("pinch_off_volts", "V", rule="!=0", required=True),
        Key("channel_modulation", "1/V", rule=">=0", default=0.0),
        Key("gate_current", "A", default=1e-14),
        Key("gate_source_capacitance", "F", rule=">=0", default=0.0),
        Key("gate_drain_capacitance", "F", rule=">=0", default=0.0),
        Key("max_drain_volts", "V", report_only=True),
    ),
    "mosfet": (
        Key("threshold_volts", "V", rule="any", required=True),
        Key("transconductance", "A/V2", required=True),
        Key("channel_modulation", "1/V", rule=">=0", default=0.0),
        Key("gate_source_capacitance", "F", rule=">=0", default=0.0),
        Key("gate_drain_capacitance", "F", rule=">=0", default=0.0),
        Key("max_drain_volts", "V", report_only=True),
    ),
    "opamp": (
        Key("gain_bandwidth", "Hz", required=True),
        Key("slew_rate", "V/s", required=True),
        Key("open_loop_gain", "", required=True),
        Key("swing_high", "V", rule=">=0", required=True),
        Key("swing_low", "V", rule=">=0", required=True),
        Key("output_ohms", "ohm", required=True),
        Key("output_current", "A"),
        Key("input_ohms", "ohm"),
        Key("supply_current", "A", rule=">=0", default=0.0),
        Key("max_supply", "V", report_only=True),
        Key("input_margin_low", "V", rule="any", report_only=True),
        Key("input_margin_high", "V", rule="any", report_only=True),
        Key("crossover_prone", "flag", report_only=True),
    ),
}
"""Per family every key that a model may have. ``report_only`` keys change no sample."""

BREAKDOWN_IDEALITY = 1.0


def fill_defaults(family: str, given: Mapping[str, Any]) -> dict[str, Any]:
    """The complete parameter set: ``given`` (already SI and checked) with defaults and material values filled in."""
    filled: dict[str, Any] = {}
    for key in FAMILIES[family]:
        if key.name in given:
            filled[key.name] = given[key.name]
        elif key.default is not None:
            filled[key.name] = key.default
    if "material" in filled:
        gap, exponent = MATERIALS[filled["material"]]
        if gap is not None:
            filled.setdefault("band_gap", gap)
        filled.setdefault("temperature_exponent", exponent)
    if "breakdown_volts" in filled:
        filled.setdefault("breakdown_ideality", BREAKDOWN_IDEALITY)
    return filled
