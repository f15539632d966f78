"""The edge between the commands and the shell: every way a run can end becomes one sentence and an exit status."""

from __future__ import annotations

import os
import signal
import sys
from collections.abc import Sequence
from typing import NoReturn

import click

from tackbench.cli.output import make_output_safe, tell
from tackbench.cli.registry import group
from tackbench.errors import TackbenchError

INTERRUPTED = 130
"""The exit status after Ctrl-C: 128 plus the number of the interrupt signal, as shells have it."""


def main() -> NoReturn:
    """Run the command line of this process and exit with its status."""
    signal.signal(signal.SIGTERM, _terminated)
    sys.exit(run())


def _terminated(number: int, frame: object) -> NoReturn:
    """Asked to end: unwind, so that unfinished files go, and exit as shells expect after this signal."""
    raise SystemExit(128 + number)


def run(arguments: Sequence[str] | None = None) -> int:
    """Run one command line; the exit status: 0 done, 1 work failed, 2 bad input or usage, 130 interrupted."""
    make_output_safe()
    try:
        outcome = group.main(args=arguments, prog_name="tackbench", standalone_mode=False)
        sys.stdout.flush()
    except BaseException as trouble:
        return _status(trouble)
    return outcome if isinstance(outcome, int) else 0


def _status(trouble: BaseException) -> int:
    """Say what ended the run, in one sentence, and give its exit status."""
    if isinstance(trouble, (KeyboardInterrupt, click.Abort)):
        tell("tackbench: interrupted; nothing was left behind")
        return INTERRUPTED
    if isinstance(trouble, BrokenPipeError):
        return _reader_left()
    if isinstance(trouble, SystemExit):
        return trouble.code if isinstance(trouble.code, int) else 1
    if not isinstance(trouble, Exception):
        raise trouble
    if os.environ.get("TACKBENCH_TRACEBACK"):
        _print_traceback(trouble)
    tell(f"tackbench: {_sentence(trouble)}")
    return _exit_status(trouble)


def _exit_status(trouble: Exception) -> int:
    if isinstance(trouble, TackbenchError):
        return trouble.exit_status
    if isinstance(trouble, click.ClickException):
        return trouble.exit_code
    return 1


def _sentence(trouble: Exception) -> str:
    """What went wrong, in one line."""
    if isinstance(trouble, TackbenchError):
        return " ".join(str(trouble).split())
    if isinstance(trouble, click.ClickException):
        return _usage_sentence(trouble)
    if isinstance(trouble, MemoryError):
        return "this machine's memory does not suffice for the work; close other programs or use fewer --threads"
    if isinstance(trouble, OSError) and trouble.strerror:
        where = f"{trouble.filename}: " if trouble.filename else ""
        return f"{where}the system refused: {trouble.strerror}"
    return f"unexpected fault, please report it: {type(trouble).__name__}: {' '.join(str(trouble).split())}"


def _usage_sentence(trouble: click.ClickException) -> str:
    text = " ".join(trouble.format_message().split())
    context = getattr(trouble, "ctx", None)
    if context is None:
        return text
    return f"{text.rstrip('.')} (see `{context.command_path} --help`)"


def _print_traceback(trouble: Exception) -> None:
    """For those who mend tackbench: the whole traceback, asked for by setting TACKBENCH_TRACEBACK."""
    import traceback

    traceback.print_exception(trouble)


def _reader_left() -> int:
    """The reader of our output (a pager, `head`) closed it: end quietly, without a second error at exit."""
    silence = os.open(os.devnull, os.O_WRONLY)
    try:
        os.dup2(silence, sys.stdout.fileno())
    except (OSError, ValueError, AttributeError):
        sys.stdout = open(os.devnull, "w")  # noqa: SIM115 - lives until the process ends
    return 1
