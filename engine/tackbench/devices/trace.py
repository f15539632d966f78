"""Laws written once: a law traced over a few operations gives its derivative and its straight-line program.

A law is a plain function of an operation set, its control voltages and its parameters. Called with ``NUMBERS`` it
computes with floats, complex numbers or NumPy arrays. Called with expressions it leaves a graph, from which
``program`` derives the partial derivatives and writes the statements that every compiled form is made of.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np


class Numbers:
    """The operations on numbers: floats, complex numbers (for a complex step) and NumPy arrays."""

    def line_exp(self, x: Any, knee: Any) -> Any:
        """exp(x), going on above ``knee`` as the straight line that touches it there."""
        below = np.where(np.real(x) < np.real(knee), x, knee)
        above = np.where(np.real(x) < np.real(knee), 0.0, x - knee)
        return np.exp(below) * (1.0 + above)

    def exp(self, x: Any) -> Any:
        return np.exp(x)

    def tanh(self, x: Any) -> Any:
        return np.tanh(x)

    def sqrt(self, x: Any) -> Any:
        return np.sqrt(x)

    def select(self, test: Any, positive: Any, otherwise: Any) -> Any:
        """``positive`` where ``test`` > 0, else ``otherwise``."""
        return np.where(np.real(test) > 0, positive, otherwise)


NUMBERS = Numbers()


class Expression:
    """A node of a law's graph; equal nodes are one node, so that common terms are computed once."""

    def __init__(self, graph: Graph, index: int) -> None:
        self.graph, self.index = graph, index

    def _binary(self, operation: str, other: Any, swapped: bool = False) -> Expression:
        pair = (self.graph.constant(other), self) if swapped else (self, self.graph.constant(other))
        return self.graph.node(operation, *pair)

    def __add__(self, other: Any) -> Expression:
        return self._binary("+", other)

    __radd__ = __add__

    def __sub__(self, other: Any) -> Expression:
        return self._binary("-", other)

    def __rsub__(self, other: Any) -> Expression:
        return self._binary("-", other, swapped=True)

    def __mul__(self, other: Any) -> Expression:
        return self._binary("*", other)

    __rmul__ = __mul__

    def __truediv__(self, other: Any) -> Expression:
        return self._binary("/", other)

    def __rtruediv__(self, other: Any) -> Expression:
        return self._binary("/", other, swapped=True)

    def __neg__(self) -> Expression:
        return self._binary("-", 0.0, swapped=True)


