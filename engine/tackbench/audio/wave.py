"""A small writer of WAV files that holds no time stamp, so that two runs give the same bytes, and grows into RF64.

Layout: RIFF with a reserved chunk of 28 bytes, which becomes the ds64 chunk of RF64 when the file passes the 4 GiB of
the plain format (EBU Tech 3306, as remembered), then fmt, for float samples fact, then data.
"""

from __future__ import annotations

import struct
from pathlib import Path
from types import TracebackType

PLAIN_LIMIT = 0xFFFFFFFF
"""Largest size, in bytes, that a plain WAV header can state."""

_PCM, _FLOAT = 1, 3
_RESERVED = 28


def _is_long(size: int) -> bool:
    """Whether the size of a file needs the 64 bits of RF64."""
    return size > PLAIN_LIMIT


class WaveWriter:
    """Writes interleaved little-endian sample bytes; a context manager. OSError passes."""

    def __init__(self, path: Path, rate: int, channels: int, bytes_per_sample: int, is_float: bool) -> None:
        self._rate, self._channels = rate, channels
        self._width, self._is_float = bytes_per_sample, is_float
        self._data = 0
        self._file = path.open("xb")
        self._file.write(self._header())

    def _format(self) -> bytes:
        frame = self._channels * self._width
        tag = _FLOAT if self._is_float else _PCM
        content = struct.pack("<HHIIHH", tag, self._channels, self._rate, self._rate * frame, frame, 8 * self._width)
        if self._is_float:
            content += struct.pack("<H", 0)
        return b"fmt " + struct.pack("<I", len(content)) + content

    def _header(self) -> bytes:
        frames = self._data // (self._channels * self._width)
        form = self._format()
        fact = b"fact" + struct.pack("<II", 4, min(frames, PLAIN_LIMIT)) if self._is_float else b""
        whole = 12 + 8 + _RESERVED + len(form) + len(fact) + 8 + self._data + self._data % 2
        if not _is_long(whole - 8):
            name, size, data = b"RIFF", whole - 8, self._data
            reserved = b"JUNK" + struct.pack("<I", _RESERVED) + bytes(_RESERVED)
        else:
            name, size, data = b"RF64", PLAIN_LIMIT, PLAIN_LIMIT
            reserved = b"ds64" + struct.pack("<IQQQI", _RESERVED, whole - 8, self._data, frames, 0)
        head = name + struct.pack("<I", size) + b"WAVE"
        return head + reserved + form + fact + b"data" + struct.pack("<I", data)

    def write(self, content: bytes) -> None:
        """Append sample bytes."""
        self._file.write(content)
        self._data += len(content)

    def close(self) -> None:
        """Finish the file: pad it, and state its sizes at the front."""
        if self._file.closed:
            return
        with self._file:
            if self._data % 2:
                self._file.write(b"\0")
            self._file.seek(0)
            self._file.write(self._header())

    def __enter__(self) -> WaveWriter:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, trouble: BaseException | None, trace: TracebackType | None
    ) -> None:
        if kind is None:
            self.close()
        else:
            self._file.close()
