"""Options that several commands share, and what they stand for: calibration, choices, quality, threads."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from pathlib import Path
from typing import TYPE_CHECKING, Any, TypeVar

import click

from tackbench.errors import InputError

if TYPE_CHECKING:
    from tackbench.audio import Calibration

Decorated = TypeVar("Decorated", bound=Callable[..., Any])

QUALITIES = ("draft", "standard", "best")
DEFAULT_STAGE = "two-voice"


def _stack(*options: Callable[[Any], Any]) -> Callable[[Decorated], Decorated]:
    """Several click options as one decorator, shown in the order given."""

    def decorate(function: Decorated) -> Decorated:
        for option in reversed(options):
            function = option(function)
        return function

    return decorate


take_argument = click.argument("take", metavar="TAKE")


def _use_parts(context: click.Context, parameter: click.Parameter, folder: str | None) -> None:
    """Let the command's library hold the part files of the folder, until the command ends."""
    from tackbench.parts.places import PARTS_FOLDER

    token = PARTS_FOLDER.set(None if folder is None else Path(folder))
    context.call_on_close(lambda: PARTS_FOLDER.reset(token))


parts_option = click.option(
    "--parts",
    metavar="FOLDER",
    callback=_use_parts,
    expose_value=False,
    help="A folder of your own part files. Without it the environment variable TACKBENCH_PARTS names one, and a "
    "folder called parts beside a stage file is read too.",
)

stage_option = _stack(
    click.option(
        "--stage",
        default=DEFAULT_STAGE,
        show_default=True,
        metavar="NAME|FILE",
        help="The stage: the name of one that ships (see `tackbench stages`), or a stage file ending in .toml.",
    ),
    parts_option,
)

with_option = click.option(
    "--with",
    "with_",
    multiple=True,
    metavar="KEY=VALUE",
    help="Set one thing: a mod (clip=silicon), a control (gain=0.5, 70% or 7/10 of its travel), supply=24 (volts), "
    "temperature=10 (degrees Celsius), a part's value or model (C1=22n, D1=1N4148), several parts at once "
    "(D1+D2=1N4148), what feeds it (battery=tired) or plays it (guitar=humbucker). May be repeated.",
)

quality_option = click.option(
    "--quality",
    type=click.Choice(QUALITIES),
    default="standard",
    show_default=True,
    help="How exactly the circuit is solved: draft is quick, best is for measuring.",
)

overwrite_option = click.option(
    "--overwrite", is_flag=True, help="Replace what an earlier run wrote there; other files are left alone."
)

threads_option = click.option(
    "--threads",
    type=click.IntRange(1, 1024),
    default=None,
    metavar="N",
    help="Groups of variants worked on at the same time (a number); by default two for each processor. "
    "The samples do not depend on it.",
)

calibration_options = _stack(
    click.option(
        "--full-scale-volts",
        type=float,
        metavar="V",
        help="Calibration: the volts (peak) at the guitar jack that one full-scale sample stands for.",
    ),
    click.option(
        "--full-scale-dbu",
        type=float,
        metavar="DBU",
        help="Calibration: your interface's instrument input level for 0 dBFS, in dBu, from its data sheet.",
    ),
    click.option(
        "--full-scale-dbv",
        type=float,
        metavar="DBV",
        help="Calibration: the same level in dBV.",
    ),
    click.option(
        "--input-gain-db",
        type=float,
        metavar="DB",
        help="Gain that stood on the interface's input knob, in dB; with --full-scale-dbu or --full-scale-dbv.",
    ),
    click.option(
        "--trimmed-db",
        type=float,
        metavar="DB",
        help="By how many dB the file was turned down since; with --full-scale-dbu or --full-scale-dbv.",
    ),
    click.option(
        "--peak-volts",
        type=float,
        metavar="V",
        help="Calibration: the volts (peak) of the take's loudest sample.",
    ),
    click.option(
        "--pickup",
        type=click.Choice(["low", "medium", "hot"]),
        help="Calibration: a plain class of pickup, for the loudest sample: low 0.35 V, medium 0.7 V, hot 1.4 V "
        "(figures from memory).",
    ),
)
"""The calibration of the take; one of them at most, none means the assumed 0.7 V peak."""

CALIBRATION_KEYS = (
    "full_scale_volts",
    "full_scale_dbu",
    "full_scale_dbv",
    "input_gain_db",
    "trimmed_db",
    "peak_volts",
    "pickup",
)


def split_calibration(options: dict[str, Any]) -> Calibration:
    """Take the calibration options out of a command's options and give the calibration that they ask for.

    Raises ``InputError`` for two calibrations, or for a gain or trim that has nothing to apply to.
    """
    from tackbench.audio import choose_calibration

    return choose_calibration(**{name: options.pop(name) for name in CALIBRATION_KEYS})


def pairs_from(texts: Iterable[str], option: str) -> list[tuple[str, str]]:
    """The KEY=VALUE texts of an option as pairs; ``InputError`` for one without a key or value."""
    return [_pair(text, option) for text in texts]


def _pair(text: str, option: str) -> tuple[str, str]:
    key, equals, value = text.partition("=")
    if not equals or not key.strip() or not value.strip():
        raise InputError(f"{option} {text!r} cannot be read", expected=f"write {option} KEY=VALUE, as in supply=24")
    return key.strip(), value.strip()


def lists_from(texts: Iterable[str], option: str) -> list[tuple[str, list[str]]]:
    """The KEY=VALUE,VALUE texts of an option as pairs of a key and its values."""
    found = []
    for key, values in pairs_from(texts, option):
        listed = [value.strip() for value in values.split(",")]
        if not all(listed):
            raise InputError(f"{option} {key}={values!r} has an empty value", expected=f"write {option} {key}=A,B")
        found.append((key, listed))
    return found
