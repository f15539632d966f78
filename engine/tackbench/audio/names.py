"""File names made from words, safe on every system that a folder of files may be carried to."""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Collection, Iterable

LONGEST = 80
"""Bytes in UTF-8 of a name without its ending, at most."""

_UNITS = r"(?:[pnumkMG]?(?:V|A|F|H|Hz|W|ohms?|s)|dB|dBu|dBV|dBFS|[kMG]|K|C|degC|percent)"
_SPELT = {"\u00b5": "u", "\u03bc": "u", "\u2126": "ohm", "\u03a9": "ohm", "%": "percent", "°": "deg", "×": "x"}
_SPELT |= dict.fromkeys("\u2212\u2010\u2011\u2013", "-")  # minus sign, hyphens, dash
_RESERVED = {"con", "prn", "aux", "nul", *(f"{port}{n}" for port in ("com", "lpt") for n in range(10))}


def _is_kept(character: str) -> bool:
    """Letters, digits and marks of any script, and three signs that every file system and address takes."""
    return character in "._+" or unicodedata.category(character)[0] in "LNM"


def _cut(text: str, longest: int) -> str:
    """The text cut to that many bytes of UTF-8, never inside a character."""
    return text.encode("utf-8")[:longest].decode("utf-8", errors="ignore")


def safe_name(words: str, taken: Collection[str] = (), longest: int = LONGEST) -> str:
    """A file name, without ending, for the words: ``clip germanium, 24 V`` becomes ``clip-germanium-24V``.

    A unit stays with its number; other spaces and signs become one hyphen; names that some system reserves, leading
    and trailing dots and hyphens are avoided. It differs from every name in ``taken``, upper and lower case being the
    same, by a number at its end.
    """
    text = "".join(_SPELT.get(sign, sign) for sign in words)
    text = unicodedata.normalize("NFKC", text)
    text = re.sub(r"(?<![\w.+])-(?=\d)", "minus", text)
    text = re.sub(rf"(?<=\d)\s+(?={_UNITS}\b)", "", text)
    text = "".join(sign if _is_kept(sign) else "-" for sign in text)
    text = unicodedata.normalize("NFC", re.sub(r"([-.])\1+", r"\1", text)).strip("-._")
    if text.split(".")[0].casefold() in _RESERVED:
        text = "a-" + text
    text = _cut(text, longest).rstrip("-._") or "unnamed"
    return _distinct(text, {name.casefold() for name in taken}, longest)


def _distinct(text: str, taken: set[str], longest: int) -> str:
    number, name = 1, text
    while name.casefold() in taken:
        number += 1
        ending = f"-{number}"
        name = _cut(text, longest - len(ending)).rstrip("-._") + ending
    return name


def safe_names(all_words: Iterable[str], longest: int = LONGEST) -> list[str]:
    """Names for several sets of words, in order, no two the same."""
    names: list[str] = []
    for words in all_words:
        names.append(safe_name(words, names, longest))
    return names
