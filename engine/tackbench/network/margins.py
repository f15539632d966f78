"""Warnings about what the op-amp law leaves out: inputs that rest nearer to a rail than the real part allows."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from tackbench.circuit import Circuit, Part


def margin_warnings(circuit: Circuit, node_volts: Mapping[str, float]) -> tuple[str, ...]:
    """One sentence for each op-amp with an input whose resting volts lie within its sheet's margin of a rail.

    ``node_volts`` are the resting voltages by node name. The margins are the report-only keys ``input_margin_low``
    and ``input_margin_high``; a model without them gives no warning. They change no sample.
    """
    parts = (part for part in circuit.parts if part.kind == "opamp")
    return tuple(sentence for part in parts for sentence in _warnings(part, node_volts))


def _warnings(part: Part, volts: Mapping[str, float]) -> Iterator[str]:
    high, low = volts[part.pin("positive_rail")], volts[part.pin("negative_rail")]
    inputs = {pin: volts[part.pin(pin)] for pin in ("plus", "minus")}
    for key, gaps in (
        ("input_margin_low", {pin: value - low for pin, value in inputs.items()}),
        ("input_margin_high", {pin: high - value for pin, value in inputs.items()}),
    ):
        needed = part.parameters.get(key)
        pin = min(gaps, key=lambda name: gaps[name])
        if needed is not None and gaps[pin] < needed - 1e-9:
            side = "negative" if key == "input_margin_low" else "positive"
            yield (
                f"{part.ref} ({part.model}): its {pin} input rests {gaps[pin]:.3g} V from the {side} rail, nearer "
                f"than the {needed:.3g} V its sheet allows: a real part may distort or reverse here; not modelled"
            )
