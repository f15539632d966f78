"""What every shipped stage owes its user: values one can buy, ratings that hold, positions that build, a sound."""

from __future__ import annotations

import itertools

import numpy as np
import pytest

from tackbench.network import operating_point, response
from tackbench.stage import Stage, load_stage, shipped_stages

STAGES = {name: load_stage(name) for name in shipped_stages()}
EXPECTED = {
    "charge-pump",
    "flat-boost",
    "fuzz-germanium",
    "fuzz-silicon",
    "hard-clipper",
    "jfet-booster",
    "mosfet-booster",
    "rail-clipper",
    "soft-clipper",
    "tone-boost",
    "transistor-booster",
    "treble-booster",
    "two-voice",
}
E12 = {10, 12, 15, 18, 22, 27, 33, 39, 47, 56, 68, 82}
SERIES = {"resistor": E12, "capacitor": {10, 15, 22, 33, 47, 68}, "pot": {10, 20, 25, 50}}
"""IEC 60063 (from memory) for resistors and capacitors; pots as they are sold (common practice, no source)."""

DEAD_ON_PURPOSE = {("jfet-booster", "transistor", "high")}
"""The hottest JFET that its type allows, in a circuit made for the middle of it."""

each_stage = pytest.mark.parametrize("name", sorted(STAGES))


def positions(stage: Stage) -> list[dict[str, str]]:
    """Every combination of the positions of all mods."""
    names = list(stage.mods)
    return [
        dict(zip(names, chosen, strict=True))
        for chosen in itertools.product(*(stage.mods[name].positions for name in names))
    ]


def test_a_dozen_stages_ship_beside_the_two_voice_drive() -> None:
    assert set(STAGES) == EXPECTED


@each_stage
def test_values_can_be_bought(name: str) -> None:
    stage = STAGES[name]
    for parts in stage.known_parts().values():
        for part in parts:
            if part.kind in SERIES and part.value is not None:
                digits = part.value / 10.0 ** (np.floor(np.log10(part.value) + 1e-9) - 1.0)
                assert min(abs(digits - known) for known in SERIES[part.kind]) < 1e-6, part.ref
    for choices in positions(stage):
        for part in stage.variant(choices).parts.values():
            if part.kind in SERIES and part.value is not None:
                digits = part.value / 10.0 ** (np.floor(np.log10(part.value) + 1e-9) - 1.0)
                assert min(abs(digits - known) for known in SERIES[part.kind]) < 1e-6, (part.ref, choices)


@each_stage
def test_every_combination_builds_within_its_ratings_at_every_voltage_offered(name: str) -> None:
    stage = STAGES[name]
    assert stage.supply is not None
    for choices, volts in itertools.product(positions(stage), stage.supply.try_volts):
        assert stage.variant({**choices, "supply": volts}).over_limits == (), (choices, volts)


@each_stage
def test_every_capacitor_has_a_rating_that_stands_its_resting_volts(name: str) -> None:
    """With one and a half times to spare for the largest voltage that the stage offers (builders' practice)."""
    stage = STAGES[name]
    assert stage.supply is not None
    highest = max(stage.supply.try_volts, key=abs)
    for choices in positions(stage):
        variant = stage.variant({**choices, "supply": highest})
        rest = operating_point(variant.circuit).node_volts
        for part in variant.circuit.parts:
            if part.kind == "capacitor":
                assert part.rated_volts is not None, (part.ref, choices)
                across = abs(rest.get(part.pins[0], 0.0) - rest.get(part.pins[1], 0.0))
                assert part.rated_volts >= 1.4 * across, (part.ref, across, choices)


@each_stage
def test_every_position_passes_the_guitar(name: str) -> None:
    """Somewhere between 200 Hz and 5 kHz each position alone amplifies, all knobs as built."""
    stage = STAGES[name]
    hertz = np.geomspace(200.0, 5_000.0, 9)
    for mod in stage.mods.values():
        for position in mod.positions:
            gain = np.abs(response(stage.variant({mod.name: position}).circuit, hertz)).max()
            assert 1.5 < gain < 2_000.0 or (name, mod.name, position) in DEAD_ON_PURPOSE, (mod.name, position)


@each_stage
def test_controls_turn_up_to_the_right(name: str) -> None:
    """A knob called boost, drive, fuzz, gain or level makes it louder all the way round."""
    stage = STAGES[name]
    for control in stage.controls:
        if control in ("boost", "drive", "fuzz", "gain", "level"):
            sweep = [stage.variant({control: x}).circuit for x in (0.0, 0.25, 0.5, 0.75, 1.0)]
            gains = [np.abs(response(circuit, [1_000.0]))[0] for circuit in sweep]
            assert np.all(np.diff(gains) > 0), (control, gains)


@each_stage
def test_texts_say_what_it_is(name: str) -> None:
    stage = STAGES[name]
    assert stage.title
    assert len(stage.about) > 40
    assert len(stage.mods) >= 1
    assert not stage.input.assumed
    assert not stage.output.assumed
