"""Writing values for people: ``2.2 nF``, ``4.7 kΩ``, ``24 V``, ``70 %``."""

from __future__ import annotations

from tackbench.values.units import PREFIXES, UNITS


def format_quantity(value: float, unit: str, digits: int = 4) -> str:
    """``value`` in the base unit ``unit`` (a key of ``UNITS``) with a prefix and ``digits`` significant digits.

    What comes out reads back through ``parse_quantity`` to within those digits.
    """
    kind = UNITS[unit]
    if unit == "V/s" and abs(value) >= 1e5:
        return f"{_plain(value / 1e6, digits)} V/µs"
    prefix, scaled = _scaled(value, kind.shown, digits)
    return f"{_plain(scaled, digits)} {prefix.replace('u', 'µ')}{kind.symbol}".rstrip()


def format_position(value: float) -> str:
    """A control position in percent: ``70 %``."""
    return f"{_plain(100.0 * value, 4)} %"


def _scaled(value: float, prefixes: tuple[str, ...], digits: int) -> tuple[str, float]:
    """The prefix that leaves one to three digits before the point (the nearest there is), and the scaled value."""
    if value == 0 or prefixes == ("",):
        return "", value
    exponent = int(f"{value:.{digits - 1}e}".split("e")[1])  # after rounding: 999.96 is 1 k
    powers = {prefix: PREFIXES.get(prefix, 0) for prefix in prefixes}
    fitting = [prefix for prefix in prefixes if powers[prefix] <= exponent]
    prefix = fitting[-1] if fitting else prefixes[0]
    if "" not in powers and exponent - powers[prefix] > 4:  # 0.1 F is not 100000 µF
        return "", value
    return prefix, float(f"{value:.16e}".split("e")[0] + f"e{int(f'{value:.16e}'.split('e')[1]) - powers[prefix]}")


def _plain(value: float, digits: int) -> str:
    """``digits`` significant digits without trailing zeros; powers of ten only where they save many noughts."""
    text = f"{value:.{digits}g}"
    return f"{value:.0f}" if "e+" in text and abs(value) < 1e6 else text
