"""The identity of a render: a hash of everything that its samples depend on, and of nothing else."""

from __future__ import annotations

import hashlib
import json
import math
from collections.abc import Mapping
from typing import Any

from tackbench.circuit import Circuit, Part
from tackbench.devices import FAMILIES
from tackbench.render import NUMERICS

_FOR_REPORTS = frozenset(key.name for keys in FAMILIES.values() for key in keys if key.report_only)


def identity(circuit: Circuit, fingerprint: str, volts_per_full_scale: float, quality: str) -> str:
    """SHA-256 in hexadecimal over the resolved circuit, the take's samples and calibration, quality and NUMERICS.

    Names of stages and models, ratings and tolerances are left out: they change no sample.
    """
    whole = {
        "circuit": _circuit(circuit),
        "take": fingerprint,
        "volts_per_full_scale": volts_per_full_scale,
        "quality": quality,
        "numerics": NUMERICS,
    }
    return hashlib.sha256(json.dumps(whole, sort_keys=True, allow_nan=False).encode()).hexdigest()


def _circuit(circuit: Circuit) -> dict[str, Any]:
    supply = circuit.supply
    return {
        "parts": [_part(part) for part in circuit.parts],
        "input": [circuit.input_node, circuit.input_ohms],
        "output": [circuit.output_node, circuit.output_load_ohms],
        "supply": None if supply is None else [supply.node, supply.volts, supply.ohms, list(supply.rails)],
        "temperature": circuit.temperature,
    }


def _part(part: Part) -> list[Any]:
    parameters = {key: value for key, value in part.parameters.items() if key not in _FOR_REPORTS}
    return [
        part.ref,
        part.kind,
        list(part.pins),
        part.value,
        part.section,
        part.series_ohms,
        part.polarity,
        part.count,
        parameters,
    ]


def json_ready(value: Any) -> Any:
    """The value with tuples as lists, mappings as dictionaries, and numbers that do not exist as None."""
    if isinstance(value, Mapping):
        return {str(key): json_ready(item) for key, item in value.items()}
    if isinstance(value, (list, tuple)):
        return [json_ready(item) for item in value]
    if isinstance(value, float) and not math.isfinite(value):
        return None
    if isinstance(value, (str, int, float)) or value is None:
        return value
    return json_ready(value.item()) if hasattr(value, "item") else str(value)
