"""The parts of one variant: the file's parts after the chosen positions and the chosen part values."""

from __future__ import annotations

from collections.abc import Mapping

from tackbench.errors import InputError, nearest
from tackbench.stage.choices import changed
from tackbench.stage.edits import edited
from tackbench.stage.model import Position, Stage
from tackbench.stage.mods import place
from tackbench.stage.spec import PartSpec
from tackbench.values import Where


class Bench:
    """The parts as they stand while the positions are applied one after another in the file's order."""

    def __init__(self, stage: Stage) -> None:
        self.stage = stage
        self.parts: dict[str, PartSpec] = dict(stage.parts)
        self.links: dict[tuple[str, str], str] = {}
        self._touched: dict[str, tuple[str, str]] = {}

    def apply(self, mod: str, position: Position) -> None:
        """Lift, change, fit and link what ``position`` of ``mod`` says."""
        here = place(mod, position.name)
        where = self.stage.where.at(part=here)
        for ref in position.lift:
            self._claim(ref, here, "lifts", where.at(key="lift"))
            del self.parts[ref]
        for ref, raw in position.edits.items():
            self._claim(ref, here, "changes", where.at(key=ref))
            self.parts[ref] = edited(self.parts[ref], raw, where.at(key=ref), self.stage.library)
        for ref, part in position.fit.items():
            self._claim_new(ref, here, where.at(key=f"fit.{ref}"))
            self.parts[ref] = part
        for pair in position.link:
            self.links.setdefault(pair, here)

    def choose(self, ref: str, raw: object, where: Where) -> PartSpec:
        """Give the part ``ref`` the value or model chosen for the variant."""
        if ref not in self.parts:
            by = self._touched.get(ref)
            found = f"{by[0]} lifts {ref}" if by else f"no chosen position fits {ref}"
            raise where.fault(found, f"choose a position in which {ref} is there")
        self.parts[ref] = changed(self.parts[ref], raw, self.stage, where)
        return self.parts[ref]

    def _claim(self, ref: str, here: str, verb: str, where: Where) -> None:
        """Note that the position ``here`` changes or lifts ``ref``, which no other chosen position may have done."""
        other = self._touched.get(ref)
        if other is not None and other[0] != here and other[1] != "fits":
            raise self._conflict(ref, other, here, verb, where)
        if ref not in self.parts:
            raise where.fault(f"there is no part {ref!r} in this variant", nearest(ref, self.parts))
        self._touched[ref] = (here, verb)

    def _claim_new(self, ref: str, here: str, where: Where) -> None:
        other = self._touched.get(ref)
        if other is not None and other[0] != here:
            raise self._conflict(ref, other, here, "fits", where)
        if ref in self.parts:
            raise where.fault(f"there is a part {ref!r} already", "fit it under another designator")
        self._touched[ref] = (here, "fits")

    @staticmethod
    def _conflict(ref: str, other: tuple[str, str], here: str, verb: str, where: Where) -> InputError:
        return where.fault(
            f"{here} {verb} {ref}, which {other[0]} {other[1]} too", "two chosen positions cannot edit the same part"
        )


def resolve(stage: Stage, positions: Mapping[str, str]) -> Bench:
    """The parts and links with each mod in its position of ``positions``. Raises InputError naming both positions
    when two edit the same part."""
    bench = Bench(stage)
    for mod in stage.mods.values():
        bench.apply(mod.name, mod.positions[positions[mod.name]])
    return bench
