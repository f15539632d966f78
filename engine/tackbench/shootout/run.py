"""The main job put together: a take through several variants, matched, measured, written as one folder."""

from __future__ import annotations

import json
import os
from collections.abc import Iterable, Mapping, Sequence
from contextlib import ExitStack
from dataclasses import dataclass, field
from functools import cached_property
from pathlib import Path
from typing import Any

from tackbench import __version__
from tackbench.audio import Take, load_take
from tackbench.audio.names import safe_names
from tackbench.audio.place import check_room
from tackbench.audio.scratch import ScratchAudio
from tackbench.errors import InputError, nearest
from tackbench.render import NUMERICS, QUALITIES, side_by_side
from tackbench.report import page
from tackbench.shootout.entries import about_variant, bypass_entry, left_out_entry, take_entry, variant_entry
from tackbench.shootout.estimate import SUBTYPE, Estimate, estimate
from tackbench.shootout.folder import (
    DATA_FILE,
    PAGE_FILE,
    SCHEMA,
    built_beside,
    check_folder,
    check_names,
    default_folder,
    move_into_place,
)
from tackbench.shootout.matching import Matching, Sound, match, written_factor
from tackbench.shootout.plan import Plan, make_plan, words_of
from tackbench.shootout.remarks import remarks
from tackbench.shootout.survey import Survey, survey
from tackbench.shootout.threads import Report, Tally, in_threads
from tackbench.shootout.volts import Volts, prepare_variant, render_volts
from tackbench.shootout.writing import Written, write_bypass, write_volts
from tackbench.stage import Stage, load_stage

VERSION = 1
"""The version of the schema of ``shootout.json``."""

THREADS_PER_PROCESSOR = 2
"""Groups of variants differ in length: with more threads than processors none is left to work alone at the end."""

_WRITING_SHARE = 0.1
"""How much of the progress the second pass is counted as."""


@dataclass(frozen=True)
class Shootout:
    """A finished shootout: the folder, and the data of its ``shootout.json``."""

    folder: Path
    data: Mapping[str, Any] = field(repr=False)

    @property
    def page(self) -> Path:
        """The page that plays the files."""
        return self.folder / PAGE_FILE

    @property
    def files(self) -> tuple[Path, ...]:
        """The audio files, the bypass first."""
        entries = [self.data["bypass"], *self.data["variants"]]
        return tuple(self.folder / entry["file"] for entry in entries if entry["file"])

    @property
    def variants(self) -> Sequence[Mapping[str, Any]]:
        """The entries of the variants, the reference first."""
        found: Sequence[Mapping[str, Any]] = self.data["variants"]
        return found

    @property
    def notes(self) -> tuple[str, ...]:
        """What the user must know, one sentence each."""
        return tuple(self.data["notes"])


