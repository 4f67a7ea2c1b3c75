"""The command ``scatterpump``, one file for each of its subcommands."""

from scatterpump.cli.main import main

__all__ = ["main"]
