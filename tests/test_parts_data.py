"""The shipped parts: every figure has a source, every diode fit comes out of its points, slopes with heat hold."""

from __future__ import annotations

import importlib.util
import sys
import tomllib
from pathlib import Path
from types import ModuleType
from typing import Any

import numpy as np
import pytest
from scipy.optimize import brentq, least_squares

from tackbench.devices.schema import FAMILIES, fill_defaults
from tackbench.parts.library import load_parts

FOLDER = Path(__file__).resolve().parents[1] / "models" / "parts"
ENTRIES = [entry for entry in load_parts().entries() if not entry.own]
BOLTZMANN, CHARGE = 1.380649e-23, 1.602176634e-19


def _script() -> ModuleType:
    spec = importlib.util.spec_from_file_location("fit_diodes", FOLDER / "fit_diodes.py")
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    sys.modules["fit_diodes"] = module
    spec.loader.exec_module(module)
    return module


fit_diodes = _script()
FITS = list(fit_diodes.derived())
WHOLE_FITS = [
    (name, bound)
    for (name, bound), (volts, _) in fit_diodes.stored_points().items()
    if len(volts) > 2 and name not in fit_diodes.FREE_BY_ENTRY
]
DIODES = tomllib.loads((FOLDER / "diodes.toml").read_text(encoding="utf-8"))


def junction_volts(current: float, parameters: Any, kelvin: float) -> float:
    """DESIGN's diode law with its temperature law, solved for the voltage of the whole diode at a current (A)."""
    p = fill_defaults("diode", {key: value for key, value in parameters.items() if key in KEYS})
    n, nominal = p["ideality"], 298.15
    warmer = (kelvin / nominal) ** (p["temperature_exponent"] / n)
    warmer *= np.exp(p["band_gap"] / n * CHARGE / BOLTZMANN * (1.0 / nominal - 1.0 / kelvin))
    thermal = BOLTZMANN * kelvin / CHARGE
    saturation = p["saturation_current"] * warmer
    return float(n * thermal * np.log1p(current / saturation) + current * p["series_ohms"])


KEYS = {key.name for key in FAMILIES["diode"]}


@pytest.mark.parametrize(
    ("name", "bound", "fit", "stored"), FITS, ids=[f"{name}-{bound}" for name, bound, *_ in FITS]
)
def test_stored_parameters_come_out_of_the_stored_points(name: str, bound: str, fit: Any, stored: Any) -> None:
    for key in ("saturation_current", "ideality", "series_ohms"):
        assert getattr(fit, key) == pytest.approx(stored[key], rel=6e-4, abs=0.0), key
    if bound == "typical" and "fit_error_millivolts" in stored:
        assert fit.error_millivolts == pytest.approx(stored["fit_error_millivolts"], rel=0.05, abs=1e-3)


@pytest.mark.parametrize(("name", "bound"), WHOLE_FITS)
def test_the_fits_agree_with_a_general_least_squares(name: str, bound: str) -> None:
    """SciPy's least_squares over all three parameters at once, from a start of its own, finds no better sum."""
    volts, current = fit_diodes.stored_points()[name, bound]
    stored = fit_diodes.stored_parameters(DIODES[name], bound)

    def rest(x: np.ndarray) -> np.ndarray:
        return x[1] * np.log1p(current / np.exp(x[0])) + x[2] * current - volts

    start = [
        np.log(stored["saturation_current"]) + 0.5,
        1.05 * stored["ideality"] * 0.025693,
        0.9 * stored["series_ohms"],
    ]
    found = least_squares(rest, start, x_scale=[1.0, 0.01, max(stored["series_ohms"], 0.01)], xtol=1e-14, ftol=1e-14)
    ours = fit_diodes.fit_points(volts, current, stored).error_millivolts
    assert ours <= 1e3 * np.sqrt(np.mean(found.fun**2)) * 1.001 + 1e-6