@dataclass(frozen=True)
class Job:
    """A shootout that has been checked and not been started."""

    take: Take
    plan: Plan
    folder: Path
    quality: str
    overwrite: bool
    threads: int

    @cached_property
    def looked(self) -> Survey:
        """The take's own loudness and levels."""
        return survey(self.take)

    @cached_property
    def words(self) -> list[str]:
        """Each variant in words."""
        return words_of(self.plan)

    @cached_property
    def names(self) -> list[str]:
        """The audio files' names, the bypass first."""
        words = ["bypass", *self.words]
        return [f"{name}.wav" for name in safe_names(f"{index:02d} {text}" for index, text in enumerate(words))]

    @cached_property
    def live(self) -> list[int]:
        """Which variants are rendered: those that are within every limit."""
        return [index for index, variant in enumerate(self.plan.variants) if not variant.over_limits]

    def estimate(self) -> Estimate:
        """Files, bytes and seconds, found by a short trial of the stage itself."""
        variants = [self.plan.variants[index] for index in self.live]
        return estimate(self.take, self.looked, variants, self.quality, self.threads)

    def check_room(self, needs: Estimate) -> None:
        """``WorkError`` when the disk has no room for it."""
        check_room(self.folder.absolute().parent, needs.final_bytes + needs.temporary_bytes)

    def run(self, report: Report = lambda share: None) -> Shootout:
        """Do the work. ``report`` is told the share that is done, 0 to 1. Nothing is left behind when it fails."""
        with built_beside(self.folder) as building:
            data = self._fill(building, report)
            names = [
                name for name in [data["bypass"]["file"], *(entry["file"] for entry in data["variants"])] if name
            ]
            _write_text(building / DATA_FILE, json.dumps(data, indent=1, ensure_ascii=False, allow_nan=False))
            _write_text(building / PAGE_FILE, page(data))
            move_into_place(building, self.folder, [*names, PAGE_FILE, DATA_FILE])
        report(1.0)
        return Shootout(self.folder, data)

    def _fill(self, building: Path, report: Report) -> dict[str, Any]:
        """Render, match and write every audio file into ``building``; the data of the shootout."""
        with ExitStack() as stack:
            stores = [stack.enter_context(ScratchAudio(building, self.take.channels)) for _ in self.live]
            volts = self._render(stores, lambda share: report(share * (1 - _WRITING_SHARE)))
            scale = self.take.volts_per_full_scale
            sounds = [Sound(one.loudness.integrated, one.levels.true_peak / scale) for one in volts]
            matching = match(self.looked.sound, sounds)
            written = self._write(building, stores, volts, matching, lambda share: report(1 - 0.1 * (1 - share)))
        return self._data(volts, matching, written)

    def _render(self, stores: Sequence[ScratchAudio], report: Report) -> Sequence[Volts]:
        """The first pass over every live variant, in threads."""
        take, tally = self.take, Tally(len(self.live) * self.take.frames)
        prepared = [
            prepare_variant(take, self.plan.variants[index], self.words[index], self.quality, store)
            for index, store in zip(self.live, stores, strict=True)
        ]
        groups = side_by_side([one.stage for one in prepared], take.channels)
        groups.sort(key=len, reverse=True)  # the longest work first, so that no thread is left with it alone

        def work(group: list[int]) -> list[Volts]:
            return render_volts(take, [prepared[index] for index in group], tally.advance)

        made = in_threads(work, groups, self.threads, tally, report)
        found = {
            index: one
            for group, volts in zip(groups, made, strict=True)
            for index, one in zip(group, volts, strict=True)
        }
        return [found[index] for index in range(len(prepared))]

    def _write(
        self,
        building: Path,
        stores: Sequence[ScratchAudio],
        volts: Sequence[Volts],
        matching: Matching,
        report: Report,
    ) -> Sequence[Written]:
        """The second pass: the bypass and every live variant, in threads."""
        take, scale = self.take, self.take.volts_per_full_scale
        tally = Tally((1 + len(volts)) * take.frames)

        def work(item: int) -> Written:
            if item < 0:
                return write_bypass(building / self.names[0], take, matching.bypass_gain, SUBTYPE, tally.advance)
            path = building / self.names[1 + self.live[item]]
            factor = written_factor(matching.gains[item], volts[item].levels.true_peak / scale, SUBTYPE) / scale
            return write_volts(path, take, stores[item], volts[item].rest, factor, SUBTYPE, tally.advance)

        return in_threads(work, range(-1, len(volts)), self.threads, tally, report)

    def _data(self, volts: Sequence[Volts], matching: Matching, written: Sequence[Written]) -> dict[str, Any]:
        """Everything that ``shootout.json`` holds."""
        fingerprint = self.take.fingerprint()
        entries = self._entries(fingerprint, volts, matching, written[1:])
        return {
            "schema": SCHEMA,
            "version": VERSION,
            "made_by": f"tackbench {__version__}",
            "numerics": NUMERICS,
            "quality": self.quality,
            "question": self.plan.question,
            "stage": {name: getattr(self.plan.stage, name) for name in ("name", "title", "about")},
            "take": take_entry(self.take, self.looked, fingerprint),
            "matching": {
                "target_lufs": matching.target_lufs,
                "lowered_db": matching.lowered_db,
                "method": matching.method,
                "words": matching.words,
            },
            "bypass": bypass_entry(self.take, self.looked, matching, written[0]),
            "variants": entries,
            "notes": list(remarks(self.take, self.plan, entries, matching, self.quality)),
            "left_out": list(self.plan.left_out),
        }

    def _entries(
        self, fingerprint: str, volts: Sequence[Volts], matching: Matching, written: Sequence[Written]
    ) -> list[dict[str, Any]]:
        """The entry of every variant, in the plan's order, those left out included."""
        rendered = iter(zip(volts, matching.gains, matching.silent, written, strict=True))
        entries = []
        for index, (variant, words) in enumerate(zip(self.plan.variants, self.words, strict=True)):
            if variant.over_limits:
                entry = left_out_entry(words, variant.over_limits, variant.notes)
            else:
                entry = variant_entry(self.take, self.looked, variant, words, *next(rendered))
            about = about_variant(self.take, variant, fingerprint, self.quality)
            entries.append({**entry, "reference": index == 0, **about})
        return entries


