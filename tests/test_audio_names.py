"""File names from words: examples, and properties that every file system asks for."""

from __future__ import annotations

import unicodedata

import pytest
from hypothesis import given
from hypothesis import strategies as st

from tackbench.audio.names import LONGEST, safe_name, safe_names


@pytest.mark.parametrize(
    ("words", "name"),
    [
        ("clip germanium, 24 V", "clip-germanium-24V"),
        ("supply -9 V", "supply-minus9V"),
        ("supply \u22129 V", "supply-minus9V"),
        ("C1 22 nF, gain 70 %", "C1-22nF-gain-70percent"),
        ("R1 4.7 k\u2126", "R1-4.7kohm"),
        ("C2 10 \u00b5F", "C2-10uF"),
        ("C2 10 \u03bcF", "C2-10uF"),
        ("D1+D2 = 1N4148", "D1+D2-1N4148"),
        ("a/b\\c:d*e?f", "a-b-c-d-e-f"),
        ("../../etc", "etc"),
        ("con", "a-con"),
        ("LPT1.old", "a-LPT1.old"),
        ("COM\u00b9", "a-COM1"),
        ("???", "unnamed"),
        ("", "unnamed"),
        ("歪み 9 V", "歪み-9V"),
    ],
)
def test_examples(words, name):
    assert safe_name(words) == name


def test_names_of_a_set_differ_without_regard_to_case():
    assert safe_names(["clip LED", "Clip led", "clip, LED", "other"]) == [
        "clip-LED",
        "Clip-led-2",
        "clip-LED-3",
        "other",
    ]
    assert safe_name("x", taken=["X", "x-2"]) == "x-3"
    assert safe_names(["+", "+"]) == ["+", "+-2"]


@given(st.lists(st.text(max_size=200), max_size=6))
def test_every_name_is_safe_and_none_comes_twice(all_words):
    names = safe_names(all_words)
    assert len({name.casefold() for name in names}) == len(names) == len(all_words)
    for name in names:
        assert 1 <= len(name.encode("utf-8")) <= LONGEST
        assert not set(name) & set('<>:"/\\|?*%#&\0 ')
        assert all(unicodedata.category(sign)[0] in "LNM" or sign in "-._+" for sign in name)
        assert name[0] not in ".-"
        assert name[-1] not in ".-"
        assert ".." not in name
        assert name == unicodedata.normalize("NFC", name)
        assert safe_name(name) == name
