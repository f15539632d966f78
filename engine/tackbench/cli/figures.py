"""The shootout's table on the terminal, from the data of ``shootout.json``."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any

from tackbench.cli.table import Column, paragraph, table
from tackbench.report import FIGURES


def figure_lines(data: Mapping[str, Any], width: int | None = None) -> Iterator[str]:
    """The table, then what the user must know, one remark each."""
    columns = [Column(figure.name, figure.unit) for figure in FIGURES]
    entries = [data["bypass"], *data["variants"]]
    yield from table("variant", columns, [(_words(entry), _cells(entry)) for entry in entries], width)
    yield ""
    for note in (*data["notes"], *data["left_out"]):
        yield from paragraph(note, width=width)


def _words(entry: Mapping[str, Any]) -> str:
    return f"{entry['words']} (reference)" if entry.get("reference") else str(entry["words"])


def _cells(entry: Mapping[str, Any]) -> list[str]:
    if entry["file"] is None:
        return [f"left out: {' '.join(entry['over_limits'])}"]
    return [figure.text(entry) for figure in FIGURES]