class Graph:
    """The expressions of one law; it is also the operation set that the law is called with while it is traced."""

    def __init__(self) -> None:
        self.nodes: list[tuple[Any, ...]] = []
        self._known: dict[tuple[Any, ...], int] = {}

    def _enter(self, key: tuple[Any, ...]) -> Expression:
        if key not in self._known:
            self._known[key] = len(self.nodes)
            self.nodes.append(key)
        return Expression(self, self._known[key])

    def symbol(self, text: str) -> Expression:
        return self._enter(("symbol", text))

    def constant(self, value: Any) -> Expression:
        return value if isinstance(value, Expression) else self._enter(("constant", float(value)))

    def value_of(self, expression: Expression) -> float | None:
        node = self.nodes[expression.index]
        return node[1] if node[0] == "constant" else None

    def node(self, operation: str, *arguments: Expression) -> Expression:
        values = [self.value_of(argument) for argument in arguments]
        if operation == "+" and 0.0 in values:
            return arguments[1 - values.index(0.0)]
        if operation == "-" and values[1] == 0.0:
            return arguments[0]
        if operation == "*" and 0.0 in values:
            return self.constant(0.0)
        if operation == "*" and 1.0 in values:
            return arguments[1 - values.index(1.0)]
        if operation == "/" and values[0] == 0.0:
            return self.constant(0.0)
        return self._enter((operation, *(argument.index for argument in arguments)))

    def line_exp(self, x: Any, knee: Any) -> Expression:
        x, knee = self.constant(x), self.constant(knee)
        return self.node("line_exp", x, knee, self.node("exp_below", x, knee))

    def exp(self, x: Any) -> Expression:
        return self.node("exp", self.constant(x))

    def tanh(self, x: Any) -> Expression:
        return self.node("tanh", self.constant(x))

    def sqrt(self, x: Any) -> Expression:
        return self.node("sqrt", self.constant(x))

    def select(self, test: Any, positive: Any, otherwise: Any) -> Expression:
        a, b = self.constant(positive), self.constant(otherwise)
        return a if a.index == b.index else self.node("select", self.constant(test), a, b)

    def derivative(self, of: Expression, by: Expression, done: dict[int, Expression] | None = None) -> Expression:
        """The partial derivative, by the chain rule over the graph."""
        done = {} if done is None else done
        if of.index not in done:
            done[of.index] = self._derivative(of, by, done)
        return done[of.index]

    def _derivative(self, of: Expression, by: Expression, done: dict[int, Expression]) -> Expression:
        operation, *rest = self.nodes[of.index]
        if of.index == by.index:
            return self.constant(1.0)
        if operation in ("symbol", "constant"):
            return self.constant(0.0)
        a = [Expression(self, index) for index in rest]
        if operation == "line_exp":  # the slope of exp below the knee, that of its tangent above
            return a[2] * self.derivative(a[0], by, done)
        d = [self.derivative(argument, by, done) for argument in a]
        if operation in "+-":
            return self.node(operation, *d)
        if operation == "*":
            return d[0] * a[1] + a[0] * d[1]
        if operation == "/":
            return d[0] / a[1] - (of / a[1]) * d[1]
        if operation == "exp":
            return of * d[0]
        if operation == "tanh":
            return (1.0 - of * of) * d[0]
        if operation == "sqrt":
            return d[0] * 0.5 / of
        if operation == "select":
            return self.select(a[0], d[1], d[2])
        raise ValueError(f"no derivative is known for {operation!r}")

    def depends(self, roots: Sequence[Expression]) -> list[int]:
        """The nodes that ``roots`` are made of, each after those that it uses."""
        needed, stack = set(), [root.index for root in roots]
        while stack:
            index = stack.pop()
            if index not in needed:
                needed.add(index)
                operation, *rest = self.nodes[index]
                if operation not in ("symbol", "constant"):
                    stack.extend(rest)
        return sorted(needed)

    def statements(self, roots: Sequence[Expression], prefix: str) -> tuple[list[str], list[str]]:
        """Straight-line Python statements that compute ``roots``, and the text by which each root is then known."""
        name: dict[int, str] = {}
        lines: list[str] = []
        for index in self.depends(roots):
            operation, *rest = self.nodes[index]
            if operation == "symbol":
                name[index] = rest[0]
            elif operation == "constant":
                name[index] = repr(rest[0])
            else:
                name[index] = f"{prefix}{index}"
                lines.append(f"{name[index]} = {_TEXT[operation](*(name[argument] for argument in rest))}")
        return lines, [name[root.index] for root in roots]


_TEXT: dict[str, Callable[..., str]] = {
    "+": "({} + {})".format,
    "-": "({} - {})".format,
    "*": "({} * {})".format,
    "/": "({} / {})".format,
    "exp": "exp({})".format,
    "exp_below": "exp(min({}, {}))".format,
    "line_exp": "({2} * (1.0 + max({0} - {1}, 0.0)))".format,
    "tanh": "tanh({})".format,
    "sqrt": "sqrt({})".format,
    "select": "({1} if {0} > 0.0 else {2})".format,
}


@dataclass(frozen=True)
class Program:
    """A law as statements: ``lines`` in terms of c0, c1, … (controls) and p0, p1, … (parameters); then the texts of
    the currents and of their partial derivatives, ``slopes[current][control]``."""

    lines: tuple[str, ...]
    currents: tuple[str, ...]
    slopes: tuple[tuple[str, ...], ...]


@dataclass(frozen=True)
class Traced:
    """A law's graph over the symbols c0, c1, … and p0, p1, …: its currents and ``slopes[current][control]``."""

    graph: Graph
    currents: tuple[Expression, ...]
    slopes: tuple[tuple[Expression, ...], ...]

    @property
    def roots(self) -> tuple[Expression, ...]:
        """The currents, then their slopes row by row."""
        return (*self.currents, *(slope for row in self.slopes for slope in row))


def trace(law: Callable[..., Sequence[Any]], controls: int, parameters: int) -> Traced:
    """Trace ``law(operations, controls, parameters)`` and derive it."""
    graph = Graph()
    c = [graph.symbol(f"c{k}") for k in range(controls)]
    p = [graph.symbol(f"p{k}") for k in range(parameters)]
    currents = [graph.constant(value) for value in law(graph, c, p)]
    slopes = [tuple(graph.derivative(current, control) for control in c) for current in currents]
    return Traced(graph, tuple(currents), tuple(slopes))


def program(traced: Traced, prefix: str = "t") -> Program:
    """The statements of a traced law."""
    lines, names = traced.graph.statements(traced.roots, prefix)
    count = len(traced.currents)
    controls = len(traced.slopes[0]) if traced.slopes else 0
    texts = [tuple(names[count + row * controls : count + (row + 1) * controls]) for row in range(count)]
    return Program(tuple(lines), tuple(names[:count]), tuple(texts))
