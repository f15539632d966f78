"""Checks over all that a stage file mentions: pins that nothing meets, jacks and supplies that touch no part."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable

from tackbench.circuit import GROUND
from tackbench.circuit.checks import shorting_links
from tackbench.errors import nearest
from tackbench.stage.kinds import KINDS
from tackbench.stage.model import ROOM_CELSIUS, Stage
from tackbench.stage.mods import place
from tackbench.stage.netlist import flatten
from tackbench.stage.spec import PartSpec
from tackbench.values import Where


def check_connections(stage: Stage, every_part: Iterable[PartSpec]) -> None:
    """Refuse unconnected pins, links to nodes that are not there, idle jacks and idle supply nodes.

    ``every_part`` is whatever any variant can hold. A node counts as met when any position of any mod brings
    something to it: lifting may leave a dangling node, and so may a switch. Pots may have an end left open.
    """
    parts = list(every_part)
    touched = _touched(stage, parts)
    _check_links(stage, set(touched) | _fed(stage) | {GROUND})
    linked = {node for _, _, pair in _links(stage) for node in pair}
    _check_shorting_links(stage)
    _check_jacks(stage, set(touched) | linked)
    _check_pins(stage, parts, touched, linked)


def _touched(stage: Stage, parts: Iterable[PartSpec]) -> Counter[str]:
    """How many pins meet at each node, a pin that several positions describe counted once."""
    pins = {(part.ref, index, node) for part in parts for index, node in enumerate(part.pins)}
    return Counter(node for _, _, node in pins)


def _fed(stage: Stage) -> set[str]:
    """Nodes that jacks and supplies connect to."""
    fed = {stage.input.node, stage.output.node}
    if stage.supply is not None:
        fed |= {stage.supply.node, *(node for node, _ in stage.supply.rails)}
    return fed


def _links(stage: Stage) -> Iterable[tuple[str, str, tuple[str, str]]]:
    for mod in stage.mods.values():
        for position in mod.positions.values():
            for pair in position.link:
                yield mod.name, position.name, pair


def _check_links(stage: Stage, nodes: set[str]) -> None:
    for mod, position, pair in _links(stage):
        for node in pair:
            if node not in nodes:
                raise stage.where.at(part=place(mod, position), key="link").fault(
                    f"no part meets the node {node!r} of the link", nearest(node, nodes)
                )


def _check_shorting_links(stage: Stage) -> None:
    """Refuse a position whose own links short a source, whatever else is chosen."""
    volts = None if stage.supply is None else stage.supply.volts
    for mod in stage.mods.values():
        for position in mod.positions.values():
            if not position.link:
                continue
            gone = {*position.lift, *position.edits}
            sources = [part for ref, part in stage.parts.items() if part.kind == "volts" and ref not in gone]
            circuit = flatten(stage, sources, position.link, {}, volts, ROOM_CELSIUS)
            for fault in shorting_links(circuit):
                where = stage.where.at(part=place(mod.name, position.name), key="link")
                raise where.fault(fault.found, fault.expected)


def _check_jacks(stage: Stage, met: set[str]) -> None:
    for side, jack in (("input", stage.input), ("output", stage.output)):
        if jack.node not in met:
            raise stage.where.at(part=side, key="node").fault(
                f"no part meets the {side} node {jack.node!r}", nearest(jack.node, met - {GROUND})
            )
    if stage.supply is None:
        return
    for node, key in [(stage.supply.node, "node"), *((node, f"rails.{node}") for node, _ in stage.supply.rails)]:
        if node not in met:
            raise stage.where.at(part="supply", key=key).fault(
                f"the supply node {node!r} feeds nothing", nearest(node, met - {GROUND})
            )


def _check_pins(stage: Stage, parts: Iterable[PartSpec], touched: Counter[str], linked: set[str]) -> None:
    joined = _fed(stage) | linked | {GROUND}
    for part in parts:
        if part.kind == "pot":
            continue
        for pin, node in zip(_pin_names(part), part.pins, strict=True):
            if touched[node] == 1 and node not in joined:
                raise (
                    _part_place(stage, part)
                    .at(key=pin)
                    .fault(
                        f"the pin is unconnected: nothing else meets the node {node!r}",
                        nearest(node, [*(set(touched) | joined) - {node}]),
                    )
                )


def _pin_names(part: PartSpec) -> tuple[str, ...]:
    return tuple(name for name, count in KINDS[part.kind].pin_keys for _ in range(count))


def _part_place(stage: Stage, part: PartSpec) -> Where:
    """Where the part's table stands in the file."""
    if stage.parts.get(part.ref) is part:
        return stage.where.at(part=part.ref)
    for mod in stage.mods.values():
        for position in mod.positions.values():
            if position.fit.get(part.ref) is part:
                return stage.where.at(part=f"{place(mod.name, position.name)} fit.{part.ref}")
    return stage.where.at(part=part.ref)
