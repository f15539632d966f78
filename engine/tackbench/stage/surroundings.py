"""What stands around a stage and can be chosen for a variant: the battery that feeds it, the guitar that plays it.

These names are known for every stage, unless the stage has a mod, a control or a part of that name: then it means
that, and what stands around has no say. So no name of a stage file can ever clash with them.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import TYPE_CHECKING, Any

from tackbench.parts import PartEntry
from tackbench.stage.guitar import Guitar
from tackbench.stage.model import SUPPLY
from tackbench.values import Where, format_position, format_quantity, parse_position, parse_quantity, shown

if TYPE_CHECKING:
    from tackbench.stage.model import Stage

BATTERY, GUITAR = "battery", "guitar"
KINDS_AROUND = {BATTERY: "battery", GUITAR: "pickup"}
"""The kind of library entry that each of them names."""
NOMINAL_SLACK = 0.02
"""A supply within this share of a whole number of batteries counts as that many."""
MOST_CABLE_FARADS = 20e-9
"""No cable for a guitar has as much: a value above it is more likely metres."""
LEAST_INPUT_OHMS = 1e3
"""No recorder that a guitar was played into loads it more."""


@dataclass(frozen=True)
class Surrounding:
    """One such name. ``default`` holds when the guitar is chosen and this is not; ``spell`` writes a value."""

    name: str
    label: str
    unit: str
    default: Any
    about: str

    def read(self, stage: Stage, raw: Any, where: Where) -> Any:
        """The choice in its normal form: a library name, a position, or a quantity in base units."""
        if self.unit == "entry":
            if not isinstance(raw, str):
                raise where.fault(
                    f"{shown(raw)} names nothing in the parts library", f"write a {KINDS_AROUND[self.name]}'s name"
                )
            return stage.library.model(raw, KINDS_AROUND[self.name], where)[0]
        if self.unit == "position":
            return parse_position(raw, where)
        value = parse_quantity(raw, self.unit, ">0", where)
        if self.unit == "F" and value > MOST_CABLE_FARADS:
            raise where.fault(
                f"{shown(raw)} is no cable's capacitance", "write farads: 500p is about five metres of cable"
            )
        if self.unit == "ohm" and value < LEAST_INPUT_OHMS:
            raise where.fault(f"{shown(raw)} is no input for a guitar", "write ohms: 1M is the usual one")
        return value

    def spell(self, value: Any) -> str:
        if self.unit == "entry":
            return str(value)
        return format_position(value) if self.unit == "position" else format_quantity(value, self.unit)


SURROUNDINGS: Mapping[str, Surrounding] = MappingProxyType(
    {
        item.name: item
        for item in (
            Surrounding(
                BATTERY, "battery", "entry", None, "the battery or adapter that feeds it: tackbench parts battery"
            ),
            Surrounding(GUITAR, "guitar with", "entry", None, "the pickup that plays it: tackbench parts pickup"),
            Surrounding(
                "guitar-volume", "guitar volume", "position", 1.0, "the volume knob of the guitar with that pickup"
            ),
            Surrounding("guitar-tone", "guitar tone", "position", 1.0, "its tone knob"),
            Surrounding("cable", "cable", "F", 500e-12, "the capacitance of the cable to the stage"),
            Surrounding(
                "recorded-cable", "recorded through", "F", 500e-12, "the cable that the take was recorded through"
            ),
            Surrounding("recorded-into", "recorded into", "ohm", 1e6, "the input that the take was recorded into"),
        )
    }
)
"""Every such name. 500 pF is five metres of instrument cable at 100 pF a metre, 1 megohm the usual input of an
interface for guitars (both from memory)."""

GUITAR_NAMES = tuple(name for name in SURROUNDINGS if name != BATTERY)


def free_surroundings(stage: Stage) -> tuple[str, ...]:
    """The names that this stage leaves free and that make sense for it: without a supply there is no battery, and
    where ``guitar`` means something of the stage's own there is no guitar."""
    own = {*stage.mods, *stage.controls, *stage.known_parts()}
    absent = {BATTERY} if stage.supply is None else set()
    if GUITAR in own:
        absent |= set(GUITAR_NAMES)
    return tuple(name for name in SURROUNDINGS if name not in own | absent)


