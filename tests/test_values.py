"""Quantities: letter codes, SI text, numbers, what is refused, and that what is written reads back.

Letter codes follow IEC 60062; the resistor examples (R47, 4R7, 470R, 4K7, 47K, 47K3, 470K, 4M7) are those of the
standard as third parties transcribe them, the capacitor examples and the tolerance letters are from memory.
"""

from __future__ import annotations

import math
from collections.abc import Callable

import pytest
from hypothesis import given
from hypothesis import strategies as st

from tackbench.errors import InputError
from tackbench.values import (
    UNITS,
    Where,
    format_position,
    format_quantity,
    parse_position,
    parse_quantity,
    parse_tolerance,
)

OHMS = {
    "R47": 0.47,
    "4R7": 4.7,
    "470R": 470.0,
    "4K7": 4700.0,
    "47K": 47e3,
    "47K3": 47.3e3,
    "470K": 470e3,
    "4M7": 4.7e6,
    "4k7": 4700.0,
    "4m7": 0.0047,
    "M47": 470e3,
    "4.7k": 4700.0,
    "4.7 k": 4700.0,
    "2.2kohm": 2200.0,
    "2.2 k Ohms": 2200.0,
    "1M": 1e6,
    "1 MΩ": 1e6,
    "1\u2126": 1.0,
    "4\u03a97": 4.7,
    "4k7\u2126": 4700.0,
    "0": 0.0,
    "1e3": 1000.0,
    "1.5e3k": 1.5e6,
    "  10k ": 10e3,
    "10\u00a0k": 10e3,
}
FARADS = {
    "p47": 0.47e-12,
    "4n7": 4.7e-9,
    "100n": 100e-9,
    "2u2": 2.2e-6,
    "0u1": 0.1e-6,
    "\u00b51": 0.1e-6,
    "2\u03bc2": 2.2e-6,
    "100 nF": 100e-9,
    "10 \u00b5F": 10e-6,
    "47n": 47e-9,
    "1F5": 1.5,
    "2u2F": 2.2e-6,
    "10fF": 10e-15,
    "1m": 1e-3,
}


@pytest.mark.parametrize(("text", "value"), OHMS.items())
def test_resistances_in_every_spelling(text: str, value: float) -> None:
    assert parse_quantity(text, "ohm", ">=0") == value


@pytest.mark.parametrize(("text", "value"), FARADS.items())
def test_capacitances_in_every_spelling(text: str, value: float) -> None:
    assert parse_quantity(text, "F") == value


@pytest.mark.parametrize(
    ("text", "unit", "value"),
    [
        ("2H2", "H", 2.2),
        ("0.5 mH", "H", 0.5e-3),
        ("500m", "H", 0.5),
        ("-9V", "V", -9.0),
        ("\u22129 V", "V", -9.0),
        ("+4V5", "V", 4.5),
        ("4.5", "V", 4.5),
        ("2.52n", "A", 2.52e-9),
        ("10 fA", "A", 1e-14),
        ("3 MHz", "Hz", 3e6),
        ("13 V/us", "V/s", 13e6),
        ("0.5 V/\u00b5s", "V/s", 0.5e6),
        ("13M", "V/s", 13e6),
        ("200k", "", 200e3),
        ("0.02 1/V", "1/V", 0.02),
        ("100 mA/V2", "A/V2", 0.1),
        ("1.11 eV", "eV", 1.11),
        ("-5 °C", "celsius", -5.0),
        ("40C", "celsius", 40.0),
    ],
)
def test_other_units(text: str, unit: str, value: float) -> None:
    assert parse_quantity(text, unit, "any") == value


@pytest.mark.parametrize("value", [4700, 4700.0, "4700", "4k7", "4.7k", "4.7 kΩ"])
def test_every_way_of_writing_one_value_gives_the_same_float(value: object) -> None:
    assert parse_quantity(value, "ohm") == 4700.0


@pytest.mark.parametrize(
    ("raw", "unit", "words"),
    [
        ("100n F", "ohm", "farads"),
        ("5 H", "F", "henries"),
        ("9 V", "ohm", "volts"),
        ("47 kΩ", "V", "ohms"),
        ("4,7k", "ohm", "decimal comma"),
        ("4K7K", "ohm", "tolerance letter"),
        ("100nJ", "F", "tolerance letter"),
        ("1M", "F", "mega"),
        ("0M1", "F", "mega"),
        ("100nf", "F", "cannot be read"),
        ("4.7k7", "ohm", "cannot be read"),
        ("k", "ohm", "cannot be read"),
        ("", "ohm", "cannot be read"),
        ("abc", "V", "cannot be read"),
        ("nan", "V", "cannot be read"),
        ("inf", "V", "cannot be read"),
        ("1_000", "ohm", "cannot be read"),
        ("10K", "celsius", "cannot be read"),
        ("4k7\n5", "ohm", "cannot be read"),
        ("1" * 100, "ohm", "cannot be read"),
        (math.nan, "V", "not a finite"),
        (math.inf, "V", "not a finite"),
        (10**400, "ohm", "not a finite"),
        ("1e999", "ohm", "not a finite"),
        (True, "ohm", "true"),
        (None, "ohm", "not a value"),
        ([1], "ohm", "not a value"),
        (0, "ohm", "above zero"),
        ("-1k", "ohm", "above zero"),
        ("1e-400", "ohm", "above zero"),
        ("1e-30", "F", "beyond any real part"),
        (1e300, "ohm", "beyond any real part"),
    ],
)
def test_what_cannot_be_a_quantity_is_one_sentence_that_names_the_place(raw: object, unit: str, words: str) -> None:
    with pytest.raises(InputError) as caught:
        parse_quantity(raw, unit, ">0", Where("my.toml", "R1", "resistor"))
    message = str(caught.value)
    assert message.startswith("my.toml, R1, resistor: ")
    assert words in message
    assert "\n" not in message


