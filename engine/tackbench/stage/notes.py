"""What a user must know about a variant and can be told without solving it."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

from tackbench.circuit import Circuit, Part
from tackbench.circuit.graph import Groups, is_short, nominal_volts
from tackbench.stage.limits import limit_notes, unrated
from tackbench.stage.model import SUPPLY
from tackbench.stage.surroundings import BATTERY, battery_count, battery_ohms, entries_around, guitar_of
from tackbench.values import format_quantity

if TYPE_CHECKING:
    from tackbench.stage.variant import Variant


def notes_of(variant: Variant) -> tuple[str, ...]:
    """Every note, one sentence each."""
    return (
        *_supply_notes(variant),
        *limit_notes(variant),
        *_unrated_notes(variant),
        *_lone_diode_notes(variant),
        *_device_notes(variant),
        *_source_notes(variant),
        *_around_notes(variant),
        *_file_notes(variant),
    )


def _supply_notes(variant: Variant) -> Iterator[str]:
    supply = variant.stage.supply
    if (
        supply is None
        or battery_ohms(variant.stage, variant.settings) is not None
        or abs(variant.settings[SUPPLY]) <= abs(supply.volts)
    ):
        return
    chosen, own = format_quantity(variant.settings[SUPPLY], "V"), format_quantity(supply.volts, "V")
    yield f"{chosen} is above the stage's own {own}: your box may not be built for this; check every rating"


def _unrated_notes(variant: Variant) -> Iterator[str]:
    """Capacitors that certainly see volts and whose rating the file does not give."""
    bare = unrated(variant)
    if bare:
        sees = "which sees" if len(bare) == 1 else "which see"
        yield f"no rating given for {', '.join(bare)}, {sees} the supply: look at the part itself"


def _lone_diode_notes(variant: Variant) -> Iterator[str]:
    """One diode of an antiparallel pair changed alone by a part choice."""
    for one, two in antiparallel_pairs(variant.circuit):
        chosen = [part for part in (one, two) if part.ref in variant.choices]
        if len(chosen) != 1 or (one.parameters, one.count) == (two.parameters, two.count):
            continue
        changed, stays = chosen[0], two if chosen[0] is one else one
        words = {part.ref: variant.parts[part.ref].value_words() for part in (one, two)}
        refs = f"{one.ref}+{two.ref}={variant.choices[changed.ref]}"
        advice = f"; for both write {refs}" if isinstance(variant.choices[changed.ref], str) else ""
        yield f"{stays.ref} stays {words[stays.ref]}: asymmetric{advice}"


def antiparallel_pairs(circuit: Circuit) -> list[tuple[Part, Part]]:
    """Diodes between the same two nodes (wires and zero ohms counted as one node) in opposite directions."""
    groups = Groups()
    for part in circuit.parts:
        if is_short(part):
            groups.join(*part.pins[:2])
    seen: dict[tuple[str, str], list[Part]] = {}
    pairs: list[tuple[Part, Part]] = []
    for part in circuit.parts:
        if part.kind == "diode":
            ends = groups.of(part.pins[0]), groups.of(part.pins[1])
            pairs.extend((other, part) for other in seen.get((ends[1], ends[0]), ()) if ends[0] != ends[1])
            seen.setdefault(ends, []).append(part)
    return pairs


_COLLECTOR_RATINGS = ("max_collector_volts", "max_drain_volts")


def _device_notes(variant: Variant) -> Iterator[str]:
    """What the real device does and its model does not, what a type number alone cannot tell, and transistors that
    could see more volts than they stand, if the stage lets them."""
    certain = nominal_volts(variant.circuit).values()
    span = max(certain) - min(certain)
    for part in variant.circuit.parts:
        rating = next((part.parameters[key] for key in _COLLECTOR_RATINGS if key in part.parameters), None)
        if rating is not None and span > rating:
            yield (
                f"{part.ref} ({part.model}) stands {format_quantity(rating, 'V')} and the supply spans "
                f"{format_quantity(span, 'V')}: make sure that it never sees all of it"
            )
        if part.parameters.get("crossover_prone"):
            yield (
                f"{part.ref} ({part.model}): the real output stage crosses over audibly when it must sink and source "
                "in turn; this is not modelled"
            )
        if part.kind == "mosfet" and part.pin("gate") == part.pin("drain"):
            model = variant.parts[part.ref].model
            entry = None if model is None else model.entry
            if entry is not None and entry.low is not None and entry.high is not None:
                least, most = (
                    format_quantity(abs(bound["threshold_volts"]), "V") for bound in (entry.low, entry.high)
                )
                yield (
                    f"{part.ref} serves as a diode: it clips at its threshold, anywhere from {least} to {most} in "
                    "its type; measure yours"
                )


def _source_notes(variant: Variant) -> Iterator[str]:
    """Models whose figures are from memory, and models that come from the user's own files."""
    memory: dict[str, list[str]] = {}
    own: dict[str, list[str]] = {}
    for part in variant.parts.values():
        entry = part.model.entry if part.model is not None else None
        if entry is not None and entry.from_memory:
            memory.setdefault(entry.name, []).append(part.ref)
        if entry is not None and entry.own:
            own.setdefault(f"{entry.name} is your own ({entry.file})", []).append(part.ref)
    for name, refs in memory.items():
        yield f"figures of {name} ({', '.join(refs)}) are from memory, in part or whole: check a data sheet"
    for words, refs in own.items():
        yield f"{', '.join(refs)}: {words}"


def _around_notes(variant: Variant) -> Iterator[str]:
    """What the battery and the guitar are, and where their figures come from."""
    stage, settings = variant.stage, variant.settings
    ohms = battery_ohms(stage, settings)
    if ohms is not None:
        count = battery_count(stage, settings[BATTERY])
        several = f"{count} in series, " if count > 1 else ""
        volts = format_quantity(settings[SUPPLY], "V")
        yield f"the battery gives {several}{volts} without load behind {format_quantity(ohms, 'ohm')}"
    if guitar_of(stage, settings) is not None and stage.input.ohms:
        yield (
            f"the guitar takes the place of the {format_quantity(stage.input.ohms, 'ohm')} in series with the input, "
            "which stand for one"
        )
    for name, entry in entries_around(stage, settings).items():
        if entry.from_memory:
            what = "the battery" if entry.kind == "battery" else name
            yield f"figures of {what} are from memory, in part or whole: measure yours"
        if entry.own:
            yield f"{name} is your own ({entry.file})"


def _file_notes(variant: Variant) -> Iterator[str]:
    """What the stage file leaves open, and node names that look like ground and are not."""
    stage = variant.stage
    if stage.input.assumed:
        yield "the file gives no series resistance at the input: none is assumed"
    if stage.output.assumed:
        yield "the file gives no load at the output: none is assumed"
    for node in variant.circuit.nodes():
        if node.casefold() in ("gnd", "ground", "earth"):
            yield f'the node {node!r} is a node like any other: ground is written "0"'
