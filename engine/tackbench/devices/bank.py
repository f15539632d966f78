"""All devices of a circuit as flat arrays: what the evaluation of the laws and the Newton iteration read."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from tackbench.devices.law import Law, Limits
from tackbench.devices.table import LAWS, MOST_CONTROLS, evaluate_devices


@dataclass(frozen=True)
class DeviceBank:
    """Device d has the law ``LAWS[laws[d]]``; its controls, currents and parameters start at ``first_…[d]``.

    ``scales``, ``high_knees``, ``low_knees`` (one per control) tell a Newton step how far it may leap; ``steady``
    marks the parameters that rise with the supply.
    """

    refs: tuple[str, ...]
    laws: np.ndarray
    first_control: np.ndarray
    first_current: np.ndarray
    first_parameter: np.ndarray
    parameters: np.ndarray
    steady: np.ndarray
    scales: np.ndarray
    high_knees: np.ndarray
    low_knees: np.ndarray
    currents: int

    @property
    def controls(self) -> int:
        return len(self.scales)

    @cached_property
    def control_of(self) -> np.ndarray:
        """For each device the number of its law's controls."""
        return np.array([len(LAWS[law].controls) for law in self.laws], dtype=np.int64)

    def evaluate(self, c: np.ndarray, supply: float = 1.0) -> tuple[np.ndarray, np.ndarray]:
        """Currents (m,) and slopes (m, K) at the control voltages ``c``; fixed rails at ``supply`` of their volts."""
        parameters = self.parameters if supply == 1.0 else np.where(self.steady, supply, 1.0) * self.parameters
        j, own = np.zeros(self.currents), np.zeros((self.currents, MOST_CONTROLS))
        starts = self.first_control, self.first_current, self.first_parameter
        evaluate_devices()(self.laws, *starts, parameters, c, j, own)
        slopes = np.zeros((self.currents, self.controls))
        for device, law in enumerate(self.laws):
            k, m = self.first_control[device], self.first_current[device]
            for row in range(len(LAWS[law].currents)):
                slopes[m + row, k : k + self.control_of[device]] = own[m + row, : self.control_of[device]]
        return j, slopes

    def device_of_control(self, control: int) -> str:
        """The designator of the device that the control belongs to."""
        return self.refs[int(np.searchsorted(self.first_control, control, side="right")) - 1]


def device_bank(
    devices: Sequence[tuple[str, Law, Sequence[float], Limits, Sequence[int]]],
) -> DeviceBank:
    """Lay out (designator, law, constants, limits, places of steady constants) one after the other."""
    numbers = {law.name: number for number, law in enumerate(LAWS)}
    steady = [[place in places for place in range(len(constants))] for _, _, constants, _, places in devices]

    def starts(lengths: list[int]) -> np.ndarray:
        return np.concatenate([[0], np.cumsum(lengths)])[:-1].astype(np.int64)

    def joined(lists: list[Sequence[float]]) -> np.ndarray:
        return np.array([value for values in lists for value in values], dtype=float)

    return DeviceBank(
        refs=tuple(ref for ref, *_ in devices),
        laws=np.array([numbers[law.name] for _, law, *_ in devices], dtype=np.int64),
        first_control=starts([len(law.controls) for _, law, *_ in devices]),
        first_current=starts([len(law.currents) for _, law, *_ in devices]),
        first_parameter=starts([len(constants) for _, _, constants, *_ in devices]),
        parameters=joined([constants for _, _, constants, *_ in devices]),
        steady=np.array([value for values in steady for value in values], dtype=bool),
        scales=joined([limits.scales for *_, limits, _ in devices]),
        high_knees=joined([limits.high_knees for *_, limits, _ in devices]),
        low_knees=joined([limits.low_knees for *_, limits, _ in devices]),
        currents=sum(len(law.currents) for _, law, *_ in devices),
    )
