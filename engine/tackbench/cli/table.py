"""Text tables that fit the terminal: figures keep their columns, words wrap."""

from __future__ import annotations

import shutil
import textwrap
from collections.abc import Sequence
from dataclasses import dataclass

GAP = "  "
WIDEST, NARROWEST = 100, 60
FEWEST_WORD_COLUMNS = 14


@dataclass(frozen=True)
class Column:
    """A column of figures: its two heading lines (name over unit)."""

    name: str
    unit: str = ""


def width_of_terminal() -> int:
    """Columns to write in: the terminal's, but no more than reads well."""
    return max(NARROWEST, min(WIDEST, shutil.get_terminal_size((WIDEST, 24)).columns))


def table(
    first: str, columns: Sequence[Column], rows: Sequence[tuple[str, Sequence[str]]], width: int | None = None
) -> list[str]:
    """The lines of a table whose first column is words, wrapped to what the figures leave of ``width``.

    A row with fewer figures than columns ends in words: its last cell runs on to the end of the line.
    """
    total = width or width_of_terminal()
    sizes = [_size(column, index, rows, len(columns)) for index, column in enumerate(columns)]
    taken = sum(sizes) + len(GAP) * len(sizes)
    longest = max([len(first), *(len(words) for words, _ in rows)])
    words_size = min(longest, max(FEWEST_WORD_COLUMNS, total - taken))
    lines = [
        _line(first, [column.name for column in columns], words_size, sizes),
        _line("", [column.unit for column in columns], words_size, sizes),
        "-" * (words_size + taken),
    ]
    for words, cells in rows:
        lines += _row(words, cells, words_size, sizes, total)
    return [line.rstrip() for line in lines]


def _size(column: Column, index: int, rows: Sequence[tuple[str, Sequence[str]]], count: int) -> int:
    cells = [cells[index] for _, cells in rows if len(cells) == count]
    return max(len(text) for text in (column.name, column.unit, *cells))


def _line(words: str, cells: Sequence[str], words_size: int, sizes: Sequence[int]) -> str:
    padded = [cell.rjust(size) for cell, size in zip(cells, sizes, strict=True)]
    return GAP.join([words.ljust(words_size), *padded])


def _row(words: str, cells: Sequence[str], words_size: int, sizes: Sequence[int], total: int) -> list[str]:
    wrapped = textwrap.wrap(words, words_size, break_long_words=True) or [""]
    if len(cells) == len(sizes):
        lines = [_line(wrapped[0], cells, words_size, sizes)]
        return lines + wrapped[1:]
    told = textwrap.wrap(" ".join(cells), max(20, total - words_size - len(GAP)))
    height = max(len(wrapped), len(told))
    left = [*wrapped, *[""] * (height - len(wrapped))]
    right = [*told, *[""] * (height - len(told))]
    return [GAP.join([one.ljust(words_size), other]) for one, other in zip(left, right, strict=True)]


def paragraph(text: str, bullet: str = "- ", width: int | None = None) -> list[str]:
    """One remark wrapped to the width, with a hanging bullet."""
    return textwrap.wrap(
        text,
        width or width_of_terminal(),
        initial_indent=bullet,
        subsequent_indent=" " * len(bullet),
        break_on_hyphens=False,
    )
