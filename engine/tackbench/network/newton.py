"""Damped Newton iteration for the equations at rest."""

from __future__ import annotations

import numpy as np

from tackbench.devices.bank import DeviceBank

_TIGHT = 1e-9  # of a control's scale: the operating point is wanted to far less than a microvolt


def shorten(step: np.ndarray, c: np.ndarray, bank: DeviceBank) -> np.ndarray:
    """A Newton step with its leaps beyond a junction's knee shortened to their logarithm (Nagel 1975)."""
    target = c + step
    over = (step > 2.0 * bank.scales) & (target > bank.high_knees)
    base = np.maximum(c, bank.high_knees)
    with np.errstate(invalid="ignore"):
        up = base + bank.scales * np.log1p(np.maximum(target - base, 0.0) / bank.scales)
        floor = np.minimum(c, bank.low_knees)
        down = floor - bank.scales * np.log1p(np.maximum(floor - target, 0.0) / bank.scales)
    under = (step < -2.0 * bank.scales) & (target < bank.low_knees)
    return np.asarray(np.where(over, up, np.where(under, down, target)))


def newton(
    bank: DeviceBank, Y: np.ndarray, N: np.ndarray, r: np.ndarray, c: np.ndarray, supply: float, most: int = 60
) -> np.ndarray | None:
    """Solve Y c + N j(c) = r from ``c``; None when it has not converged within ``most`` iterations."""
    c = c.copy()
    for _ in range(most):
        j, slopes = bank.evaluate(c, supply)
        try:
            step = -np.linalg.solve(Y + N @ slopes, Y @ c + N @ j - r)
        except np.linalg.LinAlgError:
            return None
        if not np.all(np.isfinite(step)):
            return None
        target = shorten(step, c, bank)
        if np.max(np.abs(step) / (bank.scales + 1e-6 * np.abs(c)), initial=0.0) < _TIGHT:
            return target
        c = target
    return None