def test_entries_with_a_fit_have_points_and_the_others_say_where_they_come_from() -> None:
    fitted = {name for name, *_ in FITS}
    shockley = {name for name, table in DIODES.items() if name != "format" and "breakdown_volts" not in table}
    assert fitted == shockley


@pytest.mark.parametrize("entry", ENTRIES, ids=[entry.name for entry in ENTRIES])
def test_every_entry_is_honest_about_its_figures(entry: Any) -> None:
    assert entry.about
    assert entry.source
    assert entry.conditions
    assert entry.basis in {"typical", "limit", "middle of a class"}
    if "from memory" in entry.source:
        assert entry.from_memory
    if entry.from_memory:
        assert "from memory" in entry.source
    for bound, about in ((entry.low, entry.low_about), (entry.high, entry.high_about)):
        assert (bound is None) == (about == "")


@pytest.mark.parametrize(
    "entry", [entry for entry in ENTRIES if entry.family == "opamp"], ids=lambda entry: entry.name
)
def test_opamps_hold_together(entry: Any) -> None:
    """Swings fit their highest supply; a slew rate is at least what an undegenerated pair of that bandwidth gives.

    SR = 4 pi Vt GBW of a bipolar pair without emitter resistors is the least of the kinds (derivable); the 741's
    0.38 V/us at 1.17 MHz is the case in point, the 308's 0.15.
    """
    p = entry.parameters
    assert 16.0 <= p["max_supply"] <= 44.0
    assert p["swing_high"] + p["swing_low"] < 0.2 * p["max_supply"]
    assert p["slew_rate"] > 4.0 * np.pi * 0.025693 * p["gain_bandwidth"]


def test_opamp_figures_of_the_makers_tables() -> None:
    """A few figures copied from the sheets a second time, by hand (sources in the entries)."""
    table = {entry.name: entry.parameters for entry in ENTRIES if entry.family == "opamp"}
    assert table["741"]["gain_bandwidth"] == pytest.approx(0.35 / 0.3e-6, rel=0.01)
    assert (table["4558"]["gain_bandwidth"], table["4558"]["slew_rate"]) == (3e6, 1.7e6)
    assert (table["OPA2134"]["swing_low"], table["OPA2134"]["swing_high"]) == (0.5, 1.2)
    assert (table["TLC2272"]["max_supply"], table["LM358"]["max_supply"]) == (16.0, 32.0)
    assert table["5534"]["output_ohms"] == pytest.approx(0.3 * (1.0 + 10e6 / 10e3 / 10.0**1.5), rel=0.03)


@pytest.mark.parametrize(
    ("name", "amperes", "low", "high", "from_sheet", "tolerance"),
    [
        ("1N4148", 1e-4, -30.0, 100.0, -2.07, 0.25),
        ("1N4148", 1e-3, -30.0, 100.0, -1.79, 0.20),
        ("1N4148", 1e-2, -30.0, 100.0, -1.26, 0.35),
        ("1N5711", 1e-4, -55.0, 25.0, -1.46, 0.20),
        ("1N5711", 1e-4, 25.0, 150.0, -1.33, 0.25),
    ],
)
def test_forward_voltage_falls_with_heat_as_the_sheets_show(
    name: str, amperes: float, low: float, high: float, from_sheet: float, tolerance: float
) -> None:
    """Millivolts per kelvin read off the makers' curves (Vishay 81857 figure 1, ST 1N5711 figure 1)."""
    cold, hot = (junction_volts(amperes, DIODES[name], 273.15 + celsius) for celsius in (low, high))
    assert 1e3 * (hot - cold) / (high - low) == pytest.approx(from_sheet, abs=tolerance)


def test_germanium_falls_by_about_two_millivolts_per_kelvin() -> None:
    """About -2 mV/K at 1 mA (from memory); the law gives -1.4 to -2.2 for the entries here."""
    for name in ("1N270", "germanium point contact", "1N34A", "gold-bonded germanium"):
        cold, hot = (junction_volts(1e-3, DIODES[name], kelvin) for kelvin in (288.15, 308.15))
        assert -2.2e-3 < (hot - cold) / 20.0 < -1.2e-3


