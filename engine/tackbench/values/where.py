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
        return InputError(found, file=self.file, part=self.part, key=self.key, expected=expected)


def shown(raw: object) -> str:
    """A value as the user wrote it, for an error sentence: quoted, on one line, cut short when long."""
    if isinstance(raw, bool):
        return "true" if raw else "false"
    try:
        text = repr(raw)
    except ValueError:  # an integer of more digits than Python converts
        return "a number of thousands of digits"
    return text if len(text) <= 60 else text[:57] + "…"
