"""Mangled stage files: whatever is broken in a good one, the reader answers with a stage or with one sentence."""

from __future__ import annotations

import copy
import datetime
import tomllib
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from stage_examples import FULL, library
from tackbench.errors import InputError
from tackbench.parts import PartsLibrary, parse_toml
from tackbench.stage import Stage, read_stage, shipped_stages
from tackbench.stage.shipped import _shipped_files

DOCUMENT = tomllib.loads(FULL)
QUICK = settings(max_examples=300, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])


@pytest.fixture(scope="module")
def parts(tmp_path_factory: pytest.TempPathFactory) -> PartsLibrary:
    return library(tmp_path_factory.mktemp("parts"))


def places(node: Any, here: tuple[Any, ...] = ()) -> Iterator[tuple[Any, ...]]:
    """The path of every value in the document but the document itself."""
    items: Any = node.items() if isinstance(node, dict) else enumerate(node) if isinstance(node, list) else ()
    for key, value in items:
        yield (*here, key)
        yield from places(value, (*here, key))


def words(node: Any) -> Iterator[str]:
    """Every text and key of the document: what a slip would most likely put in a wrong place."""
    if isinstance(node, dict):
        for key, value in node.items():
            yield key
            yield from words(value)
    elif isinstance(node, list):
        for value in node:
            yield from words(value)
    elif isinstance(node, str):
        yield node


PLACES = list(places(DOCUMENT))
SCALARS = st.one_of(
    st.sampled_from(sorted(set(words(DOCUMENT)))),
    st.sampled_from(["", " ", "0", "-1", "1e999", "nan", "1n", "4k7", "9 kV", "½", "1,5k", "\u0000", "a=b", "T-AMP"]),
    st.text(max_size=8),
    st.integers(),
    st.floats(),
    st.booleans(),
    st.dates(min_value=datetime.date(1900, 1, 1), max_value=datetime.date(2100, 1, 1)),
)
VALUES = st.recursive(
    SCALARS,
    lambda inner: st.one_of(st.lists(inner, max_size=4), st.dictionaries(st.text(max_size=6), inner, max_size=4)),
    max_leaves=8,
)
CHANGES = st.tuples(st.sampled_from(PLACES), st.sampled_from(["put", "drop", "rename", "copy"]), VALUES)


def change(document: dict[str, Any], path: tuple[Any, ...], how: str, value: Any) -> None:
    """Put, drop, rename or copy what stands at ``path``, if an earlier change has left it there."""
    holder: Any = document
    try:
        for key in path[:-1]:
            holder = holder[key]
        found = holder[path[-1]]
    except (KeyError, IndexError, TypeError):
        return
    if how == "put":
        holder[path[-1]] = value
    elif how == "drop":
        del holder[path[-1]]
    elif isinstance(holder, dict):
        holder[str(value)[:20]] = copy.deepcopy(found)
        if how == "rename":
            holder.pop(path[-1], None)
    else:
        holder.append(copy.deepcopy(found))


def assert_readable(error: InputError) -> None:
    """One line of moderate length that begins with the file."""
    sentence = str(error)
    assert sentence.startswith("my.toml")
    assert sentence.isprintable(), sentence
    assert len(sentence) < 600


def judged(document: dict[str, Any], parts: PartsLibrary) -> None:
    """Read the document; an error must be one readable line that names the file."""
    try:
        stage = read_stage(document, "my", Path("my.toml"), parts)
    except InputError as error:
        assert_readable(error)
        return
    _walk(stage)


def _walk(stage: Stage) -> None:
    """A stage that was accepted answers for all its positions, in words and as a record."""
    for sentence in stage.position_faults():
        assert sentence.isprintable()
    variant = stage.variant()
    assert all(note.isprintable() for note in (*variant.notes, *variant.over_limits, variant.words()))
    assert variant.record()["stage"] == "my"


@QUICK
@given(st.lists(CHANGES, min_size=1, max_size=3))
def test_mangled_tables_give_a_stage_or_a_sentence(parts: PartsLibrary, changes: list[Any]) -> None:
    document = copy.deepcopy(DOCUMENT)
    for path, how, value in changes:
        change(document, path, how, value)
    judged(document, parts)


@QUICK
@given(st.data())
def test_mangled_text_gives_a_stage_or_a_sentence(parts: PartsLibrary, data: st.DataObject) -> None:
    text = FULL
    for _ in range(data.draw(st.integers(1, 3))):
        start = data.draw(st.integers(0, len(text)))
        length = data.draw(st.sampled_from([0, 1, 2, 5, 40, 400]))
        text = text[:start] + data.draw(st.text(max_size=3)) + text[start + length :]
    try:
        document = parse_toml(text.encode("utf-8", "surrogatepass"), "stage file", "my.toml")
    except InputError as error:
        assert_readable(error)
        return
    judged(document, parts)


@pytest.mark.slow
@settings(max_examples=4000, deadline=None)
@given(st.data())
def test_mangled_shipped_stages(data: st.DataObject) -> None:
    name = data.draw(st.sampled_from(shipped_stages()))
    document = tomllib.loads(_shipped_files()[name].read_text(encoding="utf-8"))
    paths = list(places(document))
    for _ in range(data.draw(st.integers(1, 4))):
        path = data.draw(st.sampled_from(paths))
        change(document, path, data.draw(st.sampled_from(["put", "drop", "rename", "copy"])), data.draw(VALUES))
    judged(document, _shipped_parts())


def _shipped_parts() -> PartsLibrary:
    from tackbench.parts import load_parts

    return load_parts()
