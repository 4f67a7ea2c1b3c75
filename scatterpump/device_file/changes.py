"""Changes to the content of a device file: dotted keys set to new values, as ``--set`` does."""

from __future__ import annotations

import tomllib
from typing import Any

from scatterpump.errors import InputError

__all__ = ["apply_change", "put"]


def apply_change(content: dict[str, Any], change: str) -> None:
    """Set one dotted key of `content` to a value, given as "key=value"."""
    key, equals, text = change.partition("=")
    if not equals or not key.strip():
        raise InputError(
            f"{change!r} sets nothing", allowed="key=value, such as sites=120 or probe.contact=0.1", where="--set"
        )
    try:
        value = tomllib.loads(f"value = {text}")["value"]
    except (ValueError, RecursionError):  # no TOML, or a number of thousands of digits: taken as plain text
        value = text
    put(content, key.strip(), value, where="--set")


def put(content: dict[str, Any], key: str, value: Any, *, where: str) -> None:
    """Set one dotted key of a device file's content; `where` is what an error message names as its place."""
    *path, last = key.split(".")
    place: Any = content
    for part in path:
        place = place.setdefault(part, {}) if isinstance(place, dict) else _item(place, part, key, where)
    if isinstance(place, dict):
        place[last] = value
    else:
        _item(place, last, key, where)
        place[int(last)] = value


def _item(place: Any, part: str, key: str, where: str) -> Any:
    """Return the entry of a list that a part of a dotted key names."""
    if not isinstance(place, list):
        raise InputError(
            f"what comes before {part!r} in {key!r} has no parts",
            allowed="keys of tables, numbers of lists",
            where=where,
        )
    if not (part.isascii() and part.isdigit()) or int(part) >= len(place):
        raise InputError(
            f"there is no {part!r} in {key!r}",
            where=where,
            allowed=f"one of {len(place)} entries, counted from 0" if place else "nothing, the list is empty",
        )
    return place[int(part)]
