"""Compiled functions: numba loaded late, its cache put where the user may write, one explicit signature each.

numba keys its cache by the text of one file only, trusts what it finds there, and fails at import time where neither
the package nor the home folder may be written. So the cache folder is chosen here before numba is first imported:
it is named after the package's version and the text of every file that compiled code is made from, and each file in
it lies beside its digest: what does not match is compiled anew.
"""

from __future__ import annotations

import contextlib
import hashlib
import os
import sys
import tempfile
import time
from collections.abc import Callable
from functools import cache
from pathlib import Path
from typing import Any

from tackbench import __version__

_STATE = {"seconds": 0.0}
_REGISTERED: set[Callable[..., Any]] = set()


def user_cache_folder() -> Path:
    """The folder for what may be made again: the platform's per-user cache folder, under ``tackbench``."""
    chosen = os.environ.get("TACKBENCH_CACHE")
    if chosen:
        return Path(chosen)
    if sys.platform == "win32":
        base = Path(os.environ.get("LOCALAPPDATA") or Path.home() / "AppData" / "Local")
    elif sys.platform == "darwin":
        base = Path.home() / "Library" / "Caches"
    else:
        base = Path(os.environ.get("XDG_CACHE_HOME") or Path.home() / ".cache")
    return base / "tackbench"


def _source_hash() -> str:
    """A hash over every source file that compiled code is made from, so that it does not outlive its text."""
    digest = hashlib.sha256()
    root = Path(__file__).parent
    for path in sorted(root.rglob("*.py")):
        text = path.read_bytes()
        if b"njit_cached" in text or path.parent.name in ("devices", "kernel"):  # what goes into it from elsewhere
            digest.update(path.relative_to(root).as_posix().encode())
            digest.update(text)
    return digest.hexdigest()[:16]


def _may_write(folder: Path) -> bool:
    try:
        folder.mkdir(parents=True, exist_ok=True)
        with tempfile.TemporaryFile(dir=folder):
            return True
    except OSError:
        return False


@cache
def compiled_code_folder() -> Path:
    """Where compiled code of exactly this source is kept; a temporary folder when no lasting one may be written."""
    folder = user_cache_folder() / "compiled" / f"{__version__}-{_source_hash()}"
    if not _may_write(folder):
        folder = Path(tempfile.mkdtemp(prefix="tackbench-compiled-"))
    os.environ["NUMBA_CACHE_DIR"] = str(folder)
    if "numba" in sys.modules:  # somebody imported it before us: tell it directly
        sys.modules["numba"].config.CACHE_DIR = str(folder)
    return folder


def kernels_are_cached() -> bool:
    """True when compiled code is already there, so that a first use will not have to compile."""
    return any(compiled_code_folder().rglob("*.nbc"))


def _digest_of(path: Path) -> str:
    return hashlib.sha256(path.read_bytes()).hexdigest()


def _digest_file(path: Path) -> Path:
    return path.with_name(path.name + ".sha256")


@cache
def _drop_what_cannot_be_trusted(folder: Path) -> None:
    """Remove cached files that are not what was written (an index or code without its digest, or another's).

    numba would run or unpickle whatever it finds; what is missing it compiles anew. Once a process is enough: what
    this process writes later it has just compiled.
    """
    for path in folder.rglob("*.nb[ic]"):
        with contextlib.suppress(OSError):  # another process may be clearing up too
            beside = _digest_file(path)
            if not beside.is_file() or beside.read_text() != _digest_of(path):
                path.unlink(missing_ok=True)


def _write_digests(folder: Path) -> None:
    for path in folder.rglob("*.nb[ic]"):
        with contextlib.suppress(OSError):  # without its digest the file is only compiled again
            beside, digest = _digest_file(path), _digest_of(path)
            if not beside.is_file() or beside.read_text() != digest:
                unfinished = beside.with_name(f"{beside.name}.{os.getpid()}")
                unfinished.write_text(digest)
                unfinished.replace(beside)


def seconds_spent_compiling() -> float:
    """Seconds that this process has spent on getting compiled functions ready so far."""
    return _STATE["seconds"]


def njit_cached(
    signature: str,
    inner: tuple[Callable[..., Any], ...] = (),
    called: tuple[Callable[..., Any], ...] = (),
    **options: Any,
) -> Callable[[Callable[..., Any]], Any]:
    """Decorate a function to be compiled on its first call with exactly this signature, cached, without the GIL.

    ``inner`` and ``called`` list the plain functions that it uses: the former are compiled into their callers,
    which spares passing many arrays at each call; the latter stay functions, for what is large or seldom used. No
    fast-math: the same samples come out whatever the block size or thread.
    """

    def decorate(function: Callable[..., Any]) -> Any:
        return _LateFunction(function, signature, inner, called, options)

    return decorate


def borrowed(arrays: tuple[Any, ...]) -> tuple[Any, ...]:
    """The same arrays, seen by compiled code without counting who holds them; as they are in plain Python.

    numba counts the holders of every array at every call of an inner function, by locked instructions that cost more
    than the sums inside. Borrowed arrays are not counted; the caller of the compiled function keeps them alive.
    """
    return arrays


@cache
def _teach_numba_to_borrow() -> None:
    from llvmlite import ir
    from numba.core.imputils import impl_ret_borrowed
    from numba.extending import intrinsic, overload
    from numba.np.arrayobj import make_array

    @intrinsic
    def uncounted(_context: Any, arrays: Any) -> Any:
        def code(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:
            views = []
            for place, kind in enumerate(arrays.types):
                view = make_array(kind)(context, builder, value=builder.extract_value(arguments[0], place))
                view.meminfo = ir.Constant(view.meminfo.type, None)
                view.parent = ir.Constant(view.parent.type, None)
                views.append(view._getvalue())
            tuple_of_views = context.make_tuple(builder, signature.return_type, views)
            return impl_ret_borrowed(context, builder, signature.return_type, tuple_of_views)

        return arrays(arrays), code

    @overload(borrowed)
    def _(arrays: Any) -> Any:
        def views(arrays: Any) -> Any:
            return uncounted(arrays)  # type: ignore[call-arg]

        return views


class _LateFunction:
    """A function that is compiled when it is first called."""

    def __init__(
        self,
        function: Callable[..., Any],
        signature: str,
        inner: tuple[Callable[..., Any], ...],
        called: tuple[Callable[..., Any], ...],
        options: dict[str, Any],
    ) -> None:
        self.plain, self._signature = function, signature
        self._inner, self._called, self._options = inner, called, options
        self._compiled: Callable[..., Any] | None = None
        self.__doc__, self.__name__ = function.__doc__, function.__name__

    def ready(self) -> Callable[..., Any]:
        """The compiled function, compiled or loaded from the cache now if it has not been."""
        if self._compiled is None:
            began = time.perf_counter()
            self._compiled = self._compile()
            _STATE["seconds"] += time.perf_counter() - began
        return self._compiled

    def _compile(self) -> Callable[..., Any]:
        folder = compiled_code_folder()
        import numba
        from numba.extending import register_jitable

        _teach_numba_to_borrow()
        for function in (*self._inner, *self._called):
            if function not in _REGISTERED:
                register_jitable(forceinline=function not in self._called)(function)
                _REGISTERED.add(function)
        options: dict[str, Any] = {"cache": True, "nogil": True, "no_cfunc_wrapper": True, **self._options}
        _drop_what_cannot_be_trusted(folder)
        compiled: Callable[..., Any] = numba.njit(self._signature, **options)(self.plain)
        _write_digests(folder)
        return compiled

    def __call__(self, *arguments: Any) -> Any:
        return self.ready()(*arguments)
