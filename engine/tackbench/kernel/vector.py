"""Arithmetic on lanes in LLVM's intermediate representation: one value per lane, branch-free, the same in any lane.

Nothing here reorders or approximates beyond what it states (no fast-math), so a lane's bits do not depend on how many
lanes there are or on what runs in the others.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from functools import cached_property
from typing import Any

from llvmlite import ir

F64, I64, I1 = ir.DoubleType(), ir.IntType(64), ir.IntType(1)

_LOG2_E = 1.4426950408889634
_LN2_HIGH, _LN2_LOW = 0.6931471803691238, 1.9082149292705877e-10  # sum to ln 2; the first has 20 spare bits
_ROUNDING = 1.5 * 2.0**52  # added and taken off again: rounds to the nearest whole number
_LOWEST = -708.0  # below it exp would be subnormal
_EXP_TERMS = 13  # of Taylor's series on |x| <= ln 2 / 2: the rest is below 2^-56


class Lanes:
    """Builds instructions on lanes at the end of a block; ``fused``: the processor has fused multiply-add."""

    def __init__(self, builder: ir.IRBuilder, width: int, fused: bool) -> None:
        self.builder, self.width, self._fused = builder, width, fused
        self.real: ir.Type = F64 if width == 1 else ir.VectorType(F64, width)
        self.whole: ir.Type = I64 if width == 1 else ir.VectorType(I64, width)
        self.flag: ir.Type = I1 if width == 1 else ir.VectorType(I1, width)

    @cached_property
    def _module(self) -> ir.Module:
        return self.builder.module

    def number(self, value: float) -> ir.Constant:
        """The same real number in every lane."""
        return ir.Constant(self.real, value if self.width == 1 else [value] * self.width)

    def integer(self, value: int) -> ir.Constant:
        return ir.Constant(self.whole, value if self.width == 1 else [value] * self.width)

    def flags(self, value: bool) -> ir.Constant:
        """The same flag in every lane."""
        return ir.Constant(self.flag, value if self.width == 1 else [value] * self.width)

    def spread(self, scalar: ir.Value, kind: ir.Type | None = None) -> ir.Value:
        """A scalar in every lane."""
        if self.width == 1:
            return scalar
        kind = kind or (self.real if scalar.type == F64 else self.whole)
        first = self.builder.insert_element(ir.Constant(kind, ir.Undefined), scalar, ir.Constant(ir.IntType(32), 0))
        zeros = ir.Constant(ir.VectorType(ir.IntType(32), self.width), [0] * self.width)
        return self.builder.shuffle_vector(first, ir.Constant(kind, ir.Undefined), zeros)

    def lane(self, value: ir.Value, index: int) -> ir.Value:
        """One lane's scalar."""
        if self.width == 1:
            return value
        return self.builder.extract_element(value, ir.Constant(ir.IntType(32), index))

    def load(self, base: ir.Value, index: int | ir.Value) -> ir.Value:
        """The lanes at ``base`` (pointer to double or int64), vector number ``index``."""
        return self.builder.load(self._place(base, index), align=8)

    def store(self, value: ir.Value, base: ir.Value, index: int | ir.Value) -> None:
        self.builder.store(value, self._place(base, index), align=8)

    def _place(self, base: ir.Value, index: int | ir.Value) -> ir.Value:
        if isinstance(index, int):
            offset: ir.Value = ir.Constant(I64, index * self.width)
        else:
            offset = self.builder.mul(index, ir.Constant(I64, self.width))
        pointer = self.builder.gep(base, [offset])
        kind = self.real if base.type.pointee == F64 else self.whole
        return self.builder.bitcast(pointer, kind.as_pointer())

    def call(self, name: str, *arguments: ir.Value) -> ir.Value:
        """An LLVM intrinsic on the lanes."""
        kind = arguments[0].type
        suffix = "f64" if self.width == 1 else f"v{self.width}f64"
        function = self._module.globals.get(f"llvm.{name}.{suffix}")
        if function is None:
            function = ir.Function(
                self._module, ir.FunctionType(kind, [kind] * len(arguments)), f"llvm.{name}.{suffix}"
            )
        return self.builder.call(function, arguments)

    def multiply_add(self, a: ir.Value, b: ir.Value, c: ir.Value) -> ir.Value:
        """a b + c, rounded once where the processor can."""
        if self._fused:
            return self.call("fma", a, b, c)
        return self.builder.fadd(self.builder.fmul(a, b), c)

    def greater(self, a: ir.Value, b: ir.Value) -> ir.Value:
        """a > b; false where either is not a number."""
        return self.builder.fcmp_ordered(">", a, b)

    def magnitude(self, a: ir.Value) -> ir.Value:
        return self.call("fabs", a)

    def least(self, a: ir.Value, b: ir.Value) -> ir.Value:
        """The smaller; ``b`` where either is not a number."""
        return self.builder.select(self.builder.fcmp_ordered("<", a, b), a, b)

    def most(self, a: ir.Value, b: ir.Value) -> ir.Value:
        """The larger; ``b`` where either is not a number."""
        return self.builder.select(self.builder.fcmp_ordered(">", a, b), a, b)

    def any(self, flags: ir.Value) -> ir.Value:
        """True when a flag is set in any lane."""
        if self.width == 1:
            return flags
        packed = self.builder.bitcast(flags, ir.IntType(self.width))
        return self.builder.icmp_unsigned("!=", packed, ir.Constant(ir.IntType(self.width), 0))

    def exp(self, x: ir.Value) -> ir.Value:
        """e^x within about one unit in the last place; 0 below -708, infinite only far above any law's knee."""
        b = self.builder
        bounded = self.least(self.most(x, self.number(_LOWEST)), self.number(709.0))
        shifted = self.multiply_add(bounded, self.number(_LOG2_E), self.number(_ROUNDING))
        count = b.fsub(shifted, self.number(_ROUNDING))
        rest = self.multiply_add(count, self.number(-_LN2_HIGH), bounded)
        rest = self.multiply_add(count, self.number(-_LN2_LOW), rest)
        square = b.fmul(rest, rest)
        terms = [1.0 / math.factorial(power) for power in range(_EXP_TERMS + 1)]
        even = self._polynomial(square, terms[0::2])
        odd = self._polynomial(square, terms[1::2])
        value = self.multiply_add(odd, rest, even)
        exponent = b.shl(b.bitcast(shifted, self.whole), self.integer(52))
        return b.bitcast(b.add(b.bitcast(value, self.whole), exponent), self.real)

    def _polynomial(self, x: ir.Value, terms: Sequence[float]) -> ir.Value:
        total: ir.Value = self.number(terms[-1])
        for term in reversed(terms[:-1]):
            total = self.multiply_add(total, x, self.number(term))
        return total

    def tanh(self, x: ir.Value) -> ir.Value:
        """(1 - e^-2|x|) / (1 + e^-2|x|) with the sign of x: exact to about 2^-53 of one."""
        b = self.builder
        small = self.exp(b.fmul(self.magnitude(x), self.number(-2.0)))
        size = b.fdiv(b.fsub(self.number(1.0), small), b.fadd(self.number(1.0), small))
        return self.call("copysign", size, x)

    def operation(self, name: str, arguments: Sequence[ir.Value]) -> ir.Value:
        """One operation of a traced law (see ``devices.trace``)."""
        b = self.builder
        simple: dict[str, Any] = {"+": b.fadd, "-": b.fsub, "*": b.fmul, "/": b.fdiv}
        if name in simple:
            return simple[name](*arguments)
        if name == "exp":
            return self.exp(arguments[0])
        if name == "exp_below":
            return self.exp(self.least(arguments[0], arguments[1]))
        if name == "line_exp":
            x, knee, below = arguments
            above = self.most(b.fsub(x, knee), self.number(0.0))
            return b.fmul(below, b.fadd(self.number(1.0), above))
        if name == "tanh":
            return self.tanh(arguments[0])
        if name == "sqrt":
            return self.call("sqrt", arguments[0])
        if name == "select":
            return b.select(self.greater(arguments[0], self.number(0.0)), arguments[1], arguments[2])
        raise ValueError(f"no instructions are known for {name!r}")
