"""What a checked stage file becomes: a stage with its mods, controls, supply and parts, all frozen."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any

from tackbench.errors import InputError
from tackbench.parts import PartsLibrary
from tackbench.stage.spec import PartSpec
from tackbench.values import Where

if TYPE_CHECKING:
    from tackbench.stage.variant import Variant

SUPPLY, TEMPERATURE = "supply", "temperature"
ROOM_CELSIUS = 25.0
RESERVED_IN_POSITIONS = ("lift", "link", "fit", "label", "about")


@dataclass(frozen=True)
class Position:
    """One position of a mod. ``edits`` maps designators to what the file writes for them; ``lift`` are parts taken
    out, ``link`` wires between two nodes, ``fit`` parts added."""

    name: str
    label: str
    about: str = ""
    edits: Mapping[str, Any] = field(default_factory=dict)
    lift: tuple[str, ...] = ()
    link: tuple[tuple[str, str], ...] = ()
    fit: Mapping[str, PartSpec] = field(default_factory=dict)


@dataclass(frozen=True)
class Mod:
    """A named change with its positions in the file's order; ``at`` is the position of the circuit as built."""

    name: str
    label: str
    about: str
    at: str
    positions: Mapping[str, Position]


@dataclass(frozen=True)
class Control:
    """A control: its name, what to call it, and where it stands (0 to 1) unless chosen."""

    name: str
    label: str
    at: float = 0.5


@dataclass(frozen=True)
class SupplySpec:
    """The supply: ``volts`` (negative for positive ground) behind ``ohms`` at ``node``; ``try_volts`` are what a
    shootout offers; ``rails`` are (node, ratio) pairs."""

    node: str
    volts: float
    try_volts: tuple[float, ...]
    ohms: float = 0.0
    rails: tuple[tuple[str, float], ...] = ()


@dataclass(frozen=True)
class Jack:
    """The input or output jack: its node and its resistance in ohms (series, or load; None for no load).
    ``assumed`` is True when the file does not give the resistance."""

    node: str
    ohms: float | None
    assumed: bool = False


@dataclass(frozen=True)
class Stage:
    """One circuit with everything that can be chosen about it. ``file`` is None for a stage read from elsewhere
    than a file; ``library`` is the parts library that its models came from."""

    name: str
    title: str
    about: str
    file: Path | None
    input: Jack
    output: Jack
    supply: SupplySpec | None
    parts: Mapping[str, PartSpec]
    controls: Mapping[str, Control]
    mods: Mapping[str, Mod]
    library: PartsLibrary = field(repr=False, compare=False, default_factory=PartsLibrary)

    @property
    def where(self) -> Where:
        """The place to name in errors about this stage."""
        return Where(self.file if self.file is not None else self.name)

    def known_parts(self) -> dict[str, tuple[PartSpec, ...]]:
        """Every designator that any variant can have, with a part of each kind (as drawn or fitted) that bears it."""
        known: dict[str, dict[str, PartSpec]] = {ref: {part.kind: part} for ref, part in self.parts.items()}
        for mod in self.mods.values():
            for position in mod.positions.values():
                for ref, part in position.fit.items():
                    known.setdefault(ref, {}).setdefault(part.kind, part)
        return {ref: tuple(parts.values()) for ref, parts in known.items()}

    def parse_choice(self, key: str, text: str) -> dict[str, object]:
        """One ``KEY=VALUE`` of a command line as normalised choices.

        ``key`` is a mod, a control, ``supply``, ``temperature``, a designator, or several joined by ``+``.
        Raises InputError with the nearest right word.
        """
        from tackbench.stage.choices import parse_choice

        return parse_choice(self, key, text)

    def variant(self, choices: Mapping[str, object] | None = None, **more: object) -> Variant:
        """The variant in which ``choices`` (and keywords) are made and everything else is as built.

        Values may be as typed (text, numbers) or as ``parse_choice`` returns them. Raises InputError for a choice
        that cannot be made, or when the circuit that comes out is unsound.
        """
        from tackbench.stage.variant import make_variant

        return make_variant(self, {**(choices or {}), **more})

    def position_faults(self) -> tuple[str, ...]:
        """One sentence for each position that makes an unsound circuit when chosen with all else as built."""
        sentences = []
        for mod in self.mods.values():
            for position in mod.positions:
                try:
                    self.variant({mod.name: position})
                except InputError as error:
                    sentences.append(f"{mod.name}={position}: {error}")
        return tuple(sentences)
