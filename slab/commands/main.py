"""The `daylayer` command: finds subcommands by name, loads only what is asked for, turns errors into one line."""

from __future__ import annotations

import os
from importlib import import_module
from importlib.util import find_spec
from typing import Any

import click

from forcing.errors import DaylayerError
from slab.commands.options import BAD_DATA, DONE, silence_stdout, write_example

COMMANDS = ("forecast", "sounding", "spray", "compare", "odds", "update", "score", "batch", "covers")
"""Subcommands in the order of the help page; each is the attribute `command` of slab.commands.<name>."""

EXAMPLE = """
daylayer sounding morning.csv
daylayer forecast --profile morning.csv --zone America/Chicago --cover "short grass"
"""


class LazyGroup(click.Group):
    """A group that imports a subcommand's module when it is named, and maps errors to messages and exit codes."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        """Names of the subcommands that are installed."""
        return [name for name in COMMANDS if find_spec(f"slab.commands.{name}") is not None]

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        """Import one subcommand, or None where there is none of that name."""
        if cmd_name not in self.list_commands(ctx):
            return None
        command = import_module(f"slab.commands.{cmd_name}").command
        assert isinstance(command, click.Command)
        return command

    def resolve_command(
        self, ctx: click.Context, args: list[str]
    ) -> tuple[str | None, click.Command | None, list[str]]:
        """Find the subcommand; an unknown name is answered with the nearest one."""
        name = str(args[0])
        if self.get_command(ctx, name) is None and not name.startswith("-"):
            from difflib import get_close_matches

            near = get_close_matches(name, self.list_commands(ctx), n=1)
            hint = f" Did you mean '{near[0]}'?" if near else ""
            raise click.UsageError(f"No such command '{name}'.{hint}", ctx)
        return super().resolve_command(ctx, args)

    def format_help(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        """Write examples first, then usage and the commands."""
        write_example(EXAMPLE, formatter)
        super().format_help(ctx, formatter)

    def invoke(self, ctx: click.Context) -> Any:
        """Run a subcommand; a known error becomes one line on stderr and exit code 1."""
        if os.environ.get("NO_COLOR"):
            ctx.color = False
        try:
            return super().invoke(ctx)
        except DaylayerError as error:
            message = str(error)
        except BrokenPipeError:
            silence_stdout()
            message = ""
        except OSError as error:
            message = f"{error.filename or 'file'}: {error.strerror or error}"
        if message:
            click.echo(f"error: {' '.join(message.split())}", err=True)
        return ctx.exit(BAD_DATA if message else DONE)


@click.group("daylayer", cls=LazyGroup, context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(package_name="daylayer", message="%(prog)s %(version)s")
def main() -> None:
    """From one morning balloon profile to the day that follows.

    Results are written to stdout, remarks to stderr. Exit codes: 0 done; 1 bad data, also in a scenario file, or no answer
    from it; 2 bad usage: a flag that is unknown, wrong or missing; 3 done with a doubt.
    """
