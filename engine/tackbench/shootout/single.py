"""One variant into one file, with its volts per full scale and applied gain recorded beside it."""

from __future__ import annotations

import json
import math
import os
from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property
from pathlib import Path
from typing import Any

from tackbench import __version__
from tackbench.audio import Take
from tackbench.audio.files import audio_bytes, check_audio_output
from tackbench.audio.place import check_output, check_room, written_beside
from tackbench.audio.scratch import BYTES_PER_SAMPLE, ScratchAudio
from tackbench.errors import InputError, nearest
from tackbench.render import NUMERICS
from tackbench.shootout.entries import about_variant, take_entry, variant_entry
from tackbench.shootout.matching import CEILING_DB, HALF_A_CODE, SILENT_BELOW_DB, Sound, match, written_factor
from tackbench.shootout.remarks import solver_words
from tackbench.shootout.run import check_quality
from tackbench.shootout.survey import Survey, survey
from tackbench.shootout.threads import Report, Tally, in_threads
from tackbench.shootout.volts import Volts, prepare_variant, render_volts
from tackbench.shootout.writing import Written, write_volts
from tackbench.stage import Variant

SCHEMA, VERSION = "tackbench.render", 1
LEVELS = ("matched", "as-built", "peak")
_WRITING_SHARE = 0.1


@dataclass(frozen=True)
class RenderedFile:
    """A finished file, the record beside it, and the record's data."""

    path: Path
    record_path: Path
    data: Mapping[str, Any] = field(repr=False)

    @property
    def notes(self) -> tuple[str, ...]:
        """What the user must know, one sentence each."""
        return tuple(self.data["notes"])


