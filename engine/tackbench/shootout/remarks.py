"""What the user must know besides the figures, one sentence each, the weightiest first."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from typing import Any

from tackbench.audio import Take
from tackbench.shootout.matching import Matching
from tackbench.shootout.plan import Plan


def remarks(
    take: Take, plan: Plan, entries: Sequence[Mapping[str, Any]], matching: Matching, quality: str
) -> Iterator[str]:
    """The sentences under the table. ``entries`` are the variants' entries of ``shootout.json``."""
    if take.calibration_assumed:
        yield f"calibration {take.calibration_words}; give --peak-volts, --full-scale-dbu or --pickup"
    yield from take.notes
    yield from _shared(entries)
    yield from _silent(entries)
    if matching.lowered_db < -0.05 or not matching.method.startswith("BS.1770"):
        yield matching.words
    if plan.merged:
        count = "one asked variant is" if plan.merged == 1 else f"{plan.merged} asked variants are"
        yield f"{count} the same circuit as another in the list: one file serves both"
    yield from solver_words([entry["solver"] for entry in entries if entry["solver"]], quality)


def _shared(entries: Sequence[Mapping[str, Any]]) -> Iterator[str]:
    """Every note once, with the variants that it is about, unless it is about all of them."""
    about: dict[str, list[str]] = {}
    for entry in entries:
        for note in entry["notes"]:
            about.setdefault(note, []).append(entry["words"])
    for note in sorted(about, key=lambda note: "from memory" in note):  # the parts' figures concern least
        words = about[note]
        yield note if len(words) == len(entries) else f"{_some(words)}: {note}"


def _some(words: Sequence[str]) -> str:
    """Up to three variants by their words, the rest by their number."""
    named = "; ".join(words[:3])
    return f"{named}; and {len(words) - 3} more" if len(words) > 3 else named


def _silent(entries: Sequence[Mapping[str, Any]]) -> Iterator[str]:
    silent = [entry["words"] for entry in entries if entry.get("silent")]
    if silent:
        yield f"{_some(silent)}: nothing audible comes out, so nothing was brought up"


def solver_words(counts: Sequence[Mapping[str, int]], quality: str) -> Iterator[str]:
    """What the solver had to do, in a sentence; and another where it reached its limit."""
    total = {key: sum(count.get(key, 0) for count in counts) for key in {key for count in counts for key in count}}
    steps = total.get("steps", 0)
    if not steps:
        return
    each = total.get("iterations", 0) / steps
    hard = total.get("hard_steps", 0)
    yield f"solver ({quality}): {_many(steps)} steps, {each:.2f} iterations each, {_many(hard)} hard, all converged"
    capped = total.get("capped_steps", 0)
    if capped:
        yield (
            f"{_many(capped)} steps reached the smallest step size with the error estimate still over its tolerance: "
            "compare with --quality best before trusting small differences"
        )


def _many(count: int) -> str:
    if count < 10_000:
        return str(count)
    return f"{count / 1e6:.1f} million" if count >= 1e6 else f"{count / 1e3:.0f} thousand"
