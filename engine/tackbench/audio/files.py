"""Writing audio files: WAV and RF64, FLAC and AIFF, whole or not at all, the same bytes for the same samples."""

from __future__ import annotations

import os
from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tackbench.audio.place import check_output, check_room, written_beside
from tackbench.audio.quantize import Quantizer, check_range, packed
from tackbench.audio.resample import check_rate
from tackbench.audio.wave import PLAIN_LIMIT, WaveWriter
from tackbench.errors import InputError, WorkError, nearest

__all__ = ["WrittenAudio", "audio_bytes", "check_audio_output", "check_output", "check_room", "write_audio"]

BYTES_PER_SAMPLE = {"PCM_16": 2, "PCM_24": 3, "FLOAT": 4}
"""The sample formats that are written: 16 and 24 bits, and 32-bit float."""

_SUBTYPES = {".wav": ("PCM_24", "PCM_16", "FLOAT"), ".flac": ("PCM_24", "PCM_16"), ".aiff": ("PCM_24", "PCM_16")}
_SUBTYPES[".aif"] = _SUBTYPES[".aiff"]
_FORMATS = {".flac": "FLAC", ".aiff": "AIFF", ".aif": "AIFF"}
_MOST_FLAC_CHANNELS = 8
_HEADER_BYTES = 4096  # more than any header written here

_WORDS = {"PCM_16": "16 bits", "PCM_24": "24 bits", "FLOAT": "32-bit float"}


@dataclass(frozen=True)
class WrittenAudio:
    """What was written: ``peak`` is the largest magnitude in full scale, ``size`` the bytes of the file."""

    path: Path
    rate: int
    channels: int
    frames: int
    subtype: str
    peak: float
    size: int


def audio_bytes(frames: int, channels: int, subtype: str) -> int:
    """Bytes that a file of this takes at most (FLAC takes less), for telling and checking before the work."""
    return _HEADER_BYTES + frames * channels * BYTES_PER_SAMPLE[subtype]


def check_audio_output(
    path: str | os.PathLike[str], rate: int, channels: int, subtype: str = "PCM_24", overwrite: bool = False
) -> Path:
    """Whether such a file can be written there, asked before the work; InputError saying what could be instead."""
    place = Path(path)
    extension = place.suffix.lower()
    if extension not in _SUBTYPES:
        found = f"its ending {place.suffix!r} is no audio format" if place.suffix else "its name has no ending"
        raise InputError(found, file=place, expected="end it in .wav, .flac, .aiff or .aif")
    if subtype not in BYTES_PER_SAMPLE:
        raise InputError(f"{subtype!r} is no sample format: {nearest(subtype, BYTES_PER_SAMPLE)}", file=place)
    if subtype not in _SUBTYPES[extension]:
        raise InputError(f"a {extension} file here holds no {_WORDS[subtype]}", file=place, expected="end it in .wav")
    check_rate(rate, place)
    if channels < 1:
        raise InputError(f"{channels} channels cannot be written", file=place, expected="at least one")
    if extension == ".flac" and channels > _MOST_FLAC_CHANNELS:
        found = f"FLAC holds at most {_MOST_FLAC_CHANNELS} channels, not {channels}"
        raise InputError(found, file=place, expected="end it in .wav")
    return check_output(place, overwrite)


def write_audio(
    path: str | os.PathLike[str],
    blocks: Iterable[NDArray[np.float64]],
    rate: int,
    channels: int,
    subtype: str = "PCM_24",
    *,
    overwrite: bool = False,
    dither: bool = True,
    seed: int = 0,
) -> WrittenAudio:
    """Write full-scale samples, float64 blocks of shape (n, channels), to the format of the path's ending.

    ``subtype`` is PCM_16, PCM_24 or (WAV only) FLOAT. WAV becomes RF64 by itself beyond 4 GiB. Whole-number samples
    are dithered (see Quantizer). InputError when the place or format will not do or a sample would clip; WorkError
    for a sample that is no finite number, for no sample at all and for a full disk. Whatever happens, no part of a
    file is left.
    """
    place = check_audio_output(path, rate, channels, subtype, overwrite)
    with written_beside(place, overwrite) as beside:
        checked = _Checked(place, rate, channels, subtype)
        codes = _Encoded(checked.through(blocks), subtype, Quantizer(_bits(subtype), seed, dither))
        if place.suffix.lower() == ".wav":
            _write_wave(beside, codes, rate, channels)
        else:
            _write_with_library(beside, codes, checked, _FORMATS[place.suffix.lower()])
        size = beside.stat().st_size
    return WrittenAudio(place, rate, channels, checked.frames, subtype, checked.peak, size)


