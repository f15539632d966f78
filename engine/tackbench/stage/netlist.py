"""From the parts of a variant to the flat circuit in SI units."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping

from tackbench.circuit import Circuit, Part, Supply
from tackbench.parts import KIND_FAMILIES
from tackbench.stage.kinds import KINDS
from tackbench.stage.model import Stage
from tackbench.stage.spec import PartSpec
from tackbench.stage.tapers import halves

ZERO_CELSIUS = 273.15


def flatten(
    stage: Stage,
    parts: Iterable[PartSpec],
    links: Iterable[tuple[str, str]],
    controls: Mapping[str, float],
    volts: float | None,
    celsius: float,
    supply_ohms: float | None = None,
) -> Circuit:
    """The circuit of ``parts`` and wires with the controls at ``controls``, the supply at ``volts`` behind
    ``supply_ohms`` (None: the stage's own)."""
    flat = [item for part in parts for item in _flat_parts(part, controls)]
    flat.extend(Part(f"link {a}-{b}", "wire", (a, b)) for a, b in links)
    supply = None
    if stage.supply is not None and volts is not None:
        ohms = stage.supply.ohms if supply_ohms is None else supply_ohms
        supply = Supply(stage.supply.node, volts, ohms, stage.supply.rails)
    return Circuit(
        title=stage.title,
        parts=tuple(flat),
        input_node=stage.input.node,
        input_ohms=stage.input.ohms or 0.0,
        output_node=stage.output.node,
        output_load_ohms=stage.output.ohms,
        supply=supply,
        temperature=celsius + ZERO_CELSIUS,
    )


def _flat_parts(part: PartSpec, controls: Mapping[str, float]) -> Iterator[Part]:
    kind = KINDS[part.kind].netlist
    if part.kind == "pot":
        yield from _pot_halves(part, controls)
    elif part.model is None:
        yield Part(
            part.ref,
            kind,
            part.pins,
            part.value,
            series_ohms=part.ohms,
            rated_volts=part.rated,
            tolerance=part.tolerance,
        )
    else:
        polarity = -1 if KIND_FAMILIES[part.kind][1] == "p" else 1
        yield Part(
            part.ref,
            kind,
            part.pins,
            polarity=polarity,
            count=part.count,
            model=part.model.name,
            parameters=part.model.parameters,
        )


def _pot_halves(part: PartSpec, controls: Mapping[str, float]) -> Iterator[Part]:
    position = part.at if part.control is None else controls[part.control]
    end, wiper, other = part.pins
    for section, pins, ohms in zip(
        ("first", "second"),
        ((end, wiper), (wiper, other)),
        halves(part.value or 0.0, part.taper, position),
        strict=True,
    ):
        yield Part(part.ref, "resistor", pins, ohms, section, rated_volts=part.rated, tolerance=part.tolerance)
