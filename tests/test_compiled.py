"""The cache of compiled code: made where it may be written, not trusted when damaged, not used past its text."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import pytest

from tackbench import compiled

MEASURE = """
import numpy as np
from tackbench.compiled import compiled_code_folder, kernels_are_cached
before = kernels_are_cached()
from tackbench.audio.resample import Upsampler
print(before, float(np.sum(Upsampler(8).push(np.ones(500)))), compiled_code_folder())
"""


def run(cache: Path) -> list[str]:
    environment = {**os.environ, "TACKBENCH_CACHE": str(cache), "PYTHONWARNINGS": "error"}
    done = subprocess.run([sys.executable, "-c", MEASURE], env=environment, capture_output=True, text=True)
    assert done.returncode == 0, done.stderr
    return done.stdout.split()


def test_a_second_process_finds_the_code_and_a_damaged_cache_is_rebuilt(tmp_path: Path) -> None:
    first = run(tmp_path)
    assert first[0] == "False"
    second = run(tmp_path)
    assert second == ["True", *first[1:]]
    files = [path for path in tmp_path.rglob("*") if path.suffix in (".nbi", ".nbc")]
    assert files
    for path in files:
        path.write_bytes(b"not what numba wrote")
    assert run(tmp_path)[1:] == first[1:]
    for path in tmp_path.rglob("*.nb?"):
        path.write_bytes(b"")
    assert run(tmp_path)[1:] == first[1:]


@pytest.mark.skipif(sys.platform == "win32", reason="folder permissions are POSIX's")
def test_a_folder_that_may_not_be_written_is_replaced_by_a_temporary_one(tmp_path: Path) -> None:
    blocked = tmp_path / "a file, not a folder"
    blocked.write_text("")
    assert "tackbench-compiled-" in run(blocked)[2]


def test_the_cache_is_named_after_the_text_of_kernels_and_laws(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    package = tmp_path / "tackbench"
    (package / "devices").mkdir(parents=True)
    (package / "devices" / "diode.py").write_text("law = 1")
    (package / "kernel.py").write_text("njit_cached")
    (package / "words.py").write_text("hello")
    monkeypatch.setattr(compiled, "__file__", str(package / "compiled.py"))
    names = [compiled._source_hash()]
    for path, text in (("devices/diode.py", "law = 2"), ("kernel.py", "njit_cached 2"), ("words.py", "bye")):
        (package / path).write_text(text)
        names.append(compiled._source_hash())
    assert len(set(names)) == 3
    assert names[2] == names[3]


def test_borrowed_arrays_are_themselves_in_plain_python() -> None:
    arrays = (object(), object())
    assert compiled.borrowed(arrays) is arrays