@dataclass(frozen=True)
class FileJob:
    """One render to one file that has been checked and not been started."""

    take: Take
    variant: Variant
    path: Path
    level: str
    quality: str
    overwrite: bool

    @property
    def record_path(self) -> Path:
        """The record beside the file."""
        return self.path.with_name(self.path.name + ".json")

    @property
    def subtype(self) -> str:
        """As-built WAV files are 32-bit float, so that they may go beyond full scale; all others hold 24 bits."""
        return "FLOAT" if self.level == "as-built" and self.path.suffix.lower() == ".wav" else "PCM_24"

    @cached_property
    def looked(self) -> Survey:
        """The take's own loudness and levels."""
        return survey(self.take)

    def run(self, report: Report = lambda share: None) -> RenderedFile:
        """Do the work. ``report`` is told the share that is done, 0 to 1. Nothing is left behind when it fails."""
        size = self.take.frames * self.take.channels
        needed = size * BYTES_PER_SAMPLE + audio_bytes(self.take.frames, self.take.channels, self.subtype)
        check_room(self.path.absolute().parent, needed)
        with (
            ScratchAudio(self.path.absolute().parent, self.take.channels) as store,
            written_beside(self.record_path, self.overwrite) as record,
        ):
            volts = self._render(store, lambda share: report(share * (1 - _WRITING_SHARE)))
            gain, silent = self._gain(volts)
            written = self._write(store, volts, gain, lambda share: report(1 - _WRITING_SHARE * (1 - share)))
            data = self._data(volts, gain, silent, written)
            text = json.dumps(data, indent=1, ensure_ascii=False, allow_nan=False)
            record.write_text(text + "\n", encoding="utf-8", newline="\n")
        report(1.0)
        return RenderedFile(self.path, self.record_path, data)

    def _render(self, store: ScratchAudio, report: Report) -> Volts:
        tally = Tally(self.take.frames)

        def work(variant: Variant) -> Volts:
            prepared = prepare_variant(self.take, variant, variant.words(), self.quality, store)
            return render_volts(self.take, [prepared], tally.advance)[0]

        return in_threads(work, [self.variant], 1, tally, report)[0]

    def _gain(self, volts: Volts) -> tuple[float, bool]:
        """The gain on the take's own scale, and whether the output was too weak to be brought up."""
        sound = Sound(volts.loudness.integrated, volts.levels.true_peak / self.take.volts_per_full_scale)
        if self.level == "as-built":
            return 1.0, False
        if self.level == "matched":
            matching = match(self.looked.sound, [sound], with_bypass=False)
            return matching.gains[0], matching.silent[0]
        least = max(HALF_A_CODE, self.looked.levels.true_peak * 10 ** (SILENT_BELOW_DB / 20))
        if sound.true_peak < least:
            return 1.0, True
        return float(10 ** (CEILING_DB / 20)) / sound.true_peak, False

    def _write(self, store: ScratchAudio, volts: Volts, gain: float, report: Report) -> Written:
        tally = Tally(self.take.frames)
        rest = 0.0 if self.level == "as-built" else volts.rest
        scale = self.take.volts_per_full_scale
        factor = written_factor(gain, volts.levels.true_peak / scale, self.subtype) / scale

        def work(path: Path) -> Written:
            return write_volts(
                path, self.take, store, rest, factor, self.subtype, tally.advance, overwrite=self.overwrite
            )

        return in_threads(work, [self.path], 1, tally, report)[0]

    def _data(self, volts: Volts, gain: float, silent: bool, written: Written) -> dict[str, Any]:
        """Everything that the record beside the file holds."""
        fingerprint = self.take.fingerprint()
        words = self.variant.words()
        entry = variant_entry(self.take, self.looked, self.variant, words, volts, gain, silent, written)
        return {
            "schema": SCHEMA,
            "version": VERSION,
            "made_by": f"tackbench {__version__}",
            "numerics": NUMERICS,
            "quality": self.quality,
            "level": self.level,
            "subtype": self.subtype,
            "dc_kept": self.level == "as-built",
            "stage": {"name": self.variant.stage.name, "title": self.variant.stage.title},
            "take": take_entry(self.take, self.looked, fingerprint),
            **entry,
            **about_variant(self.take, self.variant, fingerprint, self.quality),
            "notes": self._notes(entry, gain, volts),
        }

    def _notes(self, entry: Mapping[str, Any], gain: float, volts: Volts) -> list[str]:
        notes = [f"calibration {self.take.calibration_words}"] if self.take.calibration_assumed else []
        notes += [*self.take.notes, *entry["notes"]]
        if entry["silent"]:
            notes.append("nothing audible comes out, so nothing was brought up")
        elif self.level == "matched":
            notes += self._matching_notes(gain, volts)
        if entry["true_peak_dbfs"] is not None and self.level == "as-built" and entry["true_peak_dbfs"] > 0:
            notes.append(
                f"the file goes {entry['true_peak_dbfs']:.1f} dB over full scale; turn it down before playing it"
            )
        return [*notes, *solver_words([entry["solver"]], self.quality)]

    def _matching_notes(self, gain: float, volts: Volts) -> list[str]:
        """Where equal loudness could not be had in full, or was measured otherwise than usual."""
        found = volts.loudness.integrated(gain)
        wanted = self.looked.loudness.integrated().lufs
        notes = [] if found.method.startswith("BS.1770") else [f"loudness by {found.method}"]
        if found.lufs is not None and wanted is not None and found.lufs < wanted - 0.05:
            short = f"{wanted - found.lufs:.1f} dB under the take's loudness"
            notes.append(f"{short}, so that the true peak stays at {CEILING_DB:g} dB")
        return notes


def prepare_file(
    take: Take,
    variant: Variant,
    path: str | os.PathLike[str],
    level: str = "matched",
    quality: str = "standard",
    overwrite: bool = False,
) -> FileJob:
    """Check everything that can be checked before any work, and give the job.

    Parameters
    ----------
    path : the file to write; its ending chooses the format.
    level : "matched" brings the output to the take's loudness (true peak at most -1 dB), "as-built" keeps the take's
        volts per full scale and the DC, "peak" brings the true peak to -1 dB.

    Raises ``InputError`` for anything that was asked wrongly.
    """
    check_quality(quality)
    if level not in LEVELS:
        raise InputError(f"there is no level {level!r}", expected=nearest(level, LEVELS))
    if variant.over_limits:
        raise InputError("; ".join(variant.over_limits), file=variant.stage.name, expected="choose within the limits")
    job = FileJob(take, variant, Path(path), level, quality, overwrite)
    check_audio_output(job.path, take.rate, take.channels, job.subtype, overwrite)
    if job.path.exists() and job.path.samefile(take.path):
        raise InputError("this is the take itself", file=job.path, expected="write the output to another file")
    check_output(job.record_path, overwrite)
    return job


def gain_words(data: Mapping[str, Any]) -> str:
    """What the samples of a written file mean, in a sentence."""
    gain = data["applied_gain_db"]
    applied = "no gain applied" if math.isclose(gain, 0.0, abs_tol=1e-9) else f"{gain:+.1f} dB applied"
    return f"0 dBFS = {data['volts_per_full_scale']:.3g} V, {applied}"
