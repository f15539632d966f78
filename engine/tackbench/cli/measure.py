"""The command ``measure``: response, distortion and headroom of one variant, in numbers."""

from __future__ import annotations

import json
import math
from collections.abc import Iterator, Sequence
from pathlib import Path
from typing import Any

import click

from tackbench.cli.options import pairs_from, quality_option, stage_option, with_option
from tackbench.cli.output import say
from tackbench.cli.table import paragraph
from tackbench.errors import InputError

SCHEMA, VERSION = "tackbench.measure", 1
TONES = (100.0, 1000.0, 5000.0)
DBU_VOLTS = math.sqrt(0.6)
"""0 dBu in volts RMS: a milliwatt in 600 ohm."""

LEVELS = (0.01, 0.03, 0.1, 0.35, 1.0)


@click.command("measure")
@stage_option
@with_option
@click.option(
    "--at",
    "levels",
    multiple=True,
    type=float,
    metavar="V",
    help="Peak volts of the take at which a 1 kHz sine is measured; may be repeated. "
    "[default: 0.01, 0.03, 0.1, 0.35 and 1]",
)
@click.option("--json", "out", metavar="FILE", help="Also write every figure to this JSON file.")
@quality_option
def command(stage: str, with_: tuple[str, ...], levels: tuple[float, ...], out: str | None, quality: str) -> None:
    """Measure a stage: response, impedances, distortion, headroom.

    Small-signal figures come from the circuit's linearised equations, the others from sines through the solved
    circuit. Distortion is given against the fundamental; V are peak, Vpp peak to peak, dBu re 0.775 V RMS.
    """
    from tackbench.shootout import read_choices
    from tackbench.stage import load_stage

    loaded = load_stage(stage)
    variant = loaded.variant(read_choices(loaded, pairs_from(with_, "--with")))
    if variant.over_limits:
        raise InputError("; ".join(variant.over_limits), file=loaded.name)
    for level in levels:
        if not 0 < level <= 1000:
            raise InputError(
                f"{level:g} V is no level to measure at", key="--at", expected="above 0, up to 1000 V peak"
            )
    target = None if out is None else _free_place(out)
    figures = _figures(variant.circuit, levels or LEVELS, quality)
    figures["headroom_by_supply"] = list(_by_supply(variant, quality))
    say(f"{loaded.name}: {variant.words() or 'as built'}")
    for line in _report(figures):
        say(line)
    for note in variant.notes:
        for line in paragraph(note):
            say(line)
    if target is not None:
        _write(target, {"stage": loaded.name, "variant": variant.words(), **figures})
        say(f"\nFigures: {target}")


def _free_place(out: str) -> Path:
    path = Path(out)
    if path.exists():
        raise InputError("exists already", file=path, expected="name a new file")
    if not path.parent.is_dir():
        raise InputError("there is no such folder", file=path.parent, expected="make it first, or choose another")
    return path


def _write(path: Path, figures: dict[str, Any]) -> None:
    from tackbench.audio.place import written_beside

    text = json.dumps({"schema": SCHEMA, "version": VERSION, **figures}, indent=1, allow_nan=False) + "\n"
    with written_beside(path) as unfinished:
        Path(unfinished).write_text(text, encoding="utf-8", newline="\n")


def _figures(circuit: Any, levels: Sequence[float], quality: str) -> dict[str, Any]:
    """Everything that is measured, as JSON has it: units in the names, None for what does not exist."""
    import numpy as np

    from tackbench.measure import corners, frequencies, impedances, measure_headroom, measure_sines, third_octaves
    from tackbench.network import response

    hertz = frequencies()
    shape = corners(hertz, response(circuit, hertz))
    into, out = (np.abs(z) for z in impedances(circuit, np.array(TONES)))
    sines = measure_sines(circuit, 1000.0, levels, quality)
    return {
        "response": None if shape is None else {name: _number(value) for name, value in vars(shape).items()},
        "third_octaves": [
            {name: _number(value) for name, value in vars(band).items()} for band in third_octaves(circuit)
        ],
        "impedance_ohms": [
            {"hertz": tone, "input": _number(a), "output": _number(b)}
            for tone, a, b in zip(TONES, into, out, strict=True)
        ],
        "sines": [
            {
                "hertz": sine.hertz,
                "take_volts": sine.take_volts,
                "output_vpp": sine.vpp,
                "output_rms_volts": sine.rms,
                "gain_db": _number(sine.gain_db),
                "thd_of_fundamental": sine.thd_of_fundamental,
                "thd_of_total": sine.thd_of_total,
                "even": sine.even,
                "odd": sine.odd,
                "crest_volts": sine.highest,
                "trough_volts": sine.lowest,
                "dc_shift_volts": sine.dc - sine.resting,
                "harmonics_volts": [float(x) for x in sine.harmonics],
                "settled": sine.settled,
            }
            for sine in sines
        ],
        "headroom": [_headroom(measure_headroom(circuit, tone, quality)) for tone in TONES],
    }


