"""Which part of which law is carried by the network itself."""

from __future__ import annotations

import numpy as np

from tackbench.devices import opamp
from tackbench.devices.table import LAWS
from tackbench.network.model import NetworkModel

_CARRIED = {opamp.CORE.name, opamp.LIVE_CORE.name}


def linear_part(model: NetworkModel, c: np.ndarray) -> np.ndarray:
    """Slopes dj/dc at the operating point ``c`` of the laws that are mostly linear in use, zero for the others.

    Shape (currents, controls). An op-amp's input stage is linear until it slews: moved into the network it becomes a
    pole that the exact linear rule carries without error, so a quiet take is rendered as exactly as a loud one.
    """
    _, slopes = model.bank.evaluate(c)
    carried = np.zeros(model.bank.currents, dtype=bool)
    for device, law in enumerate(model.bank.laws):
        first = model.bank.first_current[device]
        carried[first : first + len(LAWS[law].currents)] = LAWS[law].name in _CARRIED
    return np.where(carried[:, None], slopes, 0.0)