def _bits(subtype: str) -> int:
    return 8 * BYTES_PER_SAMPLE[subtype]


class _Checked:
    """Watches the blocks on their way to the file."""

    def __init__(self, place: Path, rate: int, channels: int, subtype: str) -> None:
        self.place, self.rate, self.channels, self.subtype = place, rate, channels, subtype
        self.frames, self.peak = 0, 0.0

    def through(self, blocks: Iterable[NDArray[np.float64]]) -> Iterator[NDArray[np.float64]]:
        for block in blocks:
            samples = np.asarray(block, dtype=np.float64)
            if samples.ndim != 2 or samples.shape[1] != self.channels:
                raise ValueError(f"blocks of shape (n, {self.channels}) are expected, not {samples.shape}")
            self._check(samples)
            self.peak = max(self.peak, float(np.max(np.abs(samples), initial=0.0)))
            self.frames += len(samples)
            yield samples
        if self.frames == 0:
            raise WorkError(f"{self.place}: not written, for there is not one sample")

    def _check(self, samples: NDArray[np.float64]) -> None:
        if self.subtype == "FLOAT":
            with np.errstate(over="ignore"):
                fine = np.isfinite(samples.astype(np.float32)).all()
        else:
            fine = np.isfinite(samples).all()
        if not fine:
            at = f"between {self.frames / self.rate:.3f} and {(self.frames + len(samples)) / self.rate:.3f} s"
            raise WorkError(f"{self.place}: not written, for a sample {at} is not a finite number")
        if self.subtype != "FLOAT":
            check_range(samples, self.frames, self.rate, _bits(self.subtype), self.place)


@dataclass(frozen=True)
class _Encoded:
    """Checked samples on their way to bytes (for WAV) or to whole-number codes (for the library)."""

    samples: Iterator[NDArray[np.float64]]
    subtype: str
    quantizer: Quantizer

    def as_bytes(self) -> Iterator[bytes]:
        for samples in self.samples:
            if self.subtype == "FLOAT":
                yield samples.astype("<f4").tobytes()
            else:
                yield packed(self.quantizer.codes(samples), _bits(self.subtype))

    def as_codes(self) -> Iterator[NDArray[np.int32]]:
        """Codes shifted to the top of 32 bits, as the library takes them without scaling."""
        for samples in self.samples:
            yield np.ascontiguousarray(self.quantizer.codes(samples) << (32 - _bits(self.subtype)))


def _write_wave(beside: Path, codes: _Encoded, rate: int, channels: int) -> None:
    width = BYTES_PER_SAMPLE[codes.subtype]
    with WaveWriter(beside, rate, channels, width, is_float=codes.subtype == "FLOAT") as writer:
        for content in codes.as_bytes():
            writer.write(content)


def _write_with_library(beside: Path, codes: _Encoded, checked: _Checked, form: str) -> None:
    import soundfile

    try:
        with soundfile.SoundFile(beside, "x", checked.rate, checked.channels, checked.subtype, format=form) as file:
            for block in codes.as_codes():
                _check_aiff_size(form, checked)
                _write_block(file, block, checked.place)
        written = soundfile.info(beside).frames
    except soundfile.SoundFileError as trouble:
        reason = getattr(trouble, "error_string", str(trouble)).rstrip(".").lower()
        raise WorkError(f"{checked.place}: could not be written ({reason}); is there room left?") from None
    if written != checked.frames:
        raise WorkError(f"{checked.place}: could not be written whole; is there room left on the disk?")


def _write_block(file: Any, block: NDArray[np.int32], place: Path) -> None:
    try:
        file.write(block)
    except AssertionError:  # the library's way of saying that fewer samples went out than in
        raise WorkError(f"{place}: no room left to write it; free some space or choose another folder") from None


def _check_aiff_size(form: str, checked: _Checked) -> None:
    if form == "AIFF" and audio_bytes(checked.frames, checked.channels, checked.subtype) > PLAIN_LIMIT:
        raise InputError("AIFF holds at most 4 GiB", file=checked.place, expected="end it in .wav")
