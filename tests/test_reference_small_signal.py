"""Operating point and small-signal response of every shipped stage against the independent solver.

Promised are 1 µV, 0.01 dB and 0.1 degrees. Both solve linear equations, so they are held a hundred times closer: a
coefficient wrong by a ten-thousandth is seen.
"""

from __future__ import annotations

import itertools
from collections.abc import Iterator, Mapping

import numpy as np
import pytest

from reference.make import circuit_names, circuit_of
from reference.solver import ReferenceSolver
from tackbench.circuit import Circuit
from tackbench.network import operating_point, response
from tackbench.stage import Stage, load_stage, shipped_stages

FREQUENCIES = np.geomspace(20.0, 20e3, 25)
VOLTS, DECIBELS, DEGREES = 1e-8, 1e-4, 1e-3
QUIETEST = 1e-9
"""Below so many volts per volt only the size of the difference counts: a level control at its end."""


def compare(circuit: Circuit) -> None:
    reference = ReferenceSolver(circuit)
    point = operating_point(circuit)
    for node, volts in reference.operating_point().items():
        assert point.node_volts[node] == pytest.approx(volts, abs=VOLTS), node
    amperes = reference.supply_current()
    if amperes is not None:
        assert point.supply_current == pytest.approx(amperes, rel=1e-6, abs=1e-11)
    got, expected = response(circuit, FREQUENCIES), reference.response(FREQUENCIES)
    heard = np.abs(expected) > QUIETEST
    assert np.all(np.abs(got - expected)[~heard] < 1e-3 * QUIETEST)
    ratio = got[heard] / expected[heard]
    assert np.max(np.abs(20 * np.log10(np.abs(ratio))), initial=0.0) < DECIBELS
    assert np.max(np.abs(np.degrees(np.angle(ratio))), initial=0.0) < DEGREES


def combinations(stage: Stage) -> Iterator[dict[str, object]]:
    """Every combination of the positions of all mods at every voltage that the stage offers."""
    assert stage.supply is not None
    positions = [[(mod.name, position) for position in mod.positions] for mod in stage.mods.values()]
    for chosen, volts in itertools.product(itertools.product(*positions), stage.supply.try_volts):
        yield {**dict(chosen), "supply": volts}


def surroundings(stage: Stage) -> Iterator[dict[str, object]]:
    """Each position of each mod in the cold, in the heat, and with all controls at either end."""
    for mod in stage.mods.values():
        for position in mod.positions:
            for celsius in (-5.0, 45.0):
                yield {mod.name: position, "temperature": celsius}
            for turned in (0.0, 1.0):
                yield {mod.name: position, **dict.fromkeys(stage.controls, turned)}


def compare_choices(stage: Stage, choices: Mapping[str, object]) -> None:
    try:
        compare(stage.variant(choices).circuit)
    except AssertionError as trouble:
        raise AssertionError(f"{dict(choices)}: {trouble}") from trouble


@pytest.mark.parametrize("name", shipped_stages())
def test_every_combination_of_positions_at_every_voltage(name: str) -> None:
    stage = load_stage(name)
    for choices in combinations(stage):
        compare_choices(stage, choices)


@pytest.mark.parametrize("name", shipped_stages())
def test_every_position_in_cold_and_heat_and_with_the_controls_at_their_ends(name: str) -> None:
    stage = load_stage(name)
    for choices in surroundings(stage):
        compare_choices(stage, choices)


@pytest.mark.parametrize("name", circuit_names())
def test_the_circuits_of_the_accuracy_table(name: str) -> None:
    compare(circuit_of(name))
