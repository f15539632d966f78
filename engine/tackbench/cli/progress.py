"""The progress bar on stderr, silent where stderr is no terminal, and the word about the first compiling."""

from __future__ import annotations

import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager

import click

from tackbench.cli.output import tell

_STEPS = 1000


@contextmanager
def progress_bar(label: str) -> Iterator[Callable[[float], None]]:
    """Give a function that is told the share of the work that is done, 0 to 1, and draws it."""
    with click.progressbar(length=_STEPS, label=label, file=sys.stderr, hidden=not sys.stderr.isatty()) as bar:

        def report(share: float) -> None:
            bar.update(max(0, round(share * _STEPS) - bar.pos))

        yield report


def compile_kernels() -> None:
    """Make the compiled kernels ready, and say so when it takes time because they never were."""
    from tackbench.render import kernels_are_cached, warm_up

    if kernels_are_cached():
        warm_up()
        return
    tell("first run: compiling the numerical kernels, once (a few seconds) ...")
    tell(f"compiled in {warm_up():.1f} s and kept for later runs")
