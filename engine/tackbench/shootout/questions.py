"""What a shootout tries when nothing is asked: a shipped stage's own questions, else its mods and supply voltages."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Any

from tackbench.stage import Stage

MOST_OFFERED = 11
"""Files offered beside the bypass when nothing is asked: a dozen is what a listener can keep apart in one sitting
(common practice, no source)."""


@dataclass(frozen=True)
class Questions:
    """``base`` sets the reference, ``grid`` is multiplied out, ``words`` say what the grid answers."""

    words: str
    base: Mapping[str, str]
    grid: Mapping[str, tuple[str, ...]]


SHIPPED: Mapping[str, Questions] = MappingProxyType(
    {
        "two-voice": Questions(
            words="germanium against silicon, and 9 V against 24 V with and without the diodes",
            base={"voice": "drive", "clip": "germanium"},
            grid={"clip": ("germanium", "silicon", "off"), "supply": ("9", "24")},
        )
    }
)
"""The questions that players argue about, by the name of the shipped stage that can answer them."""


def questions_for(stage: Stage) -> Questions | None:
    """The questions of a stage that has them and every position they speak of; None for any other."""
    questions = SHIPPED.get(stage.name)
    if questions is None or stage.supply is None:
        return None
    spoken = [*((key, (value,)) for key, value in questions.base.items()), *questions.grid.items()]
    known = all(_has(stage, key, position) for key, positions in spoken for position in positions)
    return questions if known else None


def _has(stage: Stage, key: str, position: str) -> bool:
    return key == "supply" or (key in stage.mods and position in stage.mods[key].positions)


def offered_for(stage: Stage, chosen: Mapping[str, Any]) -> tuple[list[tuple[str, Any]], tuple[str, ...]]:
    """The key and value pairs to try one at a time, and a sentence for each that did not fit in.

    Every mod lends a position in turn, so that a mod with many positions does not crowd out the others; what the
    user has set already is not tried.
    """
    lanes = [_positions(stage, name) for name in stage.mods if name not in chosen]
    if stage.supply is not None and "supply" not in chosen:
        lanes.append([("supply", volts) for volts in stage.supply.try_volts if volts != stage.supply.volts])
    order = _in_turn(lanes)
    kept = set(order[: MOST_OFFERED - 1])
    tried = [pair for lane in lanes for pair in lane if pair in kept]
    left_out = tuple(
        f"left out: {key} {_plain(value)}; ask for it with --try {key}={_plain(value)}"
        for lane in lanes
        for key, value in lane
        if (key, value) not in kept
    )
    return tried, left_out


def _positions(stage: Stage, name: str) -> list[tuple[str, Any]]:
    mod = stage.mods[name]
    return [(name, position) for position in mod.positions if position != mod.at]


def _in_turn(lanes: list[list[tuple[str, Any]]]) -> list[tuple[str, Any]]:
    """The first of every lane, then the second of every lane, and so on."""
    longest = max((len(lane) for lane in lanes), default=0)
    return [lane[index] for index in range(longest) for lane in lanes if index < len(lane)]


def _plain(value: Any) -> str:
    return f"{value:g}" if isinstance(value, float) else str(value)
