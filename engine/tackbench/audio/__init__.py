"""Takes, calibration, loudness, levels, resampling and files: everything about audio, nothing about circuits."""

from __future__ import annotations

from tackbench.audio.calibration import Calibration, choose_calibration
from tackbench.audio.files import WrittenAudio, audio_bytes, check_audio_output, write_audio
from tackbench.audio.levels import LevelMeter, Levels, measure_levels
from tackbench.audio.loudness import Loudness, LoudnessMeter, measure_loudness
from tackbench.audio.names import safe_name, safe_names
from tackbench.audio.place import check_folder, check_output, check_room, size_words, written_beside
from tackbench.audio.resample import Downsampler, Upsampler, base_factor
from tackbench.audio.scratch import ScratchAudio
from tackbench.audio.take import Take, load_take, load_takes

__all__ = [
    "Calibration",
    "Downsampler",
    "LevelMeter",
    "Levels",
    "Loudness",
    "LoudnessMeter",
    "ScratchAudio",
    "Take",
    "Upsampler",
    "WrittenAudio",
    "audio_bytes",
    "base_factor",
    "check_audio_output",
    "check_folder",
    "check_output",
    "check_room",
    "choose_calibration",
    "load_take",
    "load_takes",
    "measure_levels",
    "measure_loudness",
    "safe_name",
    "safe_names",
    "size_words",
    "write_audio",
    "written_beside",
]