def prepare_shootout(
    take: Take | str | os.PathLike[str],
    stage: Stage | str | os.PathLike[str] = "two-voice",
    with_: Mapping[str, Any] | Iterable[tuple[str, Any]] = (),
    tries: Mapping[str, Sequence[Any]] | Iterable[tuple[str, Sequence[Any]]] = (),
    grid: bool = False,
    folder: str | os.PathLike[str] | None = None,
    quality: str = "standard",
    overwrite: bool = False,
    threads: int | None = None,
) -> Job:
    """Check everything that can be checked before any work, and give the job. Arguments as of ``shootout``."""
    check_quality(quality)
    loaded = stage if isinstance(stage, Stage) else load_stage(stage if isinstance(stage, str) else Path(stage))
    plan = make_plan(loaded, with_, tries, grid)
    recording = take if isinstance(take, Take) else load_take(take)
    target = default_folder(recording.path, loaded.name) if folder is None else Path(folder)
    check_folder(target, overwrite)
    job = Job(recording, plan, target, quality, overwrite, threads or THREADS_PER_PROCESSOR * (os.cpu_count() or 1))
    if not job.live:
        raise InputError("; ".join(plan.reference.over_limits), expected="no variant is within its limits")
    check_names(target, [*job.names, DATA_FILE, PAGE_FILE])
    return job


def shootout(
    take: Take | str | os.PathLike[str],
    stage: Stage | str | os.PathLike[str] = "two-voice",
    with_: Mapping[str, Any] | Iterable[tuple[str, Any]] = (),
    tries: Mapping[str, Sequence[Any]] | Iterable[tuple[str, Sequence[Any]]] = (),
    grid: bool = False,
    folder: str | os.PathLike[str] | None = None,
    quality: str = "standard",
    overwrite: bool = False,
    threads: int | None = None,
    progress: Report = lambda share: None,
) -> Shootout:
    """Render a take through several variants of a stage at equal loudness, into one folder.

    Parameters
    ----------
    take : a loaded take, or the path of a recording (then its loudest sample is assumed to be 0.7 V).
    stage : a loaded stage, the name of one that ships, or the path of a stage file.
    with_ : what the reference has, as ``{"gain": 0.5}``.
    tries : what is tried, as ``{"clip": ["germanium", "silicon"]}``; nothing: the questions that the stage offers.
    grid : every combination of the tried values instead of one change at a time.
    folder : where to; by default named after take and stage, in the current directory.
    quality : "draft", "standard" or "best".
    overwrite : replace the files of an earlier shootout in that folder.
    threads : groups of variants at a time; by default two a processor. The samples do not depend on it.
    progress : called with the share of the work that is done, 0 to 1.

    Raises ``InputError`` for anything that was asked wrongly, ``WorkError`` when the work fails.
    """
    job = prepare_shootout(take, stage, with_, tries, grid, folder, quality, overwrite, threads)
    job.check_room(job.estimate())
    return job.run(progress)


def check_quality(quality: str) -> None:
    """``InputError`` for an unknown quality."""
    if quality not in QUALITIES:
        raise InputError(f"there is no quality {quality!r}", expected=nearest(quality, QUALITIES))


def _write_text(path: Path, text: str) -> None:
    path.write_text(text + "\n", encoding="utf-8", newline="\n")
