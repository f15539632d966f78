"""Where in the user's input something stands, so that every complaint names the file, the part and the key."""

from __future__ import annotations

from dataclasses import dataclass, replace

from tackbench.errors import InputError


@dataclass(frozen=True)
class Where:
    """A place in the input: the file, the part (or table) in it, the key in that. None where it does not apply."""

    file: object = None
    part: str | None = None
    key: str | None = None

    def at(self, *, part: str | None = None, key: str | None = None) -> Where:
        """The same place with another part, or the same part with another key."""
        if part is not None:
            return replace(self, part=part, key=key)
        return replace(self, key=key)

    def fault(self, found: str, expected: str | None = None) -> InputError:
        """The error to raise for what was ``found`` here; ``expected`` says what would be right."""
        return InputError(found, file=self.file, part=_tidy(self.part), key=_tidy(self.key), expected=expected)


def _tidy(name: str | None) -> str | None:
    """A name from the file on one line: quoted when it holds control characters, cut short when long."""
    if name is None:
        return None
    text = name if name.isprintable() else repr(name)
    return text if len(text) <= 100 else text[:97] + "…"


def shown(raw: object) -> str:
    """A value as the user wrote it, for an error sentence: quoted, on one line, cut short when long."""
    if isinstance(raw, bool):
        return "true" if raw else "false"
    try:
        text = repr(raw)
    except (ValueError, RecursionError):  # an integer of more digits than Python converts, lists nested without end
        return "what stands here"
    return text if len(text) <= 60 else text[:57] + "…"
