"""What the commands print: results to stdout, everything else to stderr, readable in any encoding."""

from __future__ import annotations

import codecs
import sys

_PLAIN = {
    "−": "-",  # minus sign
    "–": "-",  # en dash
    "×": "x",
    "·": "*",
    "…": "...",
    "\u00b5": "u",  # micro sign
    "\u03bc": "u",  # Greek small mu
    "\u03a9": "ohm",  # Greek capital omega
    "\u2126": "ohm",  # ohm sign
    "°": " deg ",
    "±": "+/-",
    "→": "->",
    "‘": "'",
    "’": "'",
    "“": '"',
    "”": '"',
    "≥": ">=",
    "≤": "<=",
    "∞": "infinity",
}


def _plainer(error: UnicodeError) -> tuple[str, int]:
    """An encoding error handler that writes the nearest ASCII for what the terminal's encoding lacks."""
    if not isinstance(error, UnicodeEncodeError):
        raise error
    missing = error.object[error.start : error.end]
    return "".join(_PLAIN.get(character, "?") for character in missing), error.end


def make_output_safe() -> None:
    """Never fail on a character: narrow encodings get the nearest plain spelling."""
    codecs.register_error("tackbench-plain", _plainer)
    for stream in (sys.stdout, sys.stderr):
        reconfigure = getattr(stream, "reconfigure", None)
        if reconfigure is not None:
            reconfigure(errors="tackbench-plain")


def say(text: str = "") -> None:
    """One line of result, to stdout."""
    print(text, flush=True)


def tell(text: str) -> None:
    """One line about the work, to stderr."""
    print(text, file=sys.stderr, flush=True)
