"""The group of all subcommands.

Exit codes: 0 quantised and no alarm; 1 an alarm, or no integer; 2 bad input.
"""

from __future__ import annotations

import click

from scatterpump.cli.audit import audit
from scatterpump.cli.common import BAD_INPUT
from scatterpump.cli.draw import draw
from scatterpump.cli.example import example
from scatterpump.cli.gather import gather
from scatterpump.cli.inspect import inspect
from scatterpump.cli.report import report
from scatterpump.cli.status import status
from scatterpump.cli.sweep import sweep
from scatterpump.cli.verdict import verdict
from scatterpump.cli.window import window
from scatterpump.errors import PumpError
from scatterpump.version import version

__all__ = ["main"]


class _Command(click.Group):
    """A group whose commands turn every `PumpError` into one line and exit code 2."""

    def invoke(self, ctx: click.Context) -> object:
        try:
            return super().invoke(ctx)
        except PumpError as error:
            click.echo(f"scatterpump: {error}", err=True)
            ctx.exit(BAD_INPUT)


@click.group(cls=_Command, context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(version(), message="%(version)s")
def main() -> None:
    """Say how many charges a quantum pump carries a cycle, whether that holds, and what breaks it.

    Single-particle theory: no interactions, no decoherence.
    """


for command in (verdict, audit, inspect, window, draw, report, sweep, status, gather, example):
    command.short_help = " ".join((command.help or "").split("\n\n")[0].split())  # whole: click would cut it short
    main.add_command(command)
