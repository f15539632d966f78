"""The generated kernel against the plain one, and its lanes against each other."""

from __future__ import annotations

import ctypes
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import llvmlite.binding as llvm
import mpmath
import numpy as np
import pytest
from llvmlite import ir
from numpy.testing import assert_array_equal

from tackbench import load_stage
from tackbench.circuit import Circuit
from tackbench.kernel import lanes, machine
from tackbench.kernel.vector import F64, Lanes
from tackbench.render.prepared import Quality, prepare, prepare_with
from tackbench.render.stream import GroupStream
from tackbench.stage import shipped_stages

RATE = 48000


def circuit(name: str, **choices: object) -> Circuit:
    return load_stage(name).variant(**choices).circuit


def guitar(frames: int, peak: float = 0.4) -> np.ndarray:
    t = np.arange(frames) / RATE
    volts = sum(np.sin(2 * np.pi * f * t) * np.exp(-9 * t) for f in (82.4, 123.5, 164.8, 329.6))
    return np.asarray(peak / 4 * volts)[:, None]


def through(circuits: list[Circuit], volts: np.ndarray, quality: str) -> list[np.ndarray]:
    stream = GroupStream([prepare(one, RATE, quality) for one in circuits], volts.shape[1])
    return [np.concatenate(parts) for parts in zip(stream.process(volts), stream.finish(), strict=True)]


def by_plain_kernel(one: Circuit, volts: np.ndarray, quality: str, monkeypatch: pytest.MonkeyPatch) -> np.ndarray:
    with monkeypatch.context() as patch:
        patch.setenv("TACKBENCH_KERNEL", "plain")
        return through([one], volts, quality)[0]


def decibels(error: np.ndarray, signal: np.ndarray) -> float:
    return float(20 * np.log10((np.std(error) + 1e-30) / np.std(signal)))


@pytest.mark.parametrize("quality", ["draft", "standard", "best"])
@pytest.mark.parametrize("name", shipped_stages())
def test_the_generated_kernel_is_the_plain_one(name: str, quality: str, monkeypatch: pytest.MonkeyPatch) -> None:
    one, volts = circuit(name), guitar(900)
    plain = by_plain_kernel(one, volts, quality, monkeypatch)
    limit = -140 if quality == "draft" else -200  # where draft reaches its shortest step, rounding shows
    assert decibels(through([one], volts, quality)[0] - plain, plain) < limit


def test_hard_steps_are_left_to_the_plain_kernel(monkeypatch: pytest.MonkeyPatch) -> None:
    """A kilovolt square into a two-transistor fuzz in steps that may not be shortened: many need the homotopy.

    The crossed intervals agree; elsewhere the bare trapezoid rings, and rounding turns into noise.
    """
    stage = prepare_with(circuit("fuzz-silicon"), RATE, Quality("trapezoid", 1, 1, np.inf))
    volts = 1000 * np.sign(np.sin(2 * np.pi * 333 * np.arange(480) / RATE))[:, None]
    results = []
    for kernel in ("", "plain"):
        monkeypatch.setenv("TACKBENCH_KERNEL", kernel)
        stream = GroupStream([stage], 1)
        results.append(np.concatenate([stream.process(volts)[0], stream.finish()[0]]))
        assert stream.counts[0].hard_steps > 1000
        assert np.all(np.isfinite(results[-1]))
    assert decibels(results[0] - results[1], results[1]) < -60


@pytest.mark.parametrize("quality", ["draft", "standard"])
def test_no_lane_depends_on_its_company(quality: str) -> None:
    """Quiet and overdriven, easy and hard, in blocks of one, two, three and four lanes: the same bits."""
    choices = [{"gain": 0.1}, {"clip": "silicon"}, {"supply": 24.0, "gain": 1.0}, {"C5": "22n"}, {"level": 0.2}]
    circuits = [circuit("two-voice", **choice) for choice in choices]
    volts = guitar(600, 2.0)
    alone = [through([one], volts, quality)[0] for one in circuits]
    for count in (2, 3, 5):
        for together, single in zip(through(circuits[:count], volts, quality), alone, strict=False):
            assert_array_equal(together, single)
    for together, single in zip(through(circuits[::-1], volts, quality), alone[::-1], strict=True):
        assert_array_equal(together, single)


@pytest.mark.parametrize("name", shipped_stages())
def test_every_stage_is_the_same_alone_and_in_lanes(name: str) -> None:
    circuits = [circuit(name, temperature=celsius) for celsius in (10.0, 25.0, 40.0)]
    volts = guitar(300, 1.0)
    for one, together in zip(circuits, through(circuits, volts, "standard"), strict=True):
        assert_array_equal(together, through([one], volts, "standard")[0])


def test_hard_lanes_do_not_disturb_the_others() -> None:
    volts = 300 * np.sign(np.sin(2 * np.pi * 500 * np.arange(300) / RATE))[:, None]
    circuits = [circuit("fuzz-silicon", **choice) for choice in ({}, {"supply": 18.0}, {"temperature": 50.0})]
    together = through(circuits, volts, "standard")
    for one, got in zip(circuits, together, strict=True):
        assert_array_equal(got, through([one], volts, "standard")[0])


def test_shapes_that_differ_go_in_blocks_of_their_own() -> None:
    circuits = [circuit("two-voice", clip=clip) for clip in ("germanium", "off", "silicon")]
    stream = GroupStream([prepare(one, RATE, "standard") for one in circuits], 2)
    assert sorted(len(members) for members, _ in stream._blocks) == [2, 4]


def test_a_shape_that_is_too_large_takes_the_plain_kernel(monkeypatch: pytest.MonkeyPatch) -> None:
    one, volts = circuit("two-voice"), guitar(200)
    plain = by_plain_kernel(one, volts, "standard", monkeypatch)
    monkeypatch.setattr(lanes, "MOST_ENTRIES", 10)
    assert_array_equal(through([one], volts, "standard")[0], plain)