@pytest.mark.parametrize(
    ("name", "amperes", "most"),
    [
        ("1N4148", 10e-3, 1.0),
        ("1N914", 10e-3, 1.0),
        ("1N4001", 1.0, 1.1),
        ("1N270", 0.2, 1.0),
        ("gold-bonded germanium", 0.2, 1.0),
        ("1N34A", 5e-3, 1.0),
        ("1N5711", 1e-3, 0.41),
        ("BAT41", 1e-3, 0.45),
        ("BAT41", 0.2, 1.0),
        ("BAT43", 2e-3, 0.33),
        ("BAT43", 15e-3, 0.45),
        ("red LED", 20e-3, 3.0),
        ("green LED", 20e-3, 3.0),
        ("blue LED", 20e-3, 4.0),
        ("1N4733", 0.2, 1.2),
    ],
)
def test_typical_diodes_stay_under_the_printed_limits(name: str, amperes: float, most: float) -> None:
    assert junction_volts(amperes, DIODES[name], 298.15) <= most


@pytest.mark.parametrize(
    "name", [name for name, table in DIODES.items() if isinstance(table, dict) and "low" in table]
)
def test_bounds_lie_either_side_at_a_clipping_current(name: str) -> None:
    """At 1 mA the low bound lies below the typical voltage and the high one above it; a zener's in breakdown."""
    if "breakdown_volts" in DIODES[name]["low"]:
        bounds = [DIODES[name]["low"], DIODES[name], DIODES[name]["high"]]
        assert sorted(bounds, key=lambda table: table["breakdown_volts"]) == bounds
        return
    low, middle, high = (
        junction_volts(1e-3, fit_diodes.stored_parameters(DIODES[name], bound), 298.15)
        for bound in ("low", "typical", "high")
    )
    assert low < middle < high


def test_the_zener_breaks_down_where_its_list_says() -> None:
    """5.1 V and 7 ohm at 49 mA, under 550 ohm at 1 mA, under 10 uA at 1 V."""
    p = DIODES["1N4733"]
    knee = p["breakdown_ideality"] * BOLTZMANN * 298.15 / CHARGE

    def current(volts: float) -> float:
        return float(p["breakdown_current"] * (np.exp((volts - p["breakdown_volts"]) / knee) - np.exp(-5.1 / knee)))

    assert brentq(lambda v: current(v) - 49e-3, 3.0, 6.0) == pytest.approx(5.1, abs=1e-3)
    assert knee / 49e-3 == pytest.approx(7.0, rel=0.01)
    assert knee / 1e-3 < 550.0
    assert current(1.0) < 10e-6


def test_transistor_figures_follow_from_their_sheets() -> None:
    """Base-emitter voltage, gain windows and on-resistance by the laws of the families."""
    table = {entry.name: entry.parameters for entry in ENTRIES}
    base_emitter = 0.025693 * np.log(2e-3 / table["BC549C"]["saturation_current"])
    assert base_emitter == pytest.approx(0.66, abs=0.002)
    for group, least, most in (("A", 110, 220), ("B", 200, 450), ("C", 420, 800)):
        assert table[f"BC549{group}"]["forward_gain"] == pytest.approx(np.sqrt(least * most), rel=0.01)
    assert 0.15 < 0.025693 * np.log(10e-3 / table["2N1308"]["saturation_current"]) < 0.35
    p = table["2N5457"]
    assert -2.0 * p["drain_current"] / p["pinch_off_volts"] == pytest.approx(3e-3)
    p = table["BS170"]
    assert 1.0 / (p["transconductance"] * (10.0 - p["threshold_volts"])) == pytest.approx(1.8, rel=0.01)
