"""The command line: a thin group of lazily imported commands."""

from tackbench.cli.edge import main

__all__ = ["main"]
