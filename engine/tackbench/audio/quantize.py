"""From float64 samples to whole-number codes, with reproducible triangular dither."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from tackbench.errors import InputError


class Quantizer:
    """Rounds full-scale samples to codes of ``bits`` bits, block by block.

    Dither of triangular density, two least significant bits wide in all (S. P. Lipshitz, R. A. Wannamaker and
    J. Vanderkooy, "Quantization and dither: a theoretical survey", JAES 40(5), 1992), is added to every sample that
    does not lie on the grid of codes already: so a copy of a take stays exact and silence stays silent. It is drawn
    from a generator with a fixed seed, in the order of the samples: equal input gives equal files, whatever the
    block.
    """

    def __init__(self, bits: int, seed: int = 0, dither: bool = True) -> None:
        self._bits, self._scale = bits, 2.0 ** (bits - 1)
        self._draw = np.random.Generator(np.random.PCG64(seed))
        self._dither = dither

    def codes(self, samples: NDArray[np.float64]) -> NDArray[np.int32]:
        """Codes of samples of magnitude up to 1, of the same shape; full scale itself becomes the largest code."""
        scaled = samples * self._scale
        if self._dither:
            drawn = self._draw.random((*samples.shape, 2))
            between = scaled != np.rint(scaled)
            scaled = np.where(between, scaled + drawn[..., 0] - drawn[..., 1], scaled)
        return np.clip(np.rint(scaled), -self._scale, self._scale - 1).astype(np.int32)


def check_range(samples: NDArray[np.float64], start: int, rate: int, bits: int, file: object) -> None:
    """InputError offering the ways out when a sample lies over full scale and would clip."""
    peak = float(np.max(np.abs(samples), initial=0.0))
    if peak <= 1.0:
        return
    row = int(np.argmax(np.max(np.abs(samples), axis=1) > 1.0))
    over = 20.0 * math.log10(float(np.max(np.abs(samples[row]))))
    raise InputError(
        f"the sample at {(start + row) / rate:.3f} s is {over:.1f} dB over full scale and would clip in {bits} bits",
        file=file,
        expected="write a 32-bit float .wav, or use --level peak",
    )


def packed(codes: NDArray[np.int32], bits: int) -> bytes:
    """Little-endian bytes of 16-bit or 24-bit codes, frame by frame."""
    if bits == 16:
        return codes.astype("<i2").tobytes()
    return np.ascontiguousarray(codes.astype("<i4")).view(np.uint8).reshape(-1, 4)[:, :3].tobytes()
