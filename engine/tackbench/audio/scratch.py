"""A store on disk for samples that are needed twice: the stage's volts, before the matching gain is known."""

from __future__ import annotations

import os
import tempfile
import threading
from collections.abc import Iterator
from pathlib import Path
from types import TracebackType

import numpy as np
from numpy.typing import NDArray

from tackbench.audio.place import storage_error
from tackbench.errors import WorkError

BYTES_PER_SAMPLE = 8


class ScratchAudio:
    """Raw float64 samples of any range in a nameless temporary file; a context manager, gone when it is left.

    Where the system can, the file has no name at all, so that it goes even when the process is killed. ``append``
    belongs to one thread; ``blocks`` may run in several at once, when appending is over.
    """

    def __init__(self, folder: str | os.PathLike[str], channels: int) -> None:
        self._folder, self.channels, self.frames = Path(folder), channels, 0
        self._lock = threading.Lock()
        try:
            self._file = tempfile.TemporaryFile(dir=folder, prefix="scratch-", suffix=".part")  # noqa: SIM115
        except OSError as trouble:
            raise storage_error(trouble, self._folder) from None

    def append(self, block: NDArray[np.float64]) -> None:
        """Add samples of shape (n, channels); WorkError when they are not finite or the disk is full."""
        samples = np.ascontiguousarray(block, dtype="<f8")
        if samples.ndim != 2 or samples.shape[1] != self.channels:
            raise ValueError(f"blocks of shape (n, {self.channels}) are expected, not {samples.shape}")
        if not np.isfinite(samples).all():
            raise WorkError(f"a sample after frame {self.frames} of the result is not a finite number")
        try:
            with self._lock:
                self._file.seek(0, os.SEEK_END)
                self._file.write(samples.tobytes())
                self._file.flush()
        except OSError as trouble:
            raise storage_error(trouble, self._folder) from None
        self.frames += len(samples)

    def blocks(self, frames_per_block: int) -> Iterator[NDArray[np.float64]]:
        """Everything appended so far, float64, shape (up to ``frames_per_block``, channels), in order."""
        frame = self.channels * BYTES_PER_SAMPLE
        for start in range(0, self.frames, frames_per_block):
            count = min(frames_per_block, self.frames - start)
            with self._lock:
                self._file.seek(start * frame)
                content = self._file.read(count * frame)
            if len(content) != count * frame:
                raise WorkError(f"{self._folder}: the temporary store of samples could not be read back")
            yield np.frombuffer(content, dtype="<f8").reshape(count, self.channels).copy()

    def delete(self) -> None:
        """Remove the store; may be called again."""
        self._file.close()

    def __enter__(self) -> ScratchAudio:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, trouble: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.delete()
