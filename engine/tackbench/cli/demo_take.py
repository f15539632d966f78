"""The take that ships: where it is, and its calibration."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from importlib import resources
from importlib.resources.abc import Traversable
from pathlib import Path

from tackbench.errors import WorkError

FULL_SCALE_VOLTS = 0.7
"""Volts of a full-scale sample of the shipped take, as its scenario states them."""

LOUDEST_VOLTS = 0.5
"""What the take's hardest chord then reaches."""


def _shipped() -> Traversable:
    """The take inside the installed package, or in ``demo_audio`` of a checkout. ``WorkError`` when in neither."""
    installed = resources.files("tackbench") / "demo_audio" / "take.wav"
    if installed.is_file():
        return installed
    checkout = Path(__file__).resolve().parents[3] / "demo_audio" / "take.wav"
    if checkout.is_file():
        return checkout
    raise WorkError(f"the shipped take was found neither at {installed} nor at {checkout}; install again")


@contextmanager
def demo_take() -> Iterator[Path]:
    """The shipped take as a file on disk, for as long as the block runs."""
    with resources.as_file(_shipped()) as path:
        yield path
