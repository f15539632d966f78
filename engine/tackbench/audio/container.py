"""What the header of a WAV, RF64 or AIFF file promises, read without decoding, to be held against the file's size."""

from __future__ import annotations

import struct
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import BinaryIO

_UNKNOWN = 0xFFFFFFFF  # a plain WAV that was streamed, or an RF64 whose sizes stand in its ds64 chunk
_MOST_CHUNKS = 10000


@dataclass(frozen=True)
class Promise:
    """Bytes of audio that the header promises (None: it gives no length), bytes that are there, channels."""

    promised: int | None
    held: int
    channels: int | None


def _chunks(file: BinaryIO, size: int, order: str) -> Iterator[tuple[bytes, int, int]]:
    """Identifier, stated size and position of the content of each chunk, as far as the file goes."""
    position = 12
    for _ in range(_MOST_CHUNKS):
        file.seek(position)
        head = file.read(8)
        if len(head) < 8:
            return
        name, length = struct.unpack(order + "4sI", head)
        yield name, length, position + 8
        position += 8 + length + length % 2
        if position >= size:
            return


def _wave(file: BinaryIO, size: int, order: str) -> Promise | None:
    channels, long_size = None, None
    for name, length, position in _chunks(file, size, order):
        file.seek(position)
        if name == b"ds64":  # EBU Tech 3306: sizes of 64 bits, low word first
            content = file.read(16)
            long_size = struct.unpack("<QQ", content)[1] if len(content) == 16 else None
        elif name == b"fmt ":
            content = file.read(4)
            channels = struct.unpack(order + "HH", content)[1] if len(content) == 4 else None
        elif name == b"data":
            promised = long_size if length == _UNKNOWN else length
            return Promise(promised, size - position, channels)
    return None


def _aiff(file: BinaryIO, size: int) -> Promise | None:
    channels, promise = None, None
    for name, length, position in _chunks(file, size, ">"):
        file.seek(position)
        if name == b"COMM":
            content = file.read(2)
            channels = struct.unpack(">H", content)[0] if len(content) == 2 else None
        elif name == b"SSND":
            promise = (length, size - position)
        if channels is not None and promise is not None:
            break
    return None if promise is None else Promise(*promise, channels)


def read_promise(path: Path) -> Promise | None:
    """What the header says, or None when the file is of another kind or its header is not whole. OSError passes."""
    size = path.stat().st_size
    with path.open("rb") as file:
        head = file.read(12)
        if head[:4] in (b"RIFF", b"RF64", b"BW64") and head[8:] == b"WAVE":
            return _wave(file, size, "<")
        if head[:4] == b"RIFX" and head[8:] == b"WAVE":
            return _wave(file, size, ">")
        if head[:4] == b"FORM" and head[8:] in (b"AIFF", b"AIFC"):
            return _aiff(file, size)
    return None
