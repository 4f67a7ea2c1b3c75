"""The command, run in this process."""

from __future__ import annotations

from click.testing import CliRunner, Result

from scatterpump.cli import main


def call(*arguments: object) -> Result:
    return CliRunner().invoke(main, [str(argument) for argument in arguments])
