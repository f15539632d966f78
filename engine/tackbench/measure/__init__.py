"""Numbers about a circuit, each with its unit: response, sines, headroom. No pictures, no verdicts."""

from tackbench.measure.headroom import Headroom, measure_headroom
from tackbench.measure.response import Corners, ThirdOctave, corners, frequencies, impedances, third_octaves
from tackbench.measure.sine import Sine, measure_sines

__all__ = [
    "Corners",
    "Headroom",
    "Sine",
    "ThirdOctave",
    "corners",
    "frequencies",
    "impedances",
    "measure_headroom",
    "measure_sines",
    "third_octaves",
]
