"""One concrete circuit: a stage with every mod, control, voltage, part value and the temperature chosen."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property
from types import MappingProxyType
from typing import Any

from tackbench.circuit import Circuit
from tackbench.circuit.checks import first_fault
from tackbench.stage.choices import choice_of, normalised
from tackbench.stage.guitar import with_guitar
from tackbench.stage.model import ROOM_CELSIUS, SUPPLY, TEMPERATURE, Stage
from tackbench.stage.netlist import flatten
from tackbench.stage.resolve import Bench, resolve
from tackbench.stage.spec import PartSpec
from tackbench.stage.surroundings import battery_ohms, guitar_of, surrounding_settings
from tackbench.values import Where


@dataclass(frozen=True)
class Variant:
    """A variant of ``stage``.

    ``choices`` are only what was chosen, in normal form and order; ``settings`` every mod's position, every
    control (0 to 1), the supply (volts, when there is one), the temperature (degrees Celsius) and, when chosen, the
    battery and the guitar; ``parts`` the stage's parts as they stand, by designator; ``circuit`` the flat netlist.
    """

    stage: Stage
    choices: Mapping[str, object]
    settings: Mapping[str, Any]
    parts: Mapping[str, PartSpec] = field(repr=False)
    circuit: Circuit = field(repr=False)

    def words(self, reference: Variant | None = None) -> str:
        """What differs from ``reference`` (or from the stage as built), in words with values."""
        from tackbench.stage.words import difference_words

        return difference_words(self, reference if reference is not None else self.stage.variant())

    @cached_property
    def notes(self) -> tuple[str, ...]:
        """What the user must know about this variant and can be told without solving it, one sentence each."""
        from tackbench.stage.notes import notes_of

        return notes_of(self)

    @cached_property
    def over_limits(self) -> tuple[str, ...]:
        """Ratings that this variant certainly exceeds, each naming the part and the limit; empty when fine."""
        from tackbench.stage.limits import over_limits_of

        return over_limits_of(self)

    def record(self) -> dict[str, Any]:
        """Everything that makes this variant, ready for JSON: part values and model parameters in full."""
        from tackbench.stage.record import record_of

        return record_of(self)


def make_variant(stage: Stage, choices: Mapping[str, object]) -> Variant:
    """The variant of ``stage`` with ``choices`` made. Raises InputError, also when the circuit is unsound."""
    chosen = normalised(stage, choices)
    settings = _settings(stage, chosen)
    bench = resolve(stage, {name: settings[name] for name in stage.mods})
    _choose_parts(bench, chosen, choices)
    circuit = flatten(
        stage,
        bench.parts.values(),
        bench.links,
        {name: settings[name] for name in stage.controls},
        settings.get(SUPPLY),
        settings[TEMPERATURE],
        battery_ohms(stage, settings),
    )
    guitar = guitar_of(stage, settings)
    if guitar is not None:
        circuit = with_guitar(circuit, guitar)
    _check(stage, circuit, bench)
    return Variant(
        stage, MappingProxyType(chosen), MappingProxyType(settings), MappingProxyType(bench.parts), circuit
    )


def _settings(stage: Stage, chosen: Mapping[str, Any]) -> dict[str, Any]:
    settings: dict[str, Any] = {name: chosen.get(name, mod.at) for name, mod in stage.mods.items()}
    settings.update({name: chosen.get(name, control.at) for name, control in stage.controls.items()})
    if stage.supply is not None:
        settings[SUPPLY] = chosen.get(SUPPLY, stage.supply.volts)
    settings[TEMPERATURE] = chosen.get(TEMPERATURE, ROOM_CELSIUS)
    return {**settings, **surrounding_settings(stage, chosen)}


def _choose_parts(bench: Bench, chosen: dict[str, object], raw: Mapping[str, object]) -> None:
    """Apply the part choices last, each as it was written, and put its normal form for this very part back."""
    written = {name.strip(): value for key, value in raw.items() for name in key.split("+")}
    for name in chosen:
        if name in bench.stage.known_parts():
            where = Where(bench.stage.name, name)
            chosen[name] = choice_of(bench.choose(name, written[name], where), written[name])


def _check(stage: Stage, circuit: Circuit, bench: Bench) -> None:
    fault = first_fault(circuit)
    if fault is None:
        return
    by = next((place for (a, b), place in bench.links.items() if fault.part == f"link {a}-{b}"), None)
    part, key = (by, "link") if by is not None else (fault.part, fault.key)
    raise stage.where.at(part=part, key=key).fault(fault.found, fault.expected)
