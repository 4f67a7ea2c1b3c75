"""The table [cycle] of a device file: a constructor of `Cycle` by name, its arguments, and what is done to the path."""

from __future__ import annotations

from collections.abc import Callable
from inspect import signature
from pathlib import Path
from typing import Any

from scatterpump.cycle import Cycle
from scatterpump.device_file.mistakes import choice, first_mistake, is_about_unknown_key
from scatterpump.errors import InputError

__all__ = ["CYCLES", "read_cycle"]

CYCLES: dict[str, Callable[..., Cycle]] = {"angle": Cycle.angle, "ellipse": Cycle.ellipse, "table": Cycle.through}
CHANGES = ("reversed", "repeated", "started_at")


def read_cycle(table: Any, folder: Path) -> Cycle:
    """Return the cycle that a table describes; a file of points is looked for in `folder`."""
    if not isinstance(table, dict):
        raise InputError(f"{table!r} is no table", allowed="a table [cycle] with its kind")
    table = dict(table)
    if "kind" not in table:
        raise InputError("this key is missing", allowed=", ".join(map(repr, CYCLES)), where="kind")
    make = choice(table.pop("kind"), CYCLES, "kind")
    changes = {key: table.pop(key) for key in CHANGES if key in table}
    if make == Cycle.through and isinstance(table.get("table"), str):
        table["table"] = folder / table["table"]
    return _changed(_called(make, table), changes)


def _changed(cycle: Cycle, changes: dict[str, Any]) -> Cycle:
    backwards = changes.get("reversed", False)
    if not isinstance(backwards, bool):
        raise InputError(f"{backwards!r} is neither true nor false", allowed="true or false", where="reversed")
    if backwards:
        cycle = cycle.reversed()
    if "repeated" in changes:
        cycle = _called(cycle.repeated, {"times": changes["repeated"]}, key="repeated")
    if "started_at" in changes:
        cycle = _called(cycle.started_at, {"start": changes["started_at"]}, key="started_at")
    return cycle


def _called(function: Callable[..., Cycle], arguments: dict[str, Any], key: str = "") -> Cycle:
    """Call a method of `Cycle`, its arguments checked against its signature; `key` is the file's word for one."""
    from pydantic import ValidationError, validate_call

    frozen = {key: tuple(value) if isinstance(value, list) else value for key, value in arguments.items()}
    try:
        cycle: Cycle = validate_call(config={"strict": True})(function)(**frozen)
        return cycle
    except ValidationError as error:
        mistake = first_mistake(error, frozen)
        unknown = is_about_unknown_key(error.errors()[0])
        allowed = ", ".join(("kind", *signature(function).parameters)) if unknown else mistake.allowed
        raise InputError(mistake.problem, allowed=allowed, where=key or mistake.where) from None
    except InputError as error:
        raise InputError(error.problem, allowed=error.allowed, where=error.where or key) from error