def _by_supply(variant: Any, quality: str) -> Iterator[dict[str, Any]]:
    """The headroom at 1 kHz at each supply voltage that the stage file offers."""
    from tackbench.measure import measure_headroom

    supply = variant.stage.supply
    for volts in () if supply is None else supply.try_volts:
        try:
            other = variant.stage.variant({**variant.choices, "supply": volts})
            refused = "; ".join(other.over_limits)
        except InputError as trouble:
            other, refused = None, str(trouble)
        if refused or other is None:
            yield {"supply_volts": volts, "refused": refused}
        else:
            yield {
                "supply_volts": volts,
                "refused": "",
                **_headroom(measure_headroom(other.circuit, 1000.0, quality)),
            }


def _headroom(found: Any) -> dict[str, Any]:
    limits = {name: vars(getattr(found, name)) for name in ("one_percent", "ten_percent", "one_decibel")}
    return {
        "hertz": found.hertz,
        **limits,
        "largest_vpp": found.largest_vpp,
        "small_gain_db": _number(found.small_gain_db),
    }


def _number(value: float | None) -> float | None:
    return None if value is None or not math.isfinite(value) else float(value)


def _report(figures: dict[str, Any]) -> Iterator[str]:
    shape = figures["response"]
    yield "\nSmall-signal response"
    if shape is None:
        yield "  nothing of the take reaches the output"
        return
    low = "below 1 Hz" if shape["low_hz"] is None else _hertz(shape["low_hz"])
    high = "above 200 kHz" if shape["high_hz"] is None else _hertz(shape["high_hz"])
    yield f"  peak {shape['peak_db']:.1f} dB at {_hertz(shape['peak_hz'])}, -3 dB from {low} to {high}"
    yield from _bands(figures["third_octaves"])
    yield "\nImpedance (ohms)      " + "".join(f"{_hertz(row['hertz']):>10}" for row in figures["impedance_ohms"])
    for side in ("input", "output"):
        yield f"  {side:<20}" + "".join(f"{_ohms(row[side]):>10}" for row in figures["impedance_ohms"])
    yield "\nA sine of 1 kHz (distortion re fundamental; V peak)"
    yield "  take V   output Vpp   gain dB   THD %   even %   odd %   crest V   trough V   DC shift V"
    for row in figures["sines"]:
        yield (
            f"  {row['take_volts']:<6.3g} {row['output_vpp']:>12.3g} {row['gain_db'] or 0:>9.1f}"
            f" {100 * row['thd_of_fundamental']:>7.2f} {100 * row['even']:>8.2f} {100 * row['odd']:>7.2f}"
            f" {row['crest_volts']:>9.3g} {row['trough_volts']:>10.3g} {round(row['dc_shift_volts'], 5) + 0.0:>12.3g}"
            + ("" if row["settled"] else "  still moving")
        )
    yield "\nHeadroom: the take's peak volts (dBu) where a limit is reached, and the output there"
    yield f"  {'tone':<9}{'1 % THD':<26}{'10 % THD':<26}{'gain -1 dB':<26}largest"
    for row in figures["headroom"]:
        yield f"  {_hertz(row['hertz']):<9}{_limits(row)}"
    if figures["headroom_by_supply"]:
        yield "\nHeadroom at 1 kHz by supply"
        yield f"  {'supply':<9}{'1 % THD':<26}{'10 % THD':<26}{'gain -1 dB':<26}largest"
        for row in figures["headroom_by_supply"]:
            yield f"  {row['supply_volts']:<9g}" + (row["refused"] or _limits(row))


def _bands(bands: Sequence[dict[str, Any]]) -> Iterator[str]:
    for start in range(0, len(bands), 11):
        own = bands[start : start + 11]
        yield "  Hz  " + "".join(f"{_short(band['nominal_hz']):>8}" for band in own)
        yield "  dB  " + "".join(
            f"{'-' if band['gain_db'] is None else format(band['gain_db'], '.1f'):>8}" for band in own
        )


def _short(hertz: float) -> str:
    return f"{hertz / 1000:g}k" if hertz >= 1000 else f"{hertz:g}"


def _hertz(hertz: float) -> str:
    return f"{hertz / 1000:.3g} kHz" if hertz >= 999.5 else f"{hertz:.3g} Hz"


def _ohms(value: float | None) -> str:
    if value is None:
        return "-"
    for size, prefix in ((1e9, "G"), (1e6, "M"), (1e3, "k")):
        if value >= size:
            return f"{value / size:.3g}{prefix}"
    return f"{value:.3g}"


def _limits(row: dict[str, Any]) -> str:
    cells = "".join(f"{_limit(row[name]):<26}" for name in ("one_percent", "ten_percent", "one_decibel"))
    return f"{cells}{row['largest_vpp']:.3g} Vpp"


def _limit(limit: dict[str, Any]) -> str:
    if limit["take_volts"] is None:
        return "not up to 20 V"
    dbu = 20 * math.log10(limit["take_volts"] / math.sqrt(2) / DBU_VOLTS)
    return f"{limit['take_volts']:.3g} V ({dbu:+.0f}), {limit['output_vpp']:.3g} Vpp"
