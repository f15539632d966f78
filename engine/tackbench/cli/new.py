"""The command ``new``: a commented stage file to start from."""

from __future__ import annotations

import click

from tackbench.cli.output import say


@click.command("new")
@click.argument("name", metavar="NAME")
def command(name: str) -> None:
    """Write a commented stage file to start from.

    The file NAME.toml holds a small sound stage that shows every table of the format, with what each line means. A
    file that is there already is never touched.
    """
    from tackbench.workbench.new_stage import write_new_stage

    place = write_new_stage(name)
    say(f"written: {place}")
    say(f"next: tackbench check --stage {place}")