@pytest.mark.parametrize(
    ("value", "unit", "text"),
    [
        (2.2e-9, "F", "2.2 nF"),
        (4700.0, "ohm", "4.7 kΩ"),
        (0.47, "ohm", "0.47 Ω"),
        (1e6, "ohm", "1 MΩ"),
        (999.96, "ohm", "1 kΩ"),
        (0.0, "ohm", "0 Ω"),
        (100e-6, "F", "100 µF"),
        (1000e-6, "F", "1000 µF"),
        (0.1, "F", "0.1 F"),
        (1e-9, "F", "1 nF"),
        (24.0, "V", "24 V"),
        (-9.0, "V", "-9 V"),
        (2.2, "H", "2.2 H"),
        (13e6, "V/s", "13 V/µs"),
        (200e3, "", "200000"),
        (40.0, "celsius", "40 °C"),
        (1e-14, "A", "10 fA"),
    ],
)
def test_values_are_written_as_people_write_them(value: float, unit: str, text: str) -> None:
    assert format_quantity(value, unit) == text


@given(
    st.sampled_from([key for key in UNITS if key != "celsius"]),
    st.floats(min_value=-1.0, max_value=1.0),
    st.booleans(),
)
def test_what_is_written_reads_back(unit: str, share: float, negative: bool) -> None:
    """Over the whole range of every unit, to within the digits written (5e-4 for four digits)."""
    kind = UNITS[unit]
    centre, reach = math.log(kind.low * kind.high) / 2, math.log(kind.high / kind.low) / 2
    value = math.exp(centre + 0.999 * share * reach) * (-1 if negative else 1)
    assert parse_quantity(format_quantity(value, unit), unit, "any") == pytest.approx(value, rel=5.1e-4)


@given(st.integers(1, 9999), st.sampled_from(["u", "m", "k", "M", "G"]), st.integers(0, 3))
def test_letter_code_equals_the_decimal_point(digits: int, prefix: str, decimals: int) -> None:
    """``4k7`` and ``4.7k`` and ``4.7 kΩ`` are the very same number, and 4.7 times 10³."""
    whole, part = divmod(digits, 10**decimals)
    tail = f"{part:0{decimals}d}" if decimals else ""
    exponent = {"u": -6, "m": -3, "k": 3, "M": 6, "G": 9}[prefix]
    value = parse_quantity(f"{whole}{prefix}{tail}", "ohm", ">=0")
    assert value == parse_quantity(f"{whole}.{tail or '0'}{prefix}", "ohm", ">=0")
    assert value == parse_quantity(f"{whole}.{tail or '0'} {prefix}Ω", "ohm", ">=0")
    assert value == pytest.approx(digits / 10**decimals * 10.0**exponent, rel=1e-14)


def outcome(read: Callable[..., float], *arguments: object) -> float | str:
    """What was read, or the sentence of the error."""
    try:
        return read(*arguments)
    except InputError as error:
        return str(error)


@given(
    st.one_of(
        st.text(max_size=12), st.text("0123456789.kKmMuµnpRFHVΩ /%eE+-", max_size=9), st.floats(), st.integers()
    )
)
def test_any_input_gives_a_finite_number_or_an_input_error(raw: object) -> None:
    for unit in UNITS:
        result = outcome(parse_quantity, raw, unit, "any")
        assert "\n" not in result if isinstance(result, str) else math.isfinite(result)
    for read in (parse_position, parse_tolerance):
        result = outcome(read, raw)
        assert "\n" not in result if isinstance(result, str) else 0.0 <= result <= 1.0


@pytest.mark.parametrize(
    ("raw", "value"),
    [
        ("0.7", 0.7),
        ("70%", 0.7),
        ("70 %", 0.7),
        ("7/10", 0.7),
        (0.7, 0.7),
        (1, 1.0),
        (0, 0.0),
        (".5", 0.5),
        ("1/3", 1 / 3),
    ],
)
def test_positions(raw: object, value: float) -> None:
    assert parse_position(raw) == pytest.approx(value, abs=1e-15)


@pytest.mark.parametrize(
    "raw", [7, "7", "110%", "7/0", "-0.1", "0,7", "", "full", True, None, math.nan, "11/10", "1e-1"]
)
def test_what_is_no_position(raw: object) -> None:
    with pytest.raises(InputError, match="70%"):
        parse_position(raw)


@pytest.mark.parametrize(
    ("raw", "fraction"),
    [
        ("10%", 0.1),
        ("± 5 %", 0.05),
        (10, 0.1),
        ("0.1%", 0.001),
        ("K", 0.1),
        ("J", 0.05),
        ("F", 0.01),
        ("M", 0.2),
        ("Z", 0.8),
    ],
)
def test_tolerances(raw: object, fraction: float) -> None:
    assert parse_tolerance(raw) == pytest.approx(fraction, rel=1e-12)


def test_below_ten_picofarads_some_tolerance_letters_are_picofarads() -> None:
    """IEC 60062 (from memory): D is 0.5 pF there, 0.5 % above."""
    assert parse_tolerance("D", farads=5e-12) == pytest.approx(0.1)
    assert parse_tolerance("D", farads=50e-12) == pytest.approx(0.005)


@pytest.mark.parametrize("raw", ["10", "A", "k", "120%", "-5%", True, None, math.inf, ""])
def test_what_is_no_tolerance(raw: object) -> None:
    with pytest.raises(InputError, match="tolerance"):
        parse_tolerance(raw)


def test_positions_for_people() -> None:
    assert format_position(0.7) == "70 %"
    assert format_position(1 / 3) == "33.33 %"
