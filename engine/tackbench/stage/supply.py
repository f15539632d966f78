"""Supply voltages as chosen: the sign they take, and what is refused."""

from __future__ import annotations

from typing import Any

from tackbench.values import Where, parse_quantity, shown


def signed_volts(raw: Any, own_volts: float, where: Where) -> float:
    """A supply voltage chosen as ``raw`` for a stage built for ``own_volts``: without a sign it takes that one's.

    Raises InputError for zero, for what cannot be read, and for a sign that would feed the stage backwards.
    """
    volts = parse_quantity(raw, "V", "!=0", where)
    said = volts < 0 or (isinstance(raw, str) and raw.strip().startswith("+"))
    if said and (volts < 0) != (own_volts < 0):
        side = "below" if own_volts < 0 else "above"
        raise where.fault(f"{shown(raw)} would feed the stage backwards", f"its supply lies {side} ground")
    return abs(volts) if own_volts > 0 else -abs(volts)
