"""The group of commands: names and one-line help stand here, so that listing them imports no command."""

from __future__ import annotations

from importlib import import_module

import click

from tackbench import __version__
from tackbench.errors import nearest

COMMANDS: dict[str, tuple[str, str]] = {
    "demo": ("tackbench.cli.demo", "Shootout of the take that ships, told step by step."),
    "shootout": ("tackbench.cli.shootout", "Render a take through several variants at equal loudness."),
    "render": ("tackbench.cli.render", "Render a take through one variant into one file."),
    "check": ("tackbench.cli.check", "Say whether a stage is sound: voltages, current, gain."),
    "measure": ("tackbench.cli.measure", "Measure a stage: response, distortion, headroom."),
    "stages": ("tackbench.cli.stages", "List the stages that ship, or show one and its mods."),
    "parts": ("tackbench.cli.parts", "List the parts library, or show a part with its sources."),
    "new": ("tackbench.cli.new", "Write a commented stage file to start from."),
    "diode-from-meter": ("tackbench.cli.diode_from_meter", "Make a diode's model from your meter readings."),
    "transistor-from-meter": ("tackbench.cli.transistor_from_meter", "Make a transistor's model from two readings."),
    "jfet-from-meter": ("tackbench.cli.jfet_from_meter", "Make a JFET's model from two readings."),
    "mosfet-from-meter": ("tackbench.cli.mosfet_from_meter", "Make a MOSFET's model from one reading."),
}
"""Command name: the module that holds it as ``command``, and its short help."""


class LateGroup(click.Group):
    """A group whose commands are imported when they are used, and not when they are listed."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        if cmd_name not in COMMANDS:
            return None
        found: click.Command = import_module(COMMANDS[cmd_name][0]).command
        return found

    def resolve_command(
        self, ctx: click.Context, args: list[str]
    ) -> tuple[str | None, click.Command | None, list[str]]:
        if args and args[0] not in COMMANDS and not args[0].startswith("-"):
            raise click.UsageError(f"there is no command {args[0]!r}; {nearest(args[0], COMMANDS)}", ctx)
        return super().resolve_command(ctx, args)

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        with formatter.section("Commands"):
            formatter.write_dl([(name, short) for name, (_, short) in COMMANDS.items()])


@click.group(
    cls=LateGroup,
    invoke_without_command=True,
    context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100},
)
@click.version_option(__version__, message="tackbench %(version)s")
@click.pass_context
def group(ctx: click.Context) -> None:
    """Hear circuit changes of a guitar stage on your own dry take, before you solder.

    Start with `tackbench demo`, then `tackbench shootout YOUR-TAKE.wav`. A dry take is the guitar straight into the
    interface, with nothing in between.
    """
    if ctx.invoked_subcommand is None:
        click.echo(ctx.get_help())
