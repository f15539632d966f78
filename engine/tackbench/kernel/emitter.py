"""Writes a kernel for one shape as LLVM intermediate representation: the plain kernel's steps, unrolled, in lanes.

What ``kernel.plain.advance`` does in loops over sizes stands here as straight-line code over the entries that are not
zero; each value is a vector of lanes, and each lane is a circuit of its own with its own place in time, length of
step, Newton iteration and rejections. In one turn of the inner loop a step is tried for the lane that is furthest
behind and for those at the same place and level; the others wait. So a lane's samples do not depend on its company.
A step that Newton's method does not solve at the finest level is left to the plain kernel.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
from llvmlite import ir

from tackbench.devices.table import LAWS
from tackbench.kernel.plain import DENSE, SIX_POINTS
from tackbench.kernel.problem import LEVELED
from tackbench.kernel.root import NEWTON_TOLERANCE, PLAIN_ITERATIONS
from tackbench.kernel.rows import Factors, Row, Rows
from tackbench.kernel.shape import Shape
from tackbench.kernel.vector import F64, I64, Lanes

ENTRY = "advance"

_SMALL = 0.08  # of the tolerance: an error below it lets the next step be longer
_ARGUMENTS = (
    ("u", F64.as_pointer()),
    ("out", F64.as_pointer()),
    ("state", F64.as_pointer()),
    ("saved", F64.as_pointer()),
    ("level", I64.as_pointer()),
    ("failed", I64.as_pointer()),
    ("counts", I64.as_pointer()),
    ("leveled", F64.as_pointer()),
    ("fixed", F64.as_pointer()),
    ("first", I64),
    ("stop", I64),
    ("base_step", F64),
    ("coarsest", I64),
    ("finest", I64),
    ("last", I64),
    ("tolerance", F64),
)


def emit(shape: Shape, fused: bool) -> str:
    """The module's text. Its one function, ``ENTRY``, crosses base intervals ``first`` … ``stop`` - 1.

    Arguments, arrays of doubles or int64 with the lanes innermost: ``u`` (stop + 5 samples), ``out`` (8 stop: means
    over cells), ``state`` (X, c, j; their slopes; the controls' bend), ``saved`` (as ``state``), ``level``,
    ``failed``, ``counts`` (5), ``leveled`` and ``fixed`` (see ``shape.packed``); the scalars ``first``, ``stop``,
    ``base_step`` (s),
    ``coarsest``, ``finest``, ``last`` (levels; ``last`` is at least 3) and ``tolerance`` (V). A lane whose level is
    negative rests. Returns ``stop``, or the interval in which the lanes flagged in ``failed`` were given up; their
    condition at its start is in ``saved`` and in ``level``.
    """
    module = ir.Module(name="tackbench")
    kind = ir.FunctionType(I64, [argument for _, argument in _ARGUMENTS])
    function = ir.Function(module, kind, ENTRY)
    for (name, argument_kind), argument in zip(_ARGUMENTS, function.args, strict=True):
        argument.name = name
        if argument_kind in (F64.as_pointer(), I64.as_pointer()):
            argument.add_attribute("noalias")
    _Emitter(shape, function, fused).emit()
    return str(module)


class _Emitter(Rows):
    def __init__(self, shape: Shape, function: ir.Function, fused: bool) -> None:
        self.shape, self.function = shape, function
        builder = ir.IRBuilder(function.append_basic_block("entry"))
        super().__init__(Lanes(builder, shape.width, fused))
        self.a = dict(zip((name for name, _ in _ARGUMENTS), function.args, strict=True))
        self.sizes = shape.n, shape.K, shape.m
        self.controls, self.currents, self.parameters = self._places()
        self.coefficients: ir.Value = None

    def _places(self) -> tuple[list[int], list[int], list[int]]:
        """Where each device's controls, currents and parameters begin."""
        places: tuple[list[int], list[int], list[int]] = ([], [], [])
        at = [0, 0, 0]
        for law in (LAWS[number] for number in self.shape.laws):
            for k, count in enumerate((len(law.controls), len(law.currents), len(law.parameters))):
                places[k].append(at[k])
                at[k] += count
        return places

    # ------------------------------------------------------------ rows and matrices

    def fixed(self, name: str, row: int, column: int) -> Any:
        slot = int(self.shape.slots[name][row, column])
        return None if slot < 0 else self.v.load(self.a["fixed"], slot)

    def entry(self, name: str, row: int, column: int) -> Any:
        """A matrix's entry, of the step's level where it has levels; None where it is zero."""
        slot = int(self.shape.slots[name][row, column])
        if slot < 0:
            return None
        return self.v.load(self.coefficients if name in LEVELED else self.a["fixed"], slot)

    def times(self, name: str, vector: Row, start: Row | None = None) -> Row:
        """``start`` plus the matrix times ``vector``."""
        flags = self.shape.flags[name]
        result: Row = []
        for row in range(len(flags)):
            total = None if start is None else start[row]
            for column in np.flatnonzero(flags[row]):
                if vector[column] is not None:
                    total = self.add_product(total, self.entry(name, row, int(column)), vector[column])
            result.append(total)
        return result

    def with_currents(self, c: Row, g: list[Row]) -> Row:
        """(c, (dj/dc) c)."""
        changes: Row = list(c)
        for device, number in enumerate(self.shape.laws):
            k, law = self.controls[device], LAWS[number]
            for row in range(len(law.currents)):
                total = None
                for control in range(len(law.controls)):
                    total = self.add_product(total, g[self.currents[device] + row][control], c[k + control])
                changes.append(total)
        return changes

    def jacobian(self, Y: str, N: str, g: list[Row]) -> list[Row]:
        """Y + N · dj/dc."""
        _, K, _ = self.sizes
        matrix = []
        for row in range(K):
            entries: Row = [self.entry(Y, row, column) for column in range(K)]
            for device, number in enumerate(self.shape.laws):
                k, law = self.controls[device], LAWS[number]
                for current in range(len(law.currents)):
                    place = self.currents[device] + current
                    weight = self.entry(N, row, place)
                    for control in range(len(law.controls)):
                        entries[k + control] = self.add_product(entries[k + control], weight, g[place][control])
            matrix.append(entries)
        return matrix

    # ------------------------------------------------------------ the circuit's equations

    def evaluate(self, c: Row) -> tuple[Row, list[Row]]:
        """The devices' currents at the controls ``c`` and each current's slopes by its device's own controls."""
        j: Row = []
        g: list[Row] = []
        for device, number in enumerate(self.shape.laws):
            law = LAWS[number]
            traced = law.traced
            known: dict[int, Any] = {}
            for index in traced.graph.depends(traced.roots):
                operation, *rest = traced.graph.nodes[index]
                if operation == "symbol":
                    place = int(rest[0][1:])
                    if rest[0][0] == "c":
                        known[index] = c[self.controls[device] + place]
                    else:
                        known[index] = self.fixed("parameters", 0, self.parameters[device] + place)
                elif operation == "constant":
                    known[index] = self.v.number(rest[0])
                else:
                    known[index] = self.v.operation(operation, [known[argument] for argument in rest])
            j += [known[current.index] for current in traced.currents]
            g += [[known[slope.index] for slope in row] for row in traced.slopes]
        return j, g

    def slopes(self, z: Row, u: Any, u_slope: Any, g: list[Row], rest: Factors) -> Row:
        """Slopes of (X, c, j) where they are ``z``; see ``plain._slopes``."""
        of_X = self.times("ABE", [*z, u, self.v.number(1.0)])
        driven = [self.add_product(None, self.fixed("S0", k, 0), u_slope) for k in range(self.shape.K)]
        of_c = self.solve(rest, self.times("R0", of_X, driven))
        return [*of_X, *self.with_currents(of_c, g)]

    def closed(self, error: Row, g: list[Row], factors: Factors) -> tuple[Row, Row]:
        """An error as the root lets it through, and the change of (c, j) that goes with it; see ``plain._close``."""
        change = self.with_currents(self.solve(factors, self.times("R", error)), g)
        return self.times("Q", change, error), change

    # ------------------------------------------------------------ control flow

    def emit(self) -> None:
        b, v, a = self.b, self.v, self.a
        n, K, m = self.sizes
        self.place = b.alloca(v.whole, name="place")
        self.flagged = b.alloca(v.flag, name="flagged")
        self.area = b.alloca(v.real, name="area")
        entry = b.block
        interval_block = self.function.append_basic_block("interval")
        done_block = self.function.append_basic_block("done")
        self.whole = b.shl(ir.Constant(I64, 1), a["last"])
        self.per_base = b.fdiv(ir.Constant(F64, 1.0), a["base_step"])
        self.to_fraction = b.fdiv(ir.Constant(F64, 1.0), b.uitofp(self.whole, F64))
        self.dense_shift = b.sub(a["last"], ir.Constant(I64, 3))
        b.cbranch(b.icmp_signed("<", a["first"], a["stop"]), interval_block, done_block)

        b.position_at_end(interval_block)
        self.interval = b.phi(I64, "interval")
        self.interval.add_incoming(a["first"], entry)
        samples = [v.load(a["u"], b.add(self.interval, ir.Constant(I64, k))) for k in range(6)]
        power: Row = []
        for k in range(6):
            total = None
            for i in range(6):
                weight = float(SIX_POINTS[k, i])
                total = self.add_product(total, None if weight == 0.0 else v.number(weight), samples[i])
            power.append(self.full(total))
        for k in range(2 * (n + K + m) + K):
            v.store(v.load(a["state"], k), a["saved"], k)
        level = v.load(a["level"], 0)
        rests = b.icmp_signed("<", level, v.integer(0))
        b.store(b.select(rests, v.spread(self.whole), v.integer(0)), self.place)
        b.store(v.flags(False), self.flagged)
        b.store(v.number(0.0), self.area)
        turn_block = self.function.append_basic_block("turn")
        b.branch(turn_block)

        b.position_at_end(turn_block)
        self.now, self.level_now = self._furthest_behind()
        step_block = self.function.append_basic_block("step")
        end_block = self.function.append_basic_block("interval_end")
        b.cbranch(b.icmp_signed("<", self.now, self.whole), step_block, end_block)

        b.position_at_end(step_block)
        self._step(power, turn_block)

        b.position_at_end(end_block)
        flagged = b.load(self.flagged)
        failed_block = self.function.append_basic_block("failed")
        next_block = self.function.append_basic_block("next")
        b.cbranch(v.any(flagged), failed_block, next_block)
        b.position_at_end(failed_block)
        v.store(b.zext(flagged, v.whole), a["failed"], 0)
        b.ret(self.interval)
        b.position_at_end(next_block)
        following = b.add(self.interval, ir.Constant(I64, 1))
        self.interval.add_incoming(following, next_block)
        b.cbranch(b.icmp_signed("<", following, a["stop"]), interval_block, done_block)
        b.position_at_end(done_block)
        b.ret(a["stop"])

    def _furthest_behind(self) -> tuple[ir.Value, ir.Value]:
        """The place and level of the lane that is furthest behind (of several the first)."""
        b, v = self.b, self.v
        places, levels = b.load(self.place), v.load(self.a["level"], 0)
        now, level = v.lane(places, 0), v.lane(levels, 0)
        for index in range(1, v.width):
            place = v.lane(places, index)
            behind = b.icmp_signed("<", place, now)
            now, level = b.select(behind, place, now), b.select(behind, v.lane(levels, index), level)
        return now, level

    def _step(self, power: Row, turn_block: ir.Block) -> None:
        """Try one step for every lane at ``now`` and ``level_now``; then back to ``turn_block``."""
        b, v, a = self.b, self.v, self.a
        n, K, m = self.sizes
        level, now = self.level_now, self.now
        levels, places = v.load(a["level"], 0), b.load(self.place)
        mask = b.and_(b.icmp_signed("==", places, v.spread(now)), b.icmp_signed("==", levels, v.spread(level)))
        offset = b.mul(level, ir.Constant(I64, self.shape.leveled_slots * v.width))
        self.coefficients = b.gep(a["leveled"], [offset])
        span = b.shl(ir.Constant(I64, 1), b.sub(a["last"], level))
        after = b.add(now, span)
        part = b.fmul(b.uitofp(span, F64), self.to_fraction)
        h = b.fmul(a["base_step"], part)
        t0, t1 = (v.spread(b.fmul(b.uitofp(place, F64), self.to_fraction)) for place in (now, after))
        u0, u1, du0, du1 = self._value(power, t0), self._value(power, t1), *(self._slope(power, t) for t in (t0, t1))
        per_base, h_all, part_all = v.spread(self.per_base), v.spread(h), v.spread(part)
        z = [v.load(a["state"], k) for k in range(n + K + m)]
        z_slope = [v.load(a["state"], n + K + m + k) for k in range(n + K + m)]
        bend = [v.load(a["state"], 2 * (n + K + m) + k) for k in range(K)]

        history = [*z, u0, u1, b.fmul(du0, part_all), b.fmul(du1, part_all), v.number(1.0)]
        target = self.times("H", history)
        lead = [v.multiply_add(h_all, v.multiply_add(h_all, bend[k], z_slope[n + k]), z[n + k]) for k in range(K)]
        c, j, g, jacobian, settled, iterations = self._newton(target[:K], lead, mask)
        s1 = [*c, *j]
        z1 = [*self.times("Q", s1, target[K:]), *s1]
        rest = self.factor(self.jacobian("Y0", "N0", g), guarded=True)
        u1_slope = b.fmul(du1, per_base)
        z1_slope = self.slopes(z1, u1, u1_slope, g, rest)
        within: Any = None
        small: Any = v.flags(True)
        if self.shape.controlled:
            change = [self.subtract(z_slope[k], z1_slope[k]) for k in range(n + K + m)]
            change.append(b.fmul(b.fsub(du0, du1), per_base))
            error, e_s = self.closed(self.times("error_map", change), g, jacobian)
            within, small = self._judged(error, e_s)
            correction, e_s = self.closed(self.times("smoothing", error), g, jacobian)
            better = [self.add(value, less) for value, less in zip(z1, [*correction, *e_s], strict=True)]
            better_slope = self.slopes(better, u1, u1_slope, g, rest)
            z1 = [b.select(within, self.full(x), self.full(y)) for x, y in zip(better, z1, strict=True)]
            z1_slope = [
                b.select(within, self.full(x), self.full(y)) for x, y in zip(better_slope, z1_slope, strict=True)
            ]
        z1, z1_slope = [self.full(x) for x in z1], [self.full(x) for x in z1_slope]

        # which lanes have made the step, which must try a shorter one, which are given up
        at_finest = v.spread(b.icmp_signed(">=", level, a["finest"]), v.flag)
        good = settled if within is None else b.and_(settled, b.or_(within, at_finest))
        accepted = b.and_(mask, good)
        given_up = b.and_(b.and_(mask, b.not_(settled)), at_finest)
        shorter = b.and_(mask, b.not_(b.or_(accepted, given_up)))
        self._write_output(accepted, z, z_slope, z1, z1_slope, (u0, u1, du0, du1), now, span, h_all)
        half_per_step = b.fdiv(v.number(0.5), h_all)
        for k in range(n + K + m):
            v.store(b.select(accepted, z1[k], z[k]), a["state"], k)
            v.store(b.select(accepted, z1_slope[k], z_slope[k]), a["state"], n + K + m + k)
        for k in range(K):
            new = b.fmul(b.fsub(z1_slope[n + k], z_slope[n + k]), half_per_step)
            v.store(b.select(accepted, new, bend[k]), a["state"], 2 * (n + K + m) + k)
        moved = b.select(accepted, v.spread(after), b.load(self.place))
        b.store(b.select(given_up, v.spread(self.whole), moved), self.place)
        b.store(b.or_(b.load(self.flagged), given_up), self.flagged)

        new_levels = b.select(shorter, b.add(levels, v.integer(1)), levels)
        twice = b.sub(b.shl(span, ir.Constant(I64, 1)), ir.Constant(I64, 1))
        on_grid = b.icmp_signed("==", b.and_(after, twice), ir.Constant(I64, 0))
        may = v.spread(b.and_(on_grid, b.icmp_signed(">", level, a["coarsest"])), v.flag)
        longer = b.and_(b.and_(accepted, small), may)
        new_levels = b.select(longer, b.sub(levels, v.integer(1)), new_levels)
        v.store(new_levels, a["level"], 0)
        capped = None if within is None else b.and_(accepted, b.not_(within))
        self._count(((0, accepted), (3, capped), (4, shorter)), b.select(mask, iterations, v.integer(0)))
        b.branch(turn_block)

    def _value(self, power: Row, t: ir.Value) -> ir.Value:
        total = power[5]
        for k in range(4, -1, -1):
            total = self.v.multiply_add(total, t, power[k])
        return total

    def _slope(self, power: Row, t: ir.Value) -> ir.Value:
        total = self.b.fmul(power[5], self.v.number(5.0))
        for k in range(4, 0, -1):
            total = self.v.multiply_add(total, t, self.b.fmul(power[k], self.v.number(float(k))))
        return total

    def _count(self, flags: Sequence[tuple[int, Any]], iterations: ir.Value) -> None:
        b, v, counts = self.b, self.v, self.a["counts"]
        for place, flag in flags:
            if flag is not None:
                v.store(b.add(v.load(counts, place), b.zext(flag, v.whole)), counts, place)
        v.store(b.add(v.load(counts, 1), iterations), counts, 1)

    def _judged(self, error: Row, e_s: Row) -> tuple[ir.Value, ir.Value]:
        """Whether every error, of the states and of the output, is within the tolerance, and whether it is small."""
        b, v = self.b, self.v
        n = self.shape.n
        tolerance = v.spread(self.a["tolerance"])
        limit = b.fmul(tolerance, v.number(_SMALL))
        sizes = [b.fmul(error[row], self.fixed("weights", 0, row)) for row in range(n) if error[row] is not None]
        output = self.times("out_z", [*error, *e_s])[0]
        sizes += [] if output is None else [output]
        within = small = None
        for size in sizes:
            size = v.magnitude(size)
            one, other = b.fcmp_ordered("<=", size, tolerance), b.fcmp_ordered("<", size, limit)
            within, small = (one, other) if within is None else (b.and_(within, one), b.and_(small, other))
        true = v.flags(True)
        return (true, true) if within is None else (within, small)

    def _newton(self, right: Row, start: Row, mask: ir.Value) -> tuple[Row, Row, list[Row], Factors, Any, Any]:
        """The root; a lane that has settled keeps the controls its last step was taken from, so that its currents and
        factors come out again the same while others go on. Returns c, j, g, factors, settled lanes, iterations."""
        b, v = self.b, self.v
        K = self.shape.K
        true = v.flags(True)
        if K == 0:
            return [], [], [], Factors([], [], []), true, v.integer(0)
        before = b.block
        loop = self.function.append_basic_block("newton")
        again = self.function.append_basic_block("newton_again")
        leap = self.function.append_basic_block("newton_leap")
        onward = self.function.append_basic_block("newton_onward")
        solved = self.function.append_basic_block("newton_end")
        b.branch(loop)

        b.position_at_end(loop)
        c = [b.phi(v.real) for _ in range(K)]
        count, iterations, open_lanes = b.phi(I64), b.phi(v.whole), b.phi(v.flag)
        for k in range(K):
            c[k].add_incoming(start[k], before)
        count.add_incoming(ir.Constant(I64, 1), before)
        iterations.add_incoming(v.integer(0), before)
        open_lanes.add_incoming(mask, before)
        j, g = self.evaluate(list(c))
        residual: Row = []
        for row in range(K):
            total = right[row]
            for name, values in (("Y", c), ("N", j)):
                for column, value in enumerate(values):
                    entry = self.entry(name, row, column)
                    if entry is not None:
                        total = self.add_product(total, b.fneg(entry), value)
            residual.append(total)
        factors = self.factor(self.jacobian("Y", "N", g), guarded=False)
        step = [self.full(x) for x in self.solve(factors, residual)]
        scales = [self.fixed("scales", 0, k) for k in range(K)]
        settled = true
        for k in range(K):
            limit = b.fmul(scales[k], v.number(NEWTON_TOLERANCE))
            settled = b.and_(settled, b.fcmp_ordered("<", v.magnitude(step[k]), limit))
        iterations_now = b.add(iterations, b.zext(open_lanes, v.whole))
        still_open = b.and_(open_lanes, b.not_(settled))
        more = b.and_(v.any(still_open), b.icmp_signed("<", count, ir.Constant(I64, PLAIN_ITERATIONS)))
        b.cbranch(more, again, solved)

        b.position_at_end(again)
        ahead = [b.fadd(c[k], step[k]) for k in range(K)]
        far_up, far_down, anywhere = [], [], None
        for k in range(K):
            twice = b.fmul(scales[k], v.number(2.0))
            up = b.and_(v.greater(step[k], twice), v.greater(ahead[k], self.fixed("high", 0, k)))
            down = b.and_(v.greater(b.fneg(step[k]), twice), b.fcmp_ordered("<", ahead[k], self.fixed("low", 0, k)))
            far_up.append(up)
            far_down.append(down)
            either = b.or_(up, down)
            anywhere = either if anywhere is None else b.or_(anywhere, either)
        b.cbranch(v.any(b.and_(anywhere, still_open)), leap, onward)

        b.position_at_end(leap)
        shortened = []
        for k in range(K):
            from_high, from_low = v.most(c[k], self.fixed("high", 0, k)), v.least(c[k], self.fixed("low", 0, k))
            above = v.call("log", b.fadd(v.number(1.0), b.fdiv(b.fsub(ahead[k], from_high), scales[k])))
            below = v.call("log", b.fadd(v.number(1.0), b.fdiv(b.fsub(from_low, ahead[k]), scales[k])))
            value = b.select(far_up[k], v.multiply_add(scales[k], above, from_high), ahead[k])
            value = b.select(far_down[k], b.fsub(from_low, b.fmul(scales[k], below)), value)
            shortened.append(value)
        leap_end = b.block
        b.branch(onward)

        b.position_at_end(onward)
        for k in range(K):
            chosen = b.phi(v.real)
            chosen.add_incoming(ahead[k], again)
            chosen.add_incoming(shortened[k], leap_end)
            ahead[k] = chosen
        for k in range(K):
            c[k].add_incoming(b.select(still_open, ahead[k], c[k]), onward)
        count.add_incoming(b.add(count, ir.Constant(I64, 1)), onward)
        iterations.add_incoming(iterations_now, onward)
        open_lanes.add_incoming(still_open, onward)
        b.branch(loop)

        b.position_at_end(solved)
        carried = self.with_currents(list(step), g)
        c_end = [b.fadd(c[k], step[k]) for k in range(K)]
        j_end = [self.add(j[row], carried[K + row]) for row in range(len(j))]
        return c_end, j_end, g, factors, settled, iterations_now

    def _write_output(
        self,
        accepted: ir.Value,
        z: Row,
        z_slope: Row,
        z1: Row,
        z1_slope: Row,
        take: tuple[ir.Value, ir.Value, ir.Value, ir.Value],
        now: ir.Value,
        span: ir.Value,
        h: ir.Value,
    ) -> None:
        """The output's mean over each dense cell, of the cubic through values and slopes at the ends of the step."""
        b, v = self.b, self.v
        u0, u1, du0, du1 = take
        one = ir.Constant(I64, 1)
        first = b.add(b.lshr(now, self.dense_shift), one)
        final = b.lshr(b.add(now, span), self.dense_shift)
        gain, rest = self.fixed("out_U", 0, 0), self.fixed("out_U", 0, 1)
        y0 = self.full(self.times("out_z", z, [self.add_product(rest, gain, u0)])[0])
        y1 = self.full(self.times("out_z", z1, [self.add_product(rest, gain, u1)])[0])
        per_base = v.spread(self.per_base)
        d0 = self.times("out_z", z_slope, [self.add_product(None, gain, b.fmul(du0, per_base))])[0]
        d1 = self.times("out_z", z1_slope, [self.add_product(None, gain, b.fmul(du1, per_base))])[0]
        d0, d1 = b.fmul(self.full(d0), h), b.fmul(self.full(d1), h)
        rise = b.fsub(y1, y0)
        both = b.fadd(d0, d1)
        cubic = b.fsub(v.multiply_add(rise, v.number(3.0), b.fneg(d0)), both)
        quartic = v.multiply_add(rise, v.number(-2.0), both)
        powers = [
            y0,
            b.fmul(d0, v.number(0.5)),
            b.fmul(cubic, v.number(1.0 / 3.0)),
            b.fmul(quartic, v.number(0.25)),
        ]

        def area_to(theta: ir.Value) -> ir.Value:
            total = powers[3]
            for k in (2, 1, 0):
                total = v.multiply_add(total, theta, powers[k])
            return b.fmul(total, theta)

        cell = b.shl(one, self.dense_shift)
        cells = v.spread(b.fdiv(b.uitofp(span, F64), b.uitofp(cell, F64)))
        inverse = b.fdiv(ir.Constant(F64, 1.0), b.uitofp(span, F64))
        row = b.sub(b.mul(self.interval, ir.Constant(I64, DENSE)), one)
        area = b.load(self.area)
        before = b.block
        loop = self.function.append_basic_block("cell")
        done = self.function.append_basic_block("cells_end")
        b.cbranch(b.icmp_signed("<=", first, final), loop, done)

        b.position_at_end(loop)
        point, begun, left = b.phi(I64), b.phi(v.real), b.phi(v.real)
        theta = v.spread(b.fmul(b.uitofp(b.sub(b.shl(point, self.dense_shift), now), F64), inverse))
        here = area_to(theta)
        value = v.multiply_add(cells, b.fsub(here, begun), left)
        place = b.add(row, point)
        v.store(b.select(accepted, value, v.load(self.a["out"], place)), self.a["out"], place)
        following = b.add(point, one)
        for phi, start, again in (
            (point, first, following),
            (begun, v.number(0.0), here),
            (left, area, v.number(0.0)),
        ):
            phi.add_incoming(start, before)
            phi.add_incoming(again, loop)
        b.cbranch(b.icmp_signed("<=", following, final), loop, done)

        b.position_at_end(done)
        begun_end, left_end = b.phi(v.real), b.phi(v.real)
        for phi, start, again in ((begun_end, v.number(0.0), here), (left_end, area, v.number(0.0))):
            phi.add_incoming(start, before)
            phi.add_incoming(again, loop)
        rest_of_step = v.multiply_add(cells, b.fsub(area_to(v.number(1.0)), begun_end), left_end)
        b.store(b.select(accepted, rest_of_step, area), self.area)
