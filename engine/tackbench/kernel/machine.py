"""Machine code for generated kernels: compiled by LLVM for this processor, kept on disk under a digest."""

from __future__ import annotations

import contextlib
import ctypes
import hashlib
import os
import threading
import time
from collections.abc import Callable
from functools import cache
from pathlib import Path
from typing import Any

from tackbench.compiled import compiled_code_folder
from tackbench.kernel.shape import Shape

_LOCK = threading.Lock()
_KERNELS: dict[Shape, Kernel] = {}
_SECONDS = {"compiling": 0.0}


class Kernel:
    """A compiled kernel; calling it releases the interpreter's lock. See ``emitter.emit`` for its arguments."""

    def __init__(self, code: bytes) -> None:
        import llvmlite.binding as llvm

        from tackbench.kernel.emitter import ENTRY

        self._engine = llvm.create_mcjit_compiler(llvm.parse_assembly(""), _target_machine())
        self._engine.add_object_file(llvm.ObjectFileRef.from_data(code))
        self._engine.finalize_object()
        pointer, whole, real = ctypes.c_void_p, ctypes.c_int64, ctypes.c_double
        kinds: list[Any] = [pointer] * 9 + [whole, whole, real, whole, whole, whole, real]
        self.call: Callable[..., int] = ctypes.CFUNCTYPE(whole, *kinds)(self._engine.get_function_address(ENTRY))


def kernel_for(shape: Shape) -> Kernel:
    """The kernel of a shape: from this process, from the disk, or compiled now."""
    with _LOCK:
        if shape not in _KERNELS:
            path = _path(shape)
            code = _trusted(path)
            if code is None:
                began = time.perf_counter()
                code = _compiled(shape)
                _keep(path, code)
                _SECONDS["compiling"] += time.perf_counter() - began
            _KERNELS[shape] = Kernel(code)
        return _KERNELS[shape]


def _compiled(shape: Shape) -> bytes:
    import llvmlite.binding as llvm

    from tackbench.kernel.emitter import emit

    machine = _target_machine()
    module = llvm.parse_assembly(emit(shape, _has_fused_multiply_add()))
    module.triple, module.data_layout = machine.triple, str(machine.target_data)
    module.verify()
    options = llvm.create_pipeline_tuning_options(speed_level=2)
    builder = llvm.create_pass_builder(machine, options)
    builder.getModulePassManager().run(module, builder)
    code: bytes = machine.emit_object(module)
    return code


def _target_machine() -> Any:
    """This processor as a target; a new one each time, for an engine owns the one that it is given."""
    import llvmlite.binding as llvm

    llvm.initialize_native_target()
    llvm.initialize_native_asmprinter()
    target = llvm.Target.from_default_triple()
    features = llvm.get_host_cpu_features().flatten()
    return target.create_target_machine(cpu=llvm.get_host_cpu_name(), features=features, opt=2, jit=True)


@cache
def _has_fused_multiply_add() -> bool:
    import llvmlite.binding as llvm

    return bool(llvm.get_host_cpu_features().get("fma")) or llvm.get_process_triple().startswith(("aarch64", "arm64"))


@cache
def _circumstances() -> bytes:
    """What machine code depends on beside the shape: the text it is written by, LLVM, and the processor."""
    import llvmlite
    import llvmlite.binding as llvm

    digest = hashlib.sha256()
    root = Path(__file__).parents[1]
    for path in sorted([*(root / "kernel").glob("*.py"), *(root / "devices").glob("*.py")]):
        digest.update(path.read_bytes())
    for text in (llvmlite.__version__, llvm.get_host_cpu_name(), llvm.get_host_cpu_features().flatten()):
        digest.update(text.encode())
    return digest.digest()


def _path(shape: Shape) -> Path:
    name = hashlib.sha256(_circumstances() + repr(shape).encode()).hexdigest()[:32]
    return compiled_code_folder() / "shapes" / f"{name}.o"


def _trusted(path: Path) -> bytes | None:
    """The code in ``path`` when its digest, the first 32 bytes, is right."""
    try:
        content = path.read_bytes()
    except OSError:
        return None
    digest, code = content[:32], content[32:]
    return code if code and hashlib.sha256(code).digest() == digest else None


def _keep(path: Path, code: bytes) -> None:
    with contextlib.suppress(OSError):  # code that cannot be kept is compiled again next time
        path.parent.mkdir(parents=True, exist_ok=True)
        unfinished = path.with_name(f"{path.name}.{os.getpid()}.{threading.get_ident()}")
        unfinished.write_bytes(hashlib.sha256(code).digest() + code)
        unfinished.replace(path)


def seconds_spent_compiling_shapes() -> float:
    """Seconds that this process has spent compiling kernels that were not on the disk."""
    return _SECONDS["compiling"]
