"""Every shipped stage, and in the slow sweep every position of its mods: a chord's attack against the reference."""

from __future__ import annotations

import numpy as np
import pytest

from reference.compare import distance
from reference.make import RATE
from reference.signals import SIGNALS
from reference.solver import ReferenceSolver
from tackbench.circuit import Circuit
from tackbench.render.prepared import prepare
from tackbench.stage import load_stage, shipped_stages

FRAMES, AFTER = 1200, 256
LIMITS = {"draft": -75.0, "standard": -95.0, "best": -105.0}

POSITIONS = [
    (name, mod.name, position)
    for name in shipped_stages()
    for mod in load_stage(name).mods.values()
    for position in mod.positions
]


def compare(circuit: Circuit) -> None:
    take = SIGNALS["chord"]
    expected, _ = ReferenceSolver(circuit).render(take, FRAMES, RATE)
    for quality, limit in LIMITS.items():
        stream = prepare(circuit, RATE, quality).stream(1)
        volts = take(np.arange(FRAMES + AFTER) / RATE)
        got = np.concatenate([stream.process(volts[:, None]), stream.finish()])[:FRAMES, 0]
        found = distance(got, expected).whole
        print(f"{circuit.title} {quality}: {found:.0f} dB")
        assert found <= limit, quality


@pytest.mark.parametrize("name", shipped_stages())
def test_stages_as_built_keep_their_distance_from_the_reference(name: str) -> None:
    compare(load_stage(name).variant().circuit)


@pytest.mark.slow
@pytest.mark.parametrize(("name", "mod", "position"), POSITIONS)
def test_every_position_keeps_its_distance_from_the_reference(name: str, mod: str, position: str) -> None:
    compare(load_stage(name).variant({mod: position}).circuit)
