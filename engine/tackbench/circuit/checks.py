"""What is wrong with a circuit before any equation is written: shorted sources, missing bias, rails too close."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass

from tackbench.circuit.graph import Groups, ideal_sources, is_short, is_short_at_dc, nominal_volts
from tackbench.circuit.netlist import GROUND, Circuit, Part

RAIL_SOFTNESS = 0.05
"""Volts; the op-amp's rail limits bend over this range (the s of its law)."""

_INPUTS = {"opamp": ("plus", "minus"), "bipolar": ("base",), "jfet": ("gate",), "mosfet": ("gate",)}
_PATHS = {
    "resistor": (("a", "b"),),
    "inductor": (("a", "b"),),
    "wire": (("a", "b"),),
    "source": (("plus", "minus"),),
    "diode": (("anode", "cathode"),),
    "bipolar": (("collector", "emitter"),),
    "jfet": (("drain", "source"),),
    "mosfet": (("drain", "source"),),
    "opamp": (("out", "positive_rail"), ("out", "negative_rail")),
}


@dataclass(frozen=True)
class Fault:
    """One thing that is wrong: the part, its pin or key (or None), what was found, what would be right."""

    part: str
    key: str | None
    found: str
    expected: str


def first_fault(circuit: Circuit) -> Fault | None:
    """The first fault of the circuit, or None when it is sound."""
    return next(faults(circuit), None)


def faults(circuit: Circuit) -> Iterator[Fault]:
    """Every fault of the circuit, the gravest first."""
    checks: tuple[Callable[[Circuit], Iterator[Fault]], ...] = (
        shorting_links,
        _source_loops,
        _sources_across_inductors,
        _unbiased_inputs,
        _narrow_rails,
    )
    for check in checks:
        yield from check(circuit)


def shorting_links(circuit: Circuit) -> Iterator[Fault]:
    """Wires that short a source: the supply (whatever its resistance), a rail, a source part, a take without
    series resistance."""
    sources = [(name, plus, minus) for name, plus, minus, _ in ideal_sources(circuit)]
    if circuit.input_ohms == 0.0:
        sources.append(("input", circuit.input_node, GROUND))
    groups = Groups()
    for part in circuit.parts:
        if part.kind != "wire":
            continue
        groups.join(*part.pins)
        for name, plus, minus in sources:
            if plus != minus and groups.same(plus, minus):
                words = f"joining {part.pins[0]!r} and {part.pins[1]!r} shorts the {_source_words(name)}"
                yield Fault(part.ref, None, words, "a link may not short a source")
                return


def _source_words(name: str) -> str:
    if name == "input":
        return "take at the input, which has no series resistance"
    return name if name.startswith("supply") else f"source {name}"


def _stiff_sources(circuit: Circuit) -> Iterator[tuple[str, str, str, float | None]]:
    """The sources without resistance: (name, plus, minus, volts; None for the take)."""
    if circuit.input_ohms == 0.0:
        yield "input", circuit.input_node, GROUND, None
    for name, plus, minus, volts in ideal_sources(circuit):
        if not (name == "supply" and circuit.supply is not None and circuit.supply.ohms > 0.0):
            yield name, plus, minus, volts


def _source_loops(circuit: Circuit) -> Iterator[Fault]:
    """Sources without resistance that are shorted, or in parallel with others: their currents have no bound."""
    groups, shorts_only = Groups(), Groups()
    for part in circuit.parts:
        if is_short(part):
            groups.join(*part.pins)
            shorts_only.join(*part.pins)
    for name, plus, minus, _ in _stiff_sources(circuit):
        if groups.join(plus, minus):
            continue
        if shorts_only.same(plus, minus):
            yield Fault(
                name, None, "both its ends are on one node: it is shorted", "leave something between its ends"
            )
        else:
            words = "it stands in parallel with other sources, and none of them has a resistance"
            yield Fault(name, None, words, "put a resistance in series with one of them")
    supply = circuit.supply
    for node, _ in supply.rails if supply is not None and supply.ohms > 0.0 else ():
        if supply is not None and shorts_only.same(node, supply.node):
            words = "it is joined with the supply node that it is made from"
            yield Fault(f"supply rail {node}", None, words, "leave a part between the two")


def _sources_across_inductors(circuit: Circuit) -> Iterator[Fault]:
    """Sources of direct voltage shorted by inductors without winding resistance: no operating point exists."""
    groups = Groups()
    coils: list[Part] = []
    for part in circuit.parts:
        if is_short_at_dc(part):
            groups.join(*part.pins)
            coils.extend([part] if part.kind == "inductor" else [])
    if not coils:
        return
    sources = list(_stiff_sources(circuit))
    for _, plus, minus, volts in sources:
        if not volts:
            groups.join(plus, minus)
    for name, plus, minus, volts in sources:
        if volts and not groups.join(plus, minus):
            coil = next((c for c in coils if groups.same(c.pins[0], plus)), coils[0])
            words = f"it stands across the {_source_words(name)} with no resistance: there is no operating point"
            yield Fault(coil.ref, "ohms", words, "give the inductor its winding resistance, for example ohms = 100")


def _unbiased_inputs(circuit: Circuit) -> Iterator[Fault]:
    """Op-amp inputs, bases and gates that no direct-current path joins to ground."""
    groups = _direct_current_groups(circuit)
    for part in circuit.parts:
        for pin in _INPUTS.get(part.kind, ()):
            if not groups.same(part.pin(pin), GROUND):
                words = f"the node {part.pin(pin)!r} has no direct-current path to ground: it needs a bias path"
                yield Fault(part.ref, pin, words, "add a resistor from it to ground or to a bias voltage")


def _direct_current_groups(circuit: Circuit) -> Groups:
    """Nodes joined by whatever carries direct current. A transistor's own base and gate junctions do not count."""
    groups = Groups()
    groups.join(circuit.input_node, GROUND)
    if circuit.output_load_ohms is not None:
        groups.join(circuit.output_node, GROUND)
    for _, plus, minus, _ in ideal_sources(circuit):
        groups.join(plus, minus)
    for part in circuit.parts:
        for a, b in _PATHS.get(part.kind, ()):
            groups.join(part.pin(a), part.pin(b))
        if part.kind == "opamp" and "input_ohms" in part.parameters:
            groups.join(part.pin("plus"), part.pin("minus"))
    return groups


def _narrow_rails(circuit: Circuit) -> Iterator[Fault]:
    """Op-amps whose nominal rails leave its output no room."""
    volts = nominal_volts(circuit)
    for part in circuit.parts:
        if part.kind != "opamp":
            continue
        high, low = volts.get(part.pin("positive_rail")), volts.get(part.pin("negative_rail"))
        if high is None or low is None:
            continue
        swings = part.parameters["swing_high"] + part.parameters["swing_low"]
        least = swings + 4.0 * RAIL_SOFTNESS
        if high - low < least:
            yield Fault(
                part.ref,
                "power",
                f"its rails are {high - low:.4g} V apart (positive less negative)",
                f"a {part.model} stays {swings:.3g} V inside them and needs at least {least:.3g} V",
            )
