"""Which version of scatterpump this is."""

from __future__ import annotations

from importlib.metadata import version as _version

__all__ = ["version"]


def version() -> str:
    """Return the installed version."""
    return _version("scatterpump")
