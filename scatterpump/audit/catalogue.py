"""The catalogue of checks as text: what each asks, why, when it speaks, and what to do."""

from __future__ import annotations

from textwrap import fill

from scatterpump.audit.check import WIDTH, Check
from scatterpump.audit.examine import CHECKS
from scatterpump.errors import InputError

__all__ = ["explain", "listed"]

LABEL = 26


def listed() -> str:
    """Return the names of all checks with the question that each asks."""
    lines = [
        fill(check.asks, WIDTH, initial_indent=f"{check.name:<{LABEL}}", subsequent_indent=" " * LABEL)
        for check in CHECKS
    ]
    return "\n".join([*lines, "", "'scatterpump audit --explain NAME' says more about one of them."])


def explain(name: str) -> str:
    """Return the catalogue's entry of a check.

    Parameters
    ----------
    name : str
        Its name, in any case and with blanks, hyphens or underscores; or a part of it that no other check has.

    Raises
    ------
    InputError
        If no check, or more than one, is called so.
    """
    wanted = _key(name)
    exact = [check for check in CHECKS if _key(check.name) == wanted]
    close = exact or [check for check in CHECKS if wanted and wanted in _key(check.name)]
    if len(close) != 1:
        problem = f"there is no check {name!r}" if not close else f"{name!r} is part of several checks' names"
        raise InputError(problem, allowed=_names(close or list(CHECKS)))
    return close[0].explained()


def _key(name: str) -> str:
    return " ".join(name.lower().replace("-", " ").replace("_", " ").split())


def _names(checks: list[Check]) -> str:
    return ", ".join(check.name for check in checks)
