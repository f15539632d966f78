"""Rows of lanes, with what is known to be zero left out: sums, products, and linear equations solved lane by lane."""

from __future__ import annotations

from typing import Any

from llvmlite import ir

from tackbench.kernel.vector import Lanes

Row = list[Any]
"""Vectors of lanes, None where a value is known to be zero."""


class Factors:
    """LU factors of a matrix of lanes: entries, inverse pivots, and the row exchanges as flags of lanes."""

    def __init__(self, entries: list[Row], inverses: Row, exchanges: list[tuple[int, int, ir.Value]]) -> None:
        self.entries, self.inverses, self.exchanges = entries, inverses, exchanges


class Rows:
    """Builds arithmetic on single values and rows, either of which may be None: zero."""

    def __init__(self, lanes: Lanes) -> None:
        self.v, self.b = lanes, lanes.builder

    def add(self, a: Any, b: Any) -> Any:
        if a is None or b is None:
            return b if a is None else a
        return self.b.fadd(a, b)

    def subtract(self, a: Any, b: Any) -> Any:
        if b is None:
            return a
        return self.b.fneg(b) if a is None else self.b.fsub(a, b)

    def add_product(self, total: Any, x: Any, y: Any) -> Any:
        if x is None or y is None:
            return total
        return self.b.fmul(x, y) if total is None else self.v.multiply_add(x, y, total)

    def full(self, value: Any) -> ir.Value:
        return self.v.number(0.0) if value is None else value

    def factor(self, matrix: list[Row], guarded: bool) -> Factors:
        """LU with row exchanges chosen lane by lane; ``guarded``: a pivot of zero counts as infinite."""
        a, size = [list(row) for row in matrix], len(matrix)
        inverses: Row = []
        exchanges: list[tuple[int, int, ir.Value]] = []
        for k in range(size):
            for i in range(k + 1, size):
                if a[i][k] is None:
                    continue
                flag = self.v.greater(self.v.magnitude(a[i][k]), self.v.magnitude(self.full(a[k][k])))
                exchanges.append((k, i, flag))
                for j in range(size):
                    a[k][j], a[i][j] = self.exchanged(flag, a[k][j], a[i][j])
            pivot = self.full(a[k][k])
            inverse = self.b.fdiv(self.v.number(1.0), pivot)
            if guarded:
                is_zero = self.b.fcmp_ordered("==", pivot, self.v.number(0.0))
                inverse = self.b.select(is_zero, self.v.number(0.0), inverse)
            inverses.append(inverse)
            for i in range(k + 1, size):
                if a[i][k] is None:
                    continue
                a[i][k] = self.b.fmul(a[i][k], inverse)
                less = self.b.fneg(a[i][k])
                for j in range(k + 1, size):
                    a[i][j] = self.add_product(a[i][j], less, a[k][j])
        return Factors(a, inverses, exchanges)

    def exchanged(self, flag: ir.Value, x: Any, y: Any) -> tuple[Any, Any]:
        if x is None and y is None:
            return None, None
        x, y = self.full(x), self.full(y)
        return self.b.select(flag, y, x), self.b.select(flag, x, y)

    def solve(self, factors: Factors, right: Row) -> Row:
        x, size = list(right), len(right)
        for k, i, flag in factors.exchanges:
            x[k], x[i] = self.exchanged(flag, x[k], x[i])
        for k in range(size):
            if x[k] is not None:
                for i in range(k + 1, size):
                    if factors.entries[i][k] is not None:
                        x[i] = self.add_product(x[i], self.b.fneg(factors.entries[i][k]), x[k])
        for k in range(size - 1, -1, -1):
            for j in range(k + 1, size):
                if factors.entries[k][j] is not None and x[j] is not None:
                    x[k] = self.add_product(x[k], self.b.fneg(factors.entries[k][j]), x[j])
            x[k] = None if x[k] is None else self.b.fmul(x[k], factors.inverses[k])
        return x
