"""The rooms import along the arrows of the design only, and light commands import nothing heavy."""

from __future__ import annotations

import ast
import json
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest

import tackbench

PACKAGE = Path(tackbench.__file__).parent
SHARED = {"errors", "compiled"}
"""Top-level modules that every room may import."""

ARROWS = {
    "values": set(),
    "devices": {"values"},
    "parts": {"devices", "values"},
    "circuit": {"values"},
    "stage": {"parts", "circuit"},
    "network": {"circuit", "devices"},
    "kernel": {"network", "devices"},
    "audio": set(),
    "render": {"network", "kernel", "audio", "stage"},
    "measure": {"render", "network"},
    "hearing": {"audio"},
    "report": {"values"},
    "shootout": {"measure", "hearing", "render", "stage", "report"},
    "workbench": {"shootout"},
    "verify": {"shootout"},
    "cli": {"workbench", "verify", "shootout", "report"},
}
"""Room: the rooms that it builds on. What those build on, it may import too."""

HEAVY = ("numpy", "scipy", "numba", "llvmlite", "soundfile", "sounddevice")
NEVER_AT_TOP = ("scipy.signal", "scipy.linalg", "sounddevice")


def reachable(room: str) -> set[str]:
    """Every room along the arrows from this one, itself included."""
    found: set[str] = set()
    waiting = [room]
    while waiting:
        here = waiting.pop()
        if here not in found:
            found.add(here)
            waiting.extend(ARROWS[here])
    return found


def modules() -> list[Path]:
    return sorted(PACKAGE.rglob("*.py"))


def room_of(path: Path) -> str | None:
    """The room a file belongs to; None for the package's own top-level modules."""
    inside = path.relative_to(PACKAGE).parts
    return inside[0] if len(inside) > 1 else None


def imported_names(tree: ast.AST) -> Iterator[str]:
    """The dotted name of everything that is imported under this node."""
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            yield from (alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, "imports are absolute"
            yield from (f"{node.module}.{alias.name}" for alias in node.names)


def imported_when_loaded(tree: ast.Module) -> Iterator[str]:
    """What the import of the module itself imports: what stands outside functions and type-checking blocks."""
    for node in tree.body:
        if isinstance(node, (ast.Import, ast.ImportFrom)):
            yield from imported_names(node)


def test_every_room_of_the_package_has_its_arrows():
    rooms = {path.name for path in PACKAGE.iterdir() if path.is_dir() and (path / "__init__.py").exists()}
    assert rooms <= set(ARROWS), "a new room needs its line in the table of arrows"


def test_the_arrows_go_one_way():
    for room in ARROWS:
        for other in ARROWS[room]:
            assert room not in reachable(other), f"{room} and {other} import each other"


@pytest.mark.parametrize("path", modules(), ids=lambda path: path.relative_to(PACKAGE).as_posix())
def test_module_imports_along_the_arrows(path: Path):
    room = room_of(path)
    if room is None:
        return
    allowed = reachable(room) | SHARED | {"__version__"}
    for name in imported_names(ast.parse(path.read_text(encoding="utf-8"))):
        if name.startswith("tackbench."):
            assert name.split(".")[1] in allowed, f"{path.name} of room {room} may not import {name}"


def test_the_shared_modules_import_no_room():
    for name in SHARED:
        tree = ast.parse((PACKAGE / f"{name}.py").read_text(encoding="utf-8"))
        ours = [imported for imported in imported_names(tree) if imported.startswith("tackbench.")]
        assert set(ours) <= {"tackbench.__version__"}


@pytest.mark.parametrize("path", modules(), ids=lambda path: path.relative_to(PACKAGE).as_posix())
def test_slow_libraries_are_not_imported_with_a_module(path: Path):
    for name in imported_when_loaded(ast.parse(path.read_text(encoding="utf-8"))):
        assert not name.startswith(NEVER_AT_TOP), f"{path.name} imports {name} when it is loaded"


def loaded_after(code: str) -> set[str]:
    """The top-level modules that a fresh process has loaded after running the code."""
    ending = "; import json, sys; print(json.dumps(sorted({name.split('.')[0] for name in sys.modules})))"
    done = subprocess.run([sys.executable, "-c", code + ending], capture_output=True, text=True, check=True)
    return set(json.loads(done.stdout.splitlines()[-1]))


@pytest.mark.parametrize(
    "code",
    [
        "import tackbench",
        "from tackbench.cli.edge import run; run(['--help'])",
        "from tackbench.cli.edge import run; run(['--version'])",
        "from tackbench.cli.edge import run; run(['nonsense'])",
        "from tackbench.cli.edge import run; run(['stages'])",
        "from tackbench.cli.edge import run; run(['parts', 'diode'])",
    ],
)
def test_light_commands_load_nothing_heavy(code: str):
    assert loaded_after(code).isdisjoint(HEAVY)


def test_the_reference_solver_shares_nothing_with_the_engine():
    """It may read stage files and the flat circuit that comes out; every law, stamp and step must be its own."""
    allowed = ("tackbench.stage", "tackbench.circuit")
    for path in sorted((Path(__file__).parent / "reference").glob("*.py")):
        names = [name for name in all_imported(path) if name.split(".")[0] == "tackbench"]
        assert all(name.startswith(allowed) for name in names), (path.name, names)


def all_imported(path: Path) -> Iterator[str]:
    """Every absolute import of a file; relative ones stay inside its own package."""
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            yield from (alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom) and node.level == 0:
            yield f"{node.module}"
