"""One entry of the parts library: a model's parameters, its spread, and where its figures come from."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Any

from tackbench.errors import nearest
from tackbench.parts.families import KEYS, complete
from tackbench.parts.parameters import FAMILY_KINDS, check_whole, read_given, read_parameters
from tackbench.parts.tomlfile import check_format
from tackbench.values import Where, parse_quantity, shown

_TEXTS = ("about", "source", "conditions", "basis")
_OTHERS = ("family", "polarity", "aliases", "from_memory", "fit_error_millivolts", "low", "high", "points")


BOUNDS = ("low", "typical", "high")
"""What may follow an entry's name where a model is named: the ends of its spread, and the middle."""


@dataclass(frozen=True)
class PartEntry:
    """A device type. ``parameters`` is its complete typical set at 25 degrees C, SI, in the keys of its family;
    ``low`` and ``high`` are complete sets at the bounds of its spread, or None. ``points`` are (volts, amperes)
    that the parameters were fitted to, with the root mean square ``fit_error_millivolts``. ``own`` is True
    for a user's file.
    """

    name: str
    kind: str
    family: str
    polarity: str
    parameters: Mapping[str, Any]
    low: Mapping[str, Any] | None = None
    high: Mapping[str, Any] | None = None
    low_about: str = ""
    high_about: str = ""
    aliases: tuple[str, ...] = ()
    about: str = ""
    source: str = ""
    conditions: str = ""
    basis: str = ""
    from_memory: bool = False
    fit_error_millivolts: float | None = None
    points: tuple[tuple[float, float], ...] = ()
    file: str = ""
    own: bool = False

    def at_bound(self, bound: str) -> Mapping[str, Any] | None:
        """The complete parameters at one of ``BOUNDS``; None when the entry does not have that bound."""
        return {"low": self.low, "typical": self.parameters, "high": self.high}[bound]

    def provenance(self) -> dict[str, Any]:
        """Where the figures come from, ready for JSON."""
        return {
            "source": self.source,
            "conditions": self.conditions,
            "basis": self.basis,
            "from_memory": self.from_memory,
            "fit_error_millivolts": self.fit_error_millivolts,
            "own_file": self.file if self.own else None,
        }


def read_entries(document: dict[str, Any], file: object, own: bool = False) -> Iterator[PartEntry]:
    """The entries of one part file. Raises InputError naming the file, the entry and the key."""
    check_format(document, "part file", file)
    for name, table in document.items():
        where = Where(file, name)
        if name == "format":
            continue
        if not isinstance(table, dict):
            raise where.fault(f"{shown(table)} is no table", 'write a table headed by the quoted type: ["1N4148"]')
        if not name.strip():
            raise where.fault("an entry has no name", "head the table with the quoted type number")
        yield read_entry(name, table, where, own)


def read_entry(name: str, table: Mapping[str, Any], where: Where, own: bool = False) -> PartEntry:
    """One entry from its table; ``where`` names the file and the entry."""
    family, polarity = _family(table, where)
    known = {key.name for key in KEYS[family]} | set(_TEXTS) | set(_OTHERS)
    for key in table:
        if key not in known:
            raise where.at(key=key).fault(f"{shown(key)} is no key of a {family} entry", nearest(key, known))
    given = {key: value for key, value in table.items() if key not in _TEXTS and key not in _OTHERS}
    low, low_about = _spread("low", family, polarity, given, table, where)
    high, high_about = _spread("high", family, polarity, given, table, where)
    return PartEntry(
        name=name,
        kind=FAMILY_KINDS[family, polarity],
        family=family,
        polarity=polarity,
        parameters=read_parameters(family, polarity, given, where),
        low=low,
        high=high,
        low_about=low_about,
        high_about=high_about,
        aliases=_aliases(table, where),
        **{key: _text(table, key, where) for key in _TEXTS},
        from_memory=_flag(table, "from_memory", where),
        fit_error_millivolts=_fit_error(table, where),
        points=_points(table, where),
        file=str(where.file),
        own=own,
    )


def _family(table: Mapping[str, Any], where: Where) -> tuple[str, str]:
    family, polarity = table.get("family"), table.get("polarity", "")
    if not isinstance(family, str) or family not in KEYS:
        found = "the family is missing" if family is None else f"{shown(family)} is no known family"
        hint = nearest(family, KEYS) if isinstance(family, str) else f"known: {', '.join(KEYS)}"
        raise where.at(key="family").fault(found, hint)
    allowed = [p for f, p in FAMILY_KINDS if f == family]
    if polarity not in allowed:
        rule = 'write polarity = "n" or "p"' if "n" in allowed else f"a {family} has no polarity: leave it out"
        found = f"{shown(polarity)} is no polarity of a {family}" if polarity else "the polarity is missing"
        raise where.at(key="polarity").fault(found, rule)
    return family, str(polarity)


def _spread(
    bound: str, family: str, polarity: str, given: Mapping[str, Any], table: Mapping[str, Any], where: Where
) -> tuple[Mapping[str, Any] | None, str]:
    """The complete parameter set at one bound of the spread, and what is said about it."""
    if bound not in table:
        return None, ""
    overrides, here = table[bound], where.at(key=bound)
    if not isinstance(overrides, dict):
        raise here.fault(f"{shown(overrides)} is no table", f"write {bound} = {{ parameter = value, … }}")
    about = _text(overrides, "about", here)
    inner = Where(where.file, f"{where.part} {bound}")
    changed = {key: value for key, value in overrides.items() if key != "about"}
    filled = complete(family, read_given(family, {**given, **changed}, inner))
    check_whole(family, polarity, filled, inner)
    return MappingProxyType(filled), about


def _aliases(table: Mapping[str, Any], where: Where) -> tuple[str, ...]:
    raw = table.get("aliases", [])
    if not isinstance(raw, list) or not all(isinstance(item, str) and item.strip() for item in raw):
        raise where.at(key="aliases").fault(f"{shown(raw)} is no list of names", 'write aliases = ["…", "…"]')
    return tuple(raw)


def _text(table: Mapping[str, Any], key: str, where: Where) -> str:
    raw = table.get(key, "")
    if not isinstance(raw, str):
        raise where.at(key=key).fault(f"{shown(raw)} is no text", f'write {key} = "…"')
    return raw


def _flag(table: Mapping[str, Any], key: str, where: Where) -> bool:
    raw = table.get(key, False)
    if not isinstance(raw, bool):
        raise where.at(key=key).fault(f"{shown(raw)} is neither true nor false", "write true or false")
    return raw


def _fit_error(table: Mapping[str, Any], where: Where) -> float | None:
    if "fit_error_millivolts" not in table:
        return None
    return parse_quantity(table["fit_error_millivolts"], "", ">=0", where.at(key="fit_error_millivolts"))


def _points(table: Mapping[str, Any], where: Where) -> tuple[tuple[float, float], ...]:
    raw, here = table.get("points", []), where.at(key="points")
    if not isinstance(raw, list) or not all(isinstance(pair, list) and len(pair) == 2 for pair in raw):
        raise here.fault("the points are no list of pairs", "write points = [[volts, amperes], …]")
    return tuple((parse_quantity(v, "V", "any", here), parse_quantity(i, "A", "any", here)) for v, i in raw)
