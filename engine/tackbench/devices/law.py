"""What the solver knows of a law: its function, its controls and currents, and how far a Newton step may leap."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any

from tackbench.devices.trace import Program, Traced, program, trace


@dataclass(frozen=True)
class Law:
    """A memoryless law: currents as functions of control voltages.

    ``function(operations, controls, parameters)`` returns one value per name in ``currents``. Nothing here assumes
    one port or symmetry: any number of controls and currents, and an unsymmetric derivative.
    """

    name: str
    function: Callable[[Any, Sequence[Any], Sequence[Any]], list[Any]]
    controls: tuple[str, ...]
    currents: tuple[str, ...]
    parameters: tuple[str, ...]

    @cached_property
    def traced(self) -> Traced:
        """The law's graph with its derivatives."""
        return trace(self.function, len(self.controls), len(self.parameters))

    @cached_property
    def program(self) -> Program:
        """Statements for the currents and their partial derivatives."""
        return program(self.traced)


@dataclass(frozen=True)
class Limits:
    """Per control: the voltage scale over which the law bends, and the knees beyond which a long Newton step is
    shortened to its logarithm (infinite where the law has none)."""

    scales: tuple[float, ...]
    high_knees: tuple[float, ...]
    low_knees: tuple[float, ...]
