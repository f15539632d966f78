"""Takes, calibration, loudness, levels, resampling and files: everything about audio, nothing about circuits."""

from __future__ import annotations

from tackbench.audio.calibration import Calibration, choose_calibration
from tackbench.audio.take import Take, load_take, load_takes

__all__ = ["Calibration", "Take", "choose_calibration", "load_take", "load_takes"]
