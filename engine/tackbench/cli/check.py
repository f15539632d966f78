"""The command ``check``: is a stage sound, what are its voltages, how does it amplify."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import click

from tackbench.circuit import Circuit
from tackbench.cli.nodes import node_lines
from tackbench.cli.options import pairs_from, stage_option, with_option
from tackbench.cli.output import say
from tackbench.cli.table import paragraph
from tackbench.errors import InputError
from tackbench.measure.response import HIGHEST, LOWEST, Corners, corners, frequencies
from tackbench.network import OperatingPoint, operating_point, response
from tackbench.network.model import network_model
from tackbench.network.small_signal import stability_warnings
from tackbench.shootout import read_choices
from tackbench.stage import Variant, load_stage
from tackbench.values import format_quantity
from tackbench.workbench.first_clip import Bend, bends

MOST_BENDS = 4
"""What clips after these first ones, nobody can tell from small signals."""


@click.command("check")
@stage_option
@with_option
def command(stage: str, with_: tuple[str, ...]) -> None:
    """Say whether a stage is sound: voltages, current, gain.

    Reads the stage file, applies what --with sets, solves for the resting voltages (take silent) and gives the
    small-signal gain at 1 kHz and at its peak with the -3 dB corners in Hz. The exit status is 0 for a sound stage.
    """
    loaded = load_stage(stage)
    variant = loaded.variant(read_choices(loaded, pairs_from(with_, "--with")))
    if variant.over_limits:
        raise InputError("; ".join(variant.over_limits), file=loaded.name)
    rest = operating_point(variant.circuit)
    hertz = frequencies()
    shape = corners(hertz, response(variant.circuit, hertz))
    unstable = stability_warnings(network_model(variant.circuit), rest)
    for line in _report(variant, rest, shape, unstable):
        say(line)


def _report(variant: Variant, rest: OperatingPoint, shape: Corners | None, unstable: Sequence[str]) -> Iterator[str]:
    verdict = "can be computed, but does not rest (see below)" if unstable else "sound"
    yield f"{variant.stage.name}: {variant.words() or 'as built'}: {verdict}"
    yield "\nNodes: resting voltage (take silent), and the parts that meet there"
    yield from node_lines(variant.circuit, rest.node_volts)
    if rest.supply_current is not None:
        yield f"\nSupply current  {format_quantity(rest.supply_current, 'A', 3)}"
        yield from _stiffness(variant.circuit, rest.supply_current)
    yield "\nSmall-signal gain"
    yield from _gains(shape)
    yield from _first_bends(bends(variant.circuit, rest))
    for sentence in (*unstable, *variant.notes, *rest.warnings):
        yield from paragraph(sentence)


def _stiffness(circuit: Circuit, amperes: float) -> Iterator[str]:
    """What an ideal supply leaves out, in volts for each 10 ohm: a fresh battery has a few, a tired one tens."""
    if circuit.supply is not None and circuit.supply.ohms == 0.0:
        sag = format_quantity(abs(amperes) * 10.0, "V", 2)
        yield f"  the supply is taken as ideal (ohms = 0): each 10 ohm of a real battery would take {sag} off"
        yield "  at rest and more while it plays; try --with battery=tired"


def _first_bends(found: Sequence[Bend]) -> Iterator[str]:
    if not found:
        return
    yield "\nWhat clips first (peak of the take; an estimate from small-signal gains)"
    size = max(len(bend.ref) for bend in found[:MOST_BENDS])
    for bend in found[:MOST_BENDS]:
        volts, hertz = format_quantity(bend.take_volts, "V", 2), format_quantity(bend.hertz, "Hz", 2)
        start = f"from {volts} at {hertz}" if bend.take_volts > 0 else "at rest already"
        yield f"  {bend.ref.ljust(size)}  {bend.words}, {start}"


def _gains(shape: Corners | None) -> Iterator[str]:
    if shape is None:
        yield "  nothing of the take reaches the output"
        return
    yield f"  at 1 kHz    {_gain(shape.gain_db_1khz)}"
    yield f"  peak        {_gain(shape.peak_db)} at {format_quantity(shape.peak_hz, 'Hz', 3)}"
    low = f"{format_quantity(shape.low_hz, 'Hz', 3)}" if shape.low_hz else f"below {LOWEST:g} Hz"
    high = f"{format_quantity(shape.high_hz, 'Hz', 3)}" if shape.high_hz else f"above {HIGHEST / 1000:g} kHz"
    yield f"  -3 dB       {low} to {high}"


def _gain(decibels: float) -> str:
    return f"{round(decibels, 1) + 0.0:.1f} dB ({10 ** (decibels / 20):.3g} times)"
