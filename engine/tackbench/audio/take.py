"""Takes: dry DI recordings together with the number that turns their samples into volts."""

from __future__ import annotations

import hashlib
import math
import os
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tackbench.audio.calibration import Calibration
from tackbench.audio.container import Promise, read_promise
from tackbench.audio.resample import check_rate
from tackbench.audio.scan import LONGEST_PEAK_DB, Scan, scan_blocks
from tackbench.errors import InputError, WorkError

MOST_CHANNELS = 64

_FORMATS = ("WAV", "WAVEX", "RF64", "AIFF", "FLAC")
_SUBTYPES = ("PCM_S8", "PCM_U8", "PCM_16", "PCM_24", "PCM_32", "FLOAT", "DOUBLE")
_EXPECTED = "a take is a WAV, RF64, FLAC or AIFF file"
_SCAN_SAMPLES = 1 << 18  # samples in a block of the first pass
_QUIET_DB = -60.0


@dataclass(frozen=True)
class Take:
    """A recording that has been looked through once, and its calibration.

    ``peak`` and ``level_999`` (the magnitude that 99.9 % of the samples stay under) are in full scale. ``notes`` are
    sentences that whoever uses the take should read.
    """

    path: Path
    rate: int
    """Samples per second."""
    channels: int
    frames: int
    format: str
    subtype: str
    volts_per_full_scale: float
    calibration_words: str
    calibration_assumed: bool
    peak: float
    level_999: float
    notes: tuple[str, ...]
    _stamp: tuple[int, int] = field(repr=False, compare=False)

    @property
    def seconds(self) -> float:
        """How long the take is."""
        return self.frames / self.rate

    def blocks(self, frames_per_block: int) -> Iterator[NDArray[np.float64]]:
        """Full-scale samples, shape (up to ``frames_per_block``, channels), float64, in order, from the file.

        Each call opens the file itself, so any number of these may run at once. WorkError when the file has changed
        since the take was loaded.
        """
        if frames_per_block < 1:
            raise ValueError(f"a block has at least one frame, not {frames_per_block}")
        return self._blocks(frames_per_block)

    def _blocks(self, frames_per_block: int) -> Iterator[NDArray[np.float64]]:
        changed = WorkError(f"{self.path}: the take changed or went away while it was being worked on")
        try:
            if _stamp(self.path) != self._stamp:
                raise changed
            done = 0
            with _open(self.path) as file:
                for block in _read(file, self.path, frames_per_block):
                    done += len(block)
                    yield block
        except (InputError, OSError) as trouble:
            raise changed from trouble
        if done != self.frames:
            raise changed

    def fingerprint(self) -> str:
        """SHA-256 over rate, channels and samples: equal for equal audio, whatever the file's name and format."""
        digest = hashlib.sha256(f"{self.rate} {self.channels} {self.frames} ".encode())
        for block in self.blocks(max(1, _SCAN_SAMPLES // self.channels)):
            digest.update(block.astype("<f8", copy=False).tobytes())
        return digest.hexdigest()


def load_take(path: str | os.PathLike[str], calibration: Calibration | None = None) -> Take:
    """Look through one recording and calibrate it (assumed when none is given); InputError when it is no take."""
    return load_takes([path], calibration)[0]


def load_takes(paths: Sequence[str | os.PathLike[str]], calibration: Calibration | None = None) -> tuple[Take, ...]:
    """Several takes under one calibration: what it says of the loudest sample is said of the loudest of them all."""
    chosen = Calibration.assumed() if calibration is None else calibration
    looked = [_look_through(Path(path)) for path in paths]
    loudest = max((found.scan.peak for found in looked), default=0.0)
    volts = chosen.volts_per_full_scale(loudest)
    return tuple(found.take(chosen, volts) for found in looked)


@dataclass(frozen=True)
class _Looked:
    """One file after its first pass, before the calibration of the whole set is known."""

    path: Path
    rate: int
    channels: int
    format: str
    subtype: str
    stamp: tuple[int, int]
    scan: Scan
    has_length: bool

    def take(self, calibration: Calibration, volts: float) -> Take:
        return Take(
            path=self.path,
            rate=self.rate,
            channels=self.channels,
            frames=self.scan.frames,
            format=self.format,
            subtype=self.subtype,
            volts_per_full_scale=volts,
            calibration_words=calibration.words(volts),
            calibration_assumed=calibration.is_assumed,
            peak=self.scan.peak,
            level_999=self.scan.level_999,
            notes=tuple(self._notes(by_loudest=calibration.loudest is not None)),
            _stamp=self.stamp,
        )

    def _notes(self, *, by_loudest: bool) -> Iterator[str]:
        scan = self.scan
        if not self.has_length:
            yield "the header gives no length, so everything up to the end of the file was read"
        if scan.peak == 0.0:
            yield "the take is silent"
            return
        if scan.clipped_runs:
            runs = "one run" if scan.clipped_runs == 1 else f"{scan.clipped_runs} runs"
            yield (
                f"clipped take: {runs} of samples at full scale, the first at {scan.first_clip:.3f} s; "
                "the recording itself distorts there"
            )
        over = 20.0 * math.log10(scan.peak / scan.level_999) if scan.level_999 > 0.0 else math.inf
        if over > LONGEST_PEAK_DB:
            far = f"{over:.1f} dB over" if over < math.inf else "alone above"
            yield f"the loudest sample stands {far} the level that 99.9 % of the samples keep to: a knock or a click?"
        loudest_db = 20.0 * math.log10(scan.peak)
        if by_loudest and loudest_db < _QUIET_DB:
            yield f"the loudest sample is only {loudest_db:.0f} dBFS: is anything but noise in the take?"


def _stamp(path: Path) -> tuple[int, int]:
    status = path.stat()
    return status.st_size, status.st_mtime_ns


def _check_file(path: Path) -> tuple[int, int]:
    """Size and time of a readable, ordinary file that is not empty; InputError for anything else."""
    try:
        if path.is_dir():
            raise InputError("is a folder", file=path, expected=_EXPECTED)
        if path.exists() and not path.is_file():
            raise InputError("is not an ordinary file", file=path, expected=_EXPECTED)
        stamp = _stamp(path)
        with path.open("rb"):
            pass
    except FileNotFoundError:
        raise InputError("there is no such file", file=path, expected=_EXPECTED) from None
    except PermissionError:
        raise InputError("may not be read", file=path, expected="a file that you have permission to read") from None
    except (OSError, ValueError) as trouble:  # a name that is too long, holds a zero byte, …
        raise InputError(f"cannot be opened ({_cause(trouble)})", file=path, expected=_EXPECTED) from None
    if stamp[0] == 0:
        raise InputError("is empty", file=path, expected=_EXPECTED)
    return stamp


def _cause(trouble: BaseException) -> str:
    return (getattr(trouble, "strerror", None) or str(trouble)).rstrip(".").lower()


def _check_promise(path: Path, promise: Promise | None) -> None:
    """Hold the header against the file: a decoder would silently read what is there."""
    if promise is None:
        return
    if promise.channels == 0:
        raise InputError("its header says 0 channels", file=path, expected="at least one channel")
    if promise.promised == 0 and promise.held > 0:
        raise InputError(
            "its header says that it holds no audio (the recording may not have been closed properly)",
            file=path,
            expected="open it in an audio editor and save it again",
        )
    if promise.promised is not None and promise.promised > promise.held:
        raise InputError(
            f"is cut short: its header promises {promise.promised} bytes of audio, {promise.held} are there",
            file=path,
            expected="copy or export the file again",
        )


def _open(path: Path) -> Any:
    import soundfile

    try:
        return soundfile.SoundFile(path)
    except soundfile.LibsndfileError as trouble:
        raise InputError(
            f"cannot be read as audio ({trouble.error_string.rstrip('.').lower()})", file=path, expected=_EXPECTED
        ) from None
    except (OSError, ValueError, TypeError, RuntimeError) as trouble:
        raise InputError(f"cannot be read as audio ({_cause(trouble)})", file=path, expected=_EXPECTED) from None


def _read(file: Any, path: Path, frames_per_block: int) -> Iterator[NDArray[np.float64]]:
    import soundfile

    while True:
        try:
            block = file.read(frames_per_block, dtype="float64", always_2d=True)
        except (soundfile.SoundFileError, RuntimeError) as trouble:
            raise InputError(
                f"is damaged or cut short: decoding stops after {file.tell()} frames ({_cause(trouble)})",
                file=path,
                expected="copy or export the file again",
            ) from None
        if len(block) == 0:
            return
        yield block


def _check_layout(file: Any, path: Path) -> None:
    if file.format not in _FORMATS:
        raise InputError(f"is {file.format_info}", file=path, expected=_EXPECTED)
    if file.subtype not in _SUBTYPES:
        raise InputError(f"holds {file.subtype_info} samples", file=path, expected="PCM or float samples")
    check_rate(file.samplerate, path)
    if not 1 <= file.channels <= MOST_CHANNELS:
        raise InputError(f"has {file.channels} channels", file=path, expected=f"1 to {MOST_CHANNELS} channels")
    if file.frames > 1 << 60:
        raise InputError("its header gives no length", file=path, expected="save it again, for instance as WAV")
    if file.frames == 0:
        raise InputError("holds no audio (0 frames)", file=path, expected="at least one sample")


def _look_through(path: Path) -> _Looked:
    """Open, check and scan one file."""
    stamp = _check_file(path)
    try:
        promise = read_promise(path)
    except OSError as trouble:
        raise InputError(f"cannot be read ({_cause(trouble)})", file=path, expected=_EXPECTED) from None
    _check_promise(path, promise)
    with _open(path) as file:
        _check_layout(file, path)
        blocks = _read(file, path, max(1, _SCAN_SAMPLES // file.channels))
        scan = scan_blocks(blocks, file.samplerate, file.channels, file.subtype, path)
        if scan.frames < file.frames:
            raise InputError(
                f"is cut short: its header promises {file.frames} frames, {scan.frames} are there",
                file=path,
                expected="copy or export the file again",
            )
        layout = (file.samplerate, file.channels, file.format, file.subtype)
    return _Looked(path, *layout, stamp, scan, promise is None or promise.promised is not None)
