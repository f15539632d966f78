"""What can go wrong, in two kinds: bad input (exit status 2) and work that failed (exit status 1)."""

from __future__ import annotations

import difflib
from collections.abc import Iterable


class TackbenchError(Exception):
    """Base of every error that a user is meant to read; its text is one clear sentence."""

    exit_status = 1


class InputError(TackbenchError):
    """The user gave something that cannot be used: it names the file, part or key, what is wrong, what is right.

    Parameters
    ----------
    found : what is wrong, as a sentence without its final stop.
    file, part, key : where it stands; put in front of the sentence when given.
    expected : what would be right; added after a semicolon.
    """

    exit_status = 2

    def __init__(
        self,
        found: str,
        *,
        file: object = None,
        part: str | None = None,
        key: str | None = None,
        expected: str | None = None,
    ) -> None:
        self.found, self.file, self.part, self.key, self.expected = found, file, part, key, expected
        where = [str(item) for item in (file, part, key) if item is not None]
        text = ": ".join([", ".join(where), found]) if where else found
        super().__init__(f"{text}; {expected}" if expected else text)


class WorkError(TackbenchError):
    """The input was fine but the work failed: a solve, the storage, a device."""


def nearest(word: str, known: Iterable[str]) -> str:
    """A hint for a misspelt word: ``did you mean 'x'?``, or the list of what there is when nothing is near."""
    names = sorted(set(known))
    folded = {name.casefold(): name for name in names}
    close = difflib.get_close_matches(word.casefold(), list(folded), n=1, cutoff=0.6)
    if close:
        return f"did you mean {folded[close[0]]!r}?"
    if not names:
        return "there is none to choose from"
    shown = ", ".join(names[:12]) + (", …" if len(names) > 12 else "")
    return f"known: {shown}"