def surrounding_settings(stage: Stage, chosen: Mapping[str, Any]) -> dict[str, Any]:
    """The settings that the choices of these names make: the battery and the volts it gives, the whole guitar.

    Raises InputError for a battery beside a chosen supply, a battery that cannot make the stage's voltage, and a
    guitar's knob or cable without a guitar.
    """
    free = free_surroundings(stage)
    settings: dict[str, Any] = {}
    if BATTERY in free and BATTERY in chosen:
        settings[BATTERY] = chosen[BATTERY]
        settings[SUPPLY] = _battery_volts(stage, chosen)
    asked = [name for name in GUITAR_NAMES if name in free and name in chosen]
    if GUITAR in asked:
        names = (name for name in GUITAR_NAMES if name in free)
        settings |= {name: chosen.get(name, SURROUNDINGS[name].default) for name in names}
    elif asked:
        raise Where(stage.name, asked[0]).fault(
            "no guitar stands in the circuit", "choose one too, for example guitar=humbucker"
        )
    return settings


def _battery_volts(stage: Stage, chosen: Mapping[str, Any]) -> float:
    assert stage.supply is not None
    where = Where(stage.name, BATTERY)
    if SUPPLY in chosen:
        raise where.fault("the supply is chosen too", "choose one of them: a battery says its own volts")
    volts = battery_count(stage, chosen[BATTERY]) * battery_of(stage, chosen[BATTERY])["open_volts"]
    return float(volts if stage.supply.volts > 0 else -volts)


def battery_of(stage: Stage, name: str) -> Mapping[str, Any]:
    """The parameters of the battery called ``name``."""
    return stage.library.model(name, BATTERY)[1]


def battery_count(stage: Stage, name: str) -> int:
    """How many of these batteries in series make the voltage that the stage is built for. Raises InputError."""
    assert stage.supply is not None
    nominal, own = battery_of(stage, name)["nominal_volts"], abs(stage.supply.volts)
    count = round(own / nominal)
    if count < 1 or abs(own - count * nominal) > NOMINAL_SLACK * own:
        raise Where(stage.name, BATTERY).fault(
            f"the stage is built for {format_quantity(own, 'V')}, which is no number of "
            f"{format_quantity(nominal, 'V')} batteries",
            "choose supply=… in volts instead",
        )
    return count


def battery_ohms(stage: Stage, settings: Mapping[str, Any]) -> float | None:
    """The internal resistance of the chosen batteries in series; None when none is chosen."""
    if BATTERY not in settings or BATTERY not in free_surroundings(stage):
        return None
    name = settings[BATTERY]
    return float(battery_count(stage, name) * battery_of(stage, name)["internal_ohms"])


def guitar_of(stage: Stage, settings: Mapping[str, Any]) -> Guitar | None:
    """The guitar that stands in the circuit; None when no pickup is chosen."""
    free = free_surroundings(stage)
    if GUITAR not in settings or GUITAR not in free:
        return None

    def of(name: str) -> Any:
        return settings[name] if name in free else SURROUNDINGS[name].default

    return Guitar(
        pickup=stage.library.model(settings[GUITAR], KINDS_AROUND[GUITAR])[1],
        volume=of("guitar-volume"),
        tone=of("guitar-tone"),
        cable=of("cable"),
        recorded_cable=of("recorded-cable"),
        recorded_into=of("recorded-into"),
    )


def entries_around(stage: Stage, settings: Mapping[str, Any]) -> dict[str, PartEntry]:
    """The library entries of the chosen battery and pickup, by the name chosen."""
    free = free_surroundings(stage)
    chosen = [name for name in (BATTERY, GUITAR) if name in settings and name in free]
    return {settings[name]: stage.library.model(settings[name], KINDS_AROUND[name])[2] for name in chosen}
