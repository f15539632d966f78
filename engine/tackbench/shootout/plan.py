"""Which variants a shootout holds: one change each against the reference, or the whole product of the changes."""

from __future__ import annotations

import itertools
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from tackbench.errors import InputError
from tackbench.shootout.questions import offered_for, questions_for
from tackbench.stage import Stage, Variant

Choices = Mapping[str, Any]
"""Names of mods, controls, parts, ``supply`` and ``temperature`` to what was chosen for them."""

MOST_VARIANTS = 400
"""More variants than this in one shootout are taken for a slip of the keyboard."""


@dataclass(frozen=True)
class Plan:
    """The variants of a shootout, the reference first.

    ``merged`` counts the tried variants that turned out to be the same circuit as another one; ``left_out`` says, one
    sentence each, what was not asked and could have been; ``question`` is what the plan answers, in words.
    """

    stage: Stage
    variants: tuple[Variant, ...]
    merged: int
    left_out: tuple[str, ...]
    question: str
    grid: bool = False

    @property
    def reference(self) -> Variant:
        """The variant that the others are compared with."""
        return self.variants[0]


@dataclass(frozen=True)
class Axis:
    """One thing that is tried: the key as it was written, and the choices that each value stands for."""

    key: str
    options: tuple[Choices, ...]

    @property
    def names(self) -> set[str]:
        """The mods, controls and parts that the options touch."""
        return {name for option in self.options for name in option}


def make_plan(
    stage: Stage,
    with_: Mapping[str, Any] | Iterable[tuple[str, Any]] = (),
    tries: Mapping[str, Sequence[Any]] | Iterable[tuple[str, Sequence[Any]]] = (),
    grid: bool = False,
) -> Plan:
    """The plan for what was asked, or for the questions that a stage offers when nothing was.

    Parameters
    ----------
    with_ : key and value pairs that set the reference; a mapping or pairs.
    tries : key and values pairs; each value is one variant against the reference, unless ``grid``.
    grid : the whole product of the tried values instead of one change at a time.

    Raises ``InputError`` for an unknown key or value, a key that is set twice, or a product that is out of hand.
    """
    chosen = read_choices(stage, _pairs(with_))
    axes = [_axis(stage, key, values) for key, values in _gathered(_pairs(tries))]
    if not axes:
        return _offer(stage, chosen, grid)
    options = _product(axes) if grid else [option for axis in axes for option in axis.options]
    kind = "every combination of " if grid and len(axes) > 1 else ""
    return _plan(stage, chosen, options, kind + " and ".join(axis.key for axis in axes), grid=grid)


def read_choices(stage: Stage, pairs: Iterable[tuple[str, Any]]) -> dict[str, Any]:
    """The choices that key and value pairs stand for; ``InputError`` when two of them set the same thing."""
    chosen: dict[str, Any] = {}
    said: dict[str, str] = {}
    for key, value in pairs:
        for name, choice in _read(stage, key, value).items():
            if name in chosen:
                raise InputError(f"{name} is set twice, by {said[name]!r} and by {key!r}", expected="set it once")
            chosen[name], said[name] = choice, key
    return chosen


def _read(stage: Stage, key: str, value: Any) -> Choices:
    """The choices of one key and value; what is no text or number (a model's own table) is passed on as it is."""
    if isinstance(value, (str, int, float)):
        return stage.parse_choice(key, str(value))
    return dict.fromkeys(key.split("+"), value)


def _pairs(given: Mapping[str, Any] | Iterable[tuple[str, Any]]) -> list[tuple[str, Any]]:
    return list(given.items()) if isinstance(given, Mapping) else list(given)


def _gathered(pairs: Iterable[tuple[str, Any]]) -> list[tuple[str, list[Any]]]:
    """The values of each key, in the order in which the keys first came."""
    found: dict[str, list[Any]] = {}
    for key, values in pairs:
        listed = [values] if isinstance(values, (str, int, float)) else list(values)
        found.setdefault(key, []).extend(listed)
    return list(found.items())


def _axis(stage: Stage, key: str, values: Sequence[Any]) -> Axis:
    if not values:
        raise InputError(f"nothing to try for {key!r}", expected=f"write {key}=VALUE,VALUE")
    return Axis(key, tuple(_read(stage, key, value) for value in values))


def _product(axes: Sequence[Axis]) -> list[Choices]:
    """Every combination of one option from each axis."""
    for first, second in itertools.combinations(axes, 2):
        both = first.names & second.names
        if both:
            raise InputError(
                f"{min(both)} is tried twice, by {first.key!r} and by {second.key!r}",
                expected="in a grid each thing has one list of values",
            )
    size = 1
    for axis in axes:
        size *= len(axis.options)
    if size > MOST_VARIANTS:
        raise InputError(f"the grid has {size} variants", expected=f"ask for at most {MOST_VARIANTS} at once")
    return [_merge(combination) for combination in itertools.product(*(axis.options for axis in axes))]


def _merge(combination: Iterable[Choices]) -> Choices:
    together: dict[str, Any] = {}
    for option in combination:
        together.update(option)
    return together


def _offer(stage: Stage, chosen: Choices, grid: bool) -> Plan:
    """What is tried when nothing was asked: the stage's own questions, else its mods and supply voltages in turn."""
    questions = questions_for(stage)
    if questions is not None:
        base = {**read_choices(stage, questions.base.items()), **chosen}
        axes = [_axis(stage, key, values) for key, values in questions.grid.items() if key not in chosen]
        if axes:
            return _plan(stage, base, _product(axes), questions.words, grid=True)
    if grid:
        raise InputError("nothing to make a grid of", expected="say what to try, --try KEY=VALUE,VALUE")
    tried, left_out = offered_for(stage, chosen)
    options = [_read(stage, key, value) for key, value in tried]
    return _plan(stage, chosen, options, "one change at a time" if options else "the stage alone", left_out)


def _plan(
    stage: Stage,
    chosen: Choices,
    options: Sequence[Choices],
    question: str,
    left_out: tuple[str, ...] = (),
    grid: bool = False,
) -> Plan:
    """The reference and every option against it, each circuit once."""
    reference = stage.variant(chosen)
    tried: list[Variant] = []
    for option in options:
        variant = stage.variant({**chosen, **option})
        if all(variant.circuit != other.circuit for other in tried):
            tried.append(variant)
    others = (variant for variant in tried if variant.circuit != reference.circuit)
    return Plan(stage, (reference, *others), len(options) - len(tried), left_out, question, grid)


def words_of(plan: Plan) -> list[str]:
    """Each variant in words: the reference by all that is tried, the others by what they change of it.

    In a grid every variant is named by all that is tried, as far as that can be said without naming old values.
    """
    reference, *others = plan.variants
    changes = [variant.words(reference) for variant in others]
    if plan.grid:
        changes = [_whole(variant, plan.variants, change) for variant, change in zip(others, changes, strict=True)]
    chosen = reference.words()
    if chosen != plan.stage.variant().words():
        return [chosen, *changes]
    whole = _whole(reference, plan.variants, "")
    return [f"{chosen}: {whole}" if whole else chosen, *changes]


def _whole(variant: Variant, among: Sequence[Variant], otherwise: str) -> str:
    """The variant against the one that differs most; ``otherwise`` where a part's old value would be named."""
    words = max((variant.words(other) for other in among if other is not variant), key=len, default="")
    return otherwise if not words or "→" in words else words
