"""The command ``stages``: which stages ship, or what one of them can be changed in."""

from __future__ import annotations

from collections.abc import Iterator

import click

from tackbench.cli.options import parts_option
from tackbench.cli.output import say
from tackbench.cli.table import paragraph
from tackbench.cli.words import part_words
from tackbench.stage import SURROUNDINGS, Mod, Stage, free_surroundings, load_stage, shipped_stages
from tackbench.values import format_position


@click.command("stages")
@click.argument("name", required=False, metavar="[NAME|FILE]")
@parts_option
def command(name: str | None) -> None:
    """List the stages that ship, or show one and its mods.

    What is shown is what --with and --try take: mods with their positions (the one as built is marked *), controls
    with their travel in percent, the supply in volts, what feeds and plays it, parts with their values.
    """
    if name is None:
        for known in shipped_stages():
            say(f"{known}  {load_stage(known).title}")
        say("\nOne of them in full: tackbench stages NAME")
        return
    for line in _describe(load_stage(name)):
        say(line)


def _describe(stage: Stage) -> Iterator[str]:
    yield f"{stage.name}: {stage.title}"
    yield from paragraph(" ".join(stage.about.split()), "")
    if stage.mods:
        yield "\nMods (* as built)"
        for mod in stage.mods.values():
            yield from _mod(mod)
    if stage.controls:
        yield "\nControls"
        for control in stage.controls.values():
            yield f"  {control.name}  {control.label}, at {format_position(control.at)}"
    yield from _supply(stage)
    yield from _around(stage)
    yield "\nParts as built"
    for ref, words in part_words(stage.variant().circuit):
        yield f"  {ref.ljust(5)} {words}"


def _around(stage: Stage) -> Iterator[str]:
    free = free_surroundings(stage)
    if free:
        yield "\nAround it"
    size = max((len(name) for name in free), default=0)
    for name in free:
        item = SURROUNDINGS[name]
        else_ = f" ({item.spell(item.default)} unless chosen)" if item.default is not None else ""
        yield f"  {name.ljust(size)}  {item.about}{else_}"


def _mod(mod: Mod) -> Iterator[str]:
    yield f"  {mod.name}  {mod.label}"
    for position in mod.positions.values():
        mark = "*" if position.name == mod.at else " "
        told = f": {position.about}" if position.about else ""
        yield from paragraph(f"{position.name}{told}", f"    {mark} ")


def _supply(stage: Stage) -> Iterator[str]:
    if stage.supply is None:
        return
    offered = ", ".join(f"{volts:g}" for volts in stage.supply.try_volts)
    yield f"\nSupply\n  supply  {stage.supply.volts:g} V" + (f", offered: {offered} V" if offered else "")
