"""From a circuit to its equations: operating point, small-signal response, coefficient sets."""

from tackbench.network.operating_point import OperatingPoint, operating_point
from tackbench.network.small_signal import natural_frequencies, response

__all__ = ["OperatingPoint", "natural_frequencies", "operating_point", "response"]
