"""A variant as plain data for JSON: resolved values and model parameters in full, so that it outlives the library."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from tackbench.circuit import Circuit, Part
from tackbench.stage.surroundings import entries_around

if TYPE_CHECKING:
    from tackbench.stage.variant import Variant


def record_of(variant: Variant) -> dict[str, Any]:
    """The record: stage, choices, settings, circuit, and where each model's figures come from."""
    return {
        "stage": variant.stage.name,
        "title": variant.stage.title,
        "words": variant.words(),
        "choices": {name: _plain(value) for name, value in variant.choices.items()},
        "settings": dict(variant.settings),
        **_circuit_record(variant.circuit),
        "provenance": _provenance(variant),
    }


def _plain(value: Any) -> Any:
    return {key: _plain(item) for key, item in value.items()} if isinstance(value, dict) else value


def _circuit_record(circuit: Circuit) -> dict[str, Any]:
    supply = circuit.supply
    return {
        "input": {"node": circuit.input_node, "series_ohms": circuit.input_ohms},
        "output": {"node": circuit.output_node, "load_ohms": circuit.output_load_ohms},
        "supply": None
        if supply is None
        else {"node": supply.node, "volts": supply.volts, "ohms": supply.ohms, "rails": dict(supply.rails)},
        "temperature_kelvin": circuit.temperature,
        "parts": [_part_record(part) for part in circuit.parts],
    }


def _part_record(part: Part) -> dict[str, Any]:
    return {
        "ref": part.ref,
        "kind": part.kind,
        "section": part.section,
        "pins": list(part.pins),
        "value": part.value,
        "series_ohms": part.series_ohms,
        "polarity": part.polarity,
        "count": part.count,
        "model": part.model,
        "parameters": dict(part.parameters),
        "rated_volts": part.rated_volts,
        "tolerance": part.tolerance,
    }


def _provenance(variant: Variant) -> dict[str, Any]:
    found = {}
    for part in variant.parts.values():
        if part.model is not None and part.model.entry is not None:
            found[part.model.name] = part.model.entry.provenance()
    for name, entry in entries_around(variant.stage, variant.settings).items():
        found[name] = entry.provenance()
    return found
