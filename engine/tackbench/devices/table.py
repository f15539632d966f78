"""Every law there is, and the one function, made from the laws, that evaluates all devices of a circuit.

``evaluation_source`` writes that function as Python text. Run as it is, it serves the operating point; compiled,
it is the innermost part of the kernel.
"""

from __future__ import annotations

from collections.abc import Callable
from functools import cache
from math import exp, sqrt, tanh
from typing import Any

from tackbench.devices import bipolar, diode, fet, opamp
from tackbench.devices.law import Law

LAWS: tuple[Law, ...] = (
    diode.JUNCTION,
    diode.BREAKDOWN_JUNCTION,
    bipolar.BIPOLAR,
    fet.JFET,
    fet.MOSFET,
    opamp.CORE,
    opamp.LIVE_CORE,
    opamp.LIMITED_OUTPUT,
    opamp.RAIL_DRAWS,
    opamp.LIMITED_OUTPUT_DRAWS,
)
"""The order is the number by which compiled code knows a law."""


def _branch(number: int, law: Law) -> list[str]:
    program = law.program
    lines = [f"{'if' if number == 0 else 'elif'} law == {number}:  # {law.name}"]
    lines += [f"    c{k} = c[control + {k}]" for k in range(len(law.controls))]
    lines += [f"    p{k} = p[parameter + {k}]" for k in range(len(law.parameters))]
    lines += [f"    {line}" for line in program.lines]
    for row, text in enumerate(program.currents):
        lines.append(f"    j[current + {row}] = {text}")
        lines += [f"    g[current + {row}, {column}] = {slope}" for column, slope in enumerate(program.slopes[row])]
    return lines


def evaluation_source() -> str:
    """Text of ``evaluate_devices(laws, first_control, first_current, first_parameter, p, c, j, g)``.

    For each device it writes its currents into ``j`` and their derivatives by the device's own controls into the rows
    of ``g``, shape (currents, largest number of controls of one law).
    """
    lines = ["def evaluate_devices(laws, first_control, first_current, first_parameter, p, c, j, g):"]
    lines += ["    for device in range(laws.size):", "        law = laws[device]"]
    lines += ["        control = first_control[device]", "        current = first_current[device]"]
    lines += ["        parameter = first_parameter[device]"]
    for number, law in enumerate(LAWS):
        lines += ["        " + line for line in _branch(number, law)]
    return "\n".join(lines) + "\n"


MOST_CONTROLS = max(len(law.controls) for law in LAWS)


@cache
def evaluate_devices() -> Callable[..., None]:
    """The evaluation as a plain Python function; the kernel compiles this same function."""
    space: dict[str, Any] = {"exp": exp, "tanh": tanh, "sqrt": sqrt}
    exec(compile(evaluation_source(), "<device laws>", "exec"), space)
    function: Callable[..., None] = space["evaluate_devices"]
    return function