def test_where_nothing_can_be_compiled_the_plain_kernel_serves(monkeypatch: pytest.MonkeyPatch) -> None:
    def refuses(shape: object) -> bytes:
        raise RuntimeError("no such target")

    one, volts = circuit("two-voice", gain=0.31), guitar(200)
    plain = by_plain_kernel(one, volts, "standard", monkeypatch)
    monkeypatch.setattr(machine, "_compiled", refuses)
    monkeypatch.setattr(machine, "_trusted", lambda path: None)
    monkeypatch.setattr(machine, "_KERNELS", {})
    assert_array_equal(through([one], volts, "standard")[0], plain)


def test_the_exact_rule_runs_in_lanes_too(monkeypatch: pytest.MonkeyPatch) -> None:
    stage, volts = prepare_with(circuit("two-voice"), RATE, Quality("exact", 0, 8, 1e-5)), guitar(600)
    stream = GroupStream([stage], 1)
    got = np.concatenate([stream.process(volts)[0], stream.finish()[0]])
    plain = by_plain_kernel(circuit("two-voice"), volts, "best", monkeypatch)
    assert decibels(got - plain, plain) < -100


def test_machine_code_is_kept_and_not_trusted_when_damaged(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(machine, "compiled_code_folder", lambda: tmp_path)
    monkeypatch.setattr(machine, "_KERNELS", {})
    made: list[int] = []
    compiled = machine._compiled
    monkeypatch.setattr(machine, "_compiled", lambda shape: made.append(1) or compiled(shape))
    one, volts = circuit("jfet-booster"), guitar(100)
    first = through([one], volts, "draft")[0]
    (kept,) = tmp_path.rglob("*.o")
    machine._KERNELS.clear()
    assert_array_equal(through([one], volts, "draft")[0], first)
    assert len(made) == 1
    content = bytearray(kept.read_bytes())
    content[len(content) // 2] ^= 1
    for damaged in (bytes(content), b"", content[:40]):
        kept.write_bytes(damaged)
        machine._KERNELS.clear()
        assert_array_equal(through([one], volts, "draft")[0], first)
    assert len(made) == 4


def test_a_folder_that_cannot_be_written_only_costs_time(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    blocked = tmp_path / "file"
    blocked.write_text("")
    monkeypatch.setattr(machine, "compiled_code_folder", lambda: blocked)
    monkeypatch.setattr(machine, "_KERNELS", {})
    assert np.all(np.isfinite(through([circuit("jfet-booster")], guitar(50), "draft")[0]))


# ---------------------------------------------------------------- the elementary functions


def lane_function(width: int, fused: bool, build: Callable[[Lanes, ir.Value], ir.Value]) -> Callable[..., np.ndarray]:
    """Compile ``build`` into a function over arrays."""
    module = ir.Module()
    kind = ir.FunctionType(ir.VoidType(), [F64.as_pointer(), F64.as_pointer()])
    function = ir.Function(module, kind, "f")
    builder = ir.IRBuilder(function.append_basic_block())
    v = Lanes(builder, width, fused)
    v.store(build(v, v.load(function.args[0], 0)), function.args[1], 0)
    builder.ret_void()
    engine = llvm.create_mcjit_compiler(llvm.parse_assembly(str(module)), machine._target_machine())
    engine.finalize_object()
    call = ctypes.CFUNCTYPE(None, ctypes.c_void_p, ctypes.c_void_p)(engine.get_function_address("f"))

    def over(x: np.ndarray) -> np.ndarray:
        assert engine  # keeps the code alive
        result = np.empty_like(x)
        for start in range(0, len(x), width):
            piece, out = x[start : start + width].copy(), np.empty(width)
            call(piece.ctypes.data, out.ctypes.data)
            result[start : start + width] = out
        return result

    return over


POINTS = np.concatenate(
    [np.linspace(-40.0, 60.0, 400), np.geomspace(1e-18, 1.0, 100), -np.geomspace(1e-18, 700.0, 99), [0.0]]
)


@pytest.mark.parametrize("fused", [False, machine._has_fused_multiply_add()])
def test_exp_within_two_units_in_the_last_place(fused: bool) -> None:
    got = [lane_function(width, fused, lambda v, x: v.exp(x))(POINTS) for width in (1, 2, 4)]
    assert_array_equal(got[1], got[0])
    assert_array_equal(got[2], got[0])
    with mpmath.workdps(40):
        error = [
            abs(mpmath.exp(float(x)) - float(y)) / mpmath.exp(float(x)) for x, y in zip(POINTS, got[0], strict=True)
        ]
    assert float(max(error)) < 2 * 2.0**-52


def test_tanh_to_the_last_bit_of_one() -> None:
    got = lane_function(4, machine._has_fused_multiply_add(), lambda v, x: v.tanh(x))(POINTS)
    assert np.max(np.abs(got - np.tanh(POINTS))) < 4 * 2.0**-53


def test_what_is_out_of_range_stays_finite() -> None:
    far = np.array([-1e300, -710.0, 1e300, np.inf, -np.inf, 0.0, 708.0, -708.0])
    got = lane_function(4, True, lambda v, x: v.exp(x))(far)
    assert np.all(got >= 0.0)
    assert got[5] == 1.0
    assert np.all(got[[0, 1, 4]] < 1e-300)


def test_a_tolerance_of_its_own_makes_a_family_of_its_own() -> None:
    stage = prepare(circuit("two-voice"), RATE, "standard")
    other = replace(stage, problem=replace(stage.problem, tolerance=1e-6))
    assert len(GroupStream([stage, other], 1)._blocks) == 2
