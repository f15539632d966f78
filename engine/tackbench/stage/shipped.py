"""Loading a stage: one that ships, by its name, or a file, by its path."""

from __future__ import annotations

from importlib.resources.abc import Traversable
from pathlib import Path

from tackbench.errors import InputError, nearest
from tackbench.parts import load_parts, models_root, read_toml
from tackbench.stage.model import Stage
from tackbench.stage.reader import read_stage

_SUFFIX = ".toml"


def shipped_stages() -> tuple[str, ...]:
    """The names of the stages that ship, in order."""
    return tuple(sorted(_shipped_files()))


def _shipped_files() -> dict[str, Traversable]:
    folder = models_root() / "stages"
    files = folder.iterdir() if folder.is_dir() else iter(())
    return {path.name.removesuffix(_SUFFIX): path for path in files if path.name.endswith(_SUFFIX)}


def load_stage(name_or_path: str | Path, parts_folder: Path | None = None) -> Stage:
    """The stage called ``name_or_path``, or in the file at that path (anything with a separator or ``.toml``).

    ``parts_folder`` holds the user's own part files; a folder ``parts`` beside the stage file is read too.
    Raises InputError, one sentence naming the file, the part and the key, for anything that is not right.
    """
    text = str(name_or_path)
    if isinstance(name_or_path, Path) or _is_path(text):
        return _load_file(Path(text), parts_folder)
    files = _shipped_files()
    if text not in files:
        hint = nearest(text, files)
        beside = f"; for a file write ./{text}" if text and "\0" not in text and Path(text).is_file() else ""
        raise InputError(f"no stage called {text[:60]!r} ships", expected=hint + beside)
    document = read_toml(files[text], "stage file", f"{text}{_SUFFIX}")
    return read_stage(document, text, None, load_parts(parts_folder))


def _is_path(text: str) -> bool:
    return "/" in text or "\\" in text or text.endswith(_SUFFIX)


def _load_file(path: Path, parts_folder: Path | None) -> Stage:
    document = read_toml(path, "stage file")
    library = load_parts(parts_folder, neighbour=path.parent / "parts")
    return read_stage(document, path.name.removesuffix(_SUFFIX), path, library)
