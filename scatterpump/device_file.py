"""Device files: TOML to a description, and every mistake in one to a single line.

A device file has the fields of the description it stands for under the same names; ``kind`` says which ("chain").
The table ``[cycle]`` names one of the constructors of `Cycle` in its own ``kind`` and gives that constructor's
arguments; a table's file is looked for next to the device file.
"""

from __future__ import annotations

import json
import tomllib
from collections.abc import Callable, Iterable
from dataclasses import fields
from functools import cache
from inspect import signature
from pathlib import Path
from typing import Any

from scatterpump.builder.chain import ModulatedChain
from scatterpump.builder.description import Disorder, Lead, Wave
from scatterpump.cycle import Cycle
from scatterpump.errors import InputError

__all__ = ["load_device", "put", "read_content", "read_device"]

KINDS: dict[str, type[ModulatedChain]] = {"chain": ModulatedChain}
CYCLES: dict[str, Callable[..., Cycle]] = {"angle": Cycle.angle, "ellipse": Cycle.ellipse, "table": Cycle.through}


def load_device(path: str | Path, changes: Iterable[str] = ()) -> ModulatedChain:
    """Read a device file.

    Parameters
    ----------
    path : path
        The TOML file.
    changes : iterable of "key=value"
        Overrides; keys are dotted, list positions are numbers ("onsite.0.amplitude=2"), values as in TOML.

    Raises
    ------
    InputError
        On anything that cannot be used, with file, key, and what is allowed.
    """
    path = Path(path)
    content = read_content(path)
    for change in changes:
        _apply(content, change)
    return read_device(content, folder=path.parent, source=str(path))


def read_content(path: Path) -> dict[str, Any]:
    """Return what stands in a TOML file, and say in one line why it cannot be used if it cannot."""
    try:
        return tomllib.loads(path.read_text(encoding="utf-8"))
    except (OSError, UnicodeDecodeError) as error:
        reason = getattr(error, "strerror", None) or "it is not UTF-8 text"
        raise InputError(
            f"the device file cannot be read: {reason}",
            allowed="a readable TOML file; 'scatterpump example' lists devices to start from",
            where=str(path),
        ) from error
    except tomllib.TOMLDecodeError as error:
        raise InputError(f"the file is not valid TOML: {error}", allowed="TOML 1.0", where=str(path)) from error
    except (ValueError, RecursionError) as error:
        raise InputError(
            "the file is no usable TOML: a number of thousands of digits, or lists nested without end",
            allowed="the values of a device",
            where=str(path),
        ) from error


def read_device(content: dict[str, Any], *, folder: Path = Path("."), source: str = "device") -> ModulatedChain:
    """Turn the content of a device file into the description it stands for."""
    from pydantic import ValidationError

    content = {"cycle": {"kind": "angle"}, **content}
    description = _choice(content.pop("kind", "chain"), KINDS, f"{source}: kind")
    try:  # through JSON, whose strict mode still takes lists for tuples
        device: ModulatedChain = _reader(description).validate_json(
            json.dumps(content, default=lambda value: [str(value)]),
            strict=True,
            context={"cycle": lambda table: _cycle(table, folder)},
        )
        return device
    except ValidationError as error:
        raise _first_mistake(error, source) from None


@cache
def _reader(description: type[ModulatedChain]) -> Any:
    """Return pydantic's reader of a description, which takes it some ten milliseconds to put together."""
    from pydantic import TypeAdapter

    return TypeAdapter(description)


def _choice(name: Any, among: dict[str, Any], where: str) -> Any:
    if not isinstance(name, str) or name not in among:
        raise InputError(f"{name!r} is unknown", allowed=", ".join(map(repr, among)), where=where)
    return among[name]


def _first_mistake(error: Any, source: str) -> InputError:
    """Turn the first of pydantic's complaints into ours; an unknown key comes first, as it explains a missing one."""
    errors = sorted(error.errors(), key=lambda e: e["type"] not in _UNKNOWN_KEY)
    first = errors[0]
    keys = _keys(first)
    others = {_keys(other)[:2] for other in errors} - {keys[:2]}
    rest = f" (and {len(others)} more)" if others else ""
    where = ": ".join(part for part in (source, ".".join(keys)) if part)
    cause = first.get("ctx", {}).get("error")
    if isinstance(cause, InputError):
        return InputError(
            cause.problem + rest, allowed=cause.allowed, where=": ".join(filter(None, (where, cause.where)))
        )
    problem, allowed = _WORDS.get(
        first["type"], ("{input} does not fit", first["msg"].removeprefix("Input should be "))
    )
    if first["type"] in _UNKNOWN_KEY:
        allowed = ", ".join(f.name for f in fields(_PARTS.get(keys[0] if len(keys) > 1 else "", ModulatedChain)))
    if keys[-1:] == ("drain",):
        allowed += ', or "wall"'
    return InputError(problem.format(input=_shown(first["input"])) + rest, allowed=allowed, where=where)


def _keys(error: Any) -> tuple[str, ...]:
    """Path to the place of a complaint, without the names that pydantic gives the branches of a union."""
    return tuple(str(key) for key in error["loc"] if key not in _UNION_TAGS)


def _shown(value: Any) -> str:
    """The value as it stands in the file, shortened."""
    try:
        text = json.dumps(value, ensure_ascii=False)
    except (TypeError, ValueError):
        text = str(value)
    return text if len(text) <= LONGEST_SHOWN else text[:LONGEST_SHOWN] + "..."


_UNKNOWN_KEY = ("unexpected_keyword_argument", "extra_forbidden")
_PARTS: dict[str, type[Any]] = {"probe": Lead, "drain": Lead, "onsite": Wave, "bonds": Wave, "disorder": Disorder}
LONGEST_SHOWN = 40
_UNION_TAGS = {"Lead", "float", "str", "literal['wall']"}
_WORDS = {
    "unexpected_keyword_argument": ("this key is unknown", ""),
    "extra_forbidden": ("this key is unknown", ""),
    "missing": ("this key is missing", "a value for it"),
    "missing_argument": ("this key is missing", "a value for it"),
    "missing_keyword_only_argument": ("this key is missing", "a value for it"),
    "int_parsing_size": ("{input} is too large", "a whole number of a reasonable size"),
    "int_type": ("{input} is no whole number", "a whole number"),
    "int_from_float": ("{input} is no whole number", "a whole number"),
    "float_type": ("{input} is no number", "a number"),
    "string_type": ("{input} is no text", "text in quotes"),
    "dataclass_type": ("{input} is no table", "a table of keys and values"),
    "tuple_type": ("{input} is no list", "a list"),
    "sequence_type": ("{input} is no list", "a list of tables, each headed by its name in double brackets"),
    "list_type": ("{input} is no list", "a list of tables, each headed by its name in double brackets"),
}


def _cycle(table: Any, folder: Path) -> Cycle:
    """Read the table [cycle]: a constructor's name and arguments, then what is done to the path."""
    if not isinstance(table, dict):
        raise InputError(f"{table!r} is no table", allowed="a table [cycle] with its kind")
    table = dict(table)
    if "kind" not in table:
        raise InputError("this key is missing", allowed=", ".join(map(repr, CYCLES)), where="kind")
    make = _choice(table.pop("kind"), CYCLES, "kind")
    changes = {key: table.pop(key) for key in ("reversed", "repeated", "started_at") if key in table}
    if make == Cycle.through and isinstance(table.get("table"), str):
        table["table"] = folder / table["table"]
    cycle = _called(make, table)
    if "reversed" in changes and not isinstance(changes["reversed"], bool):
        raise InputError(
            f"{changes['reversed']!r} is neither true nor false", allowed="true or false", where="reversed"
        )
    if changes.get("reversed"):
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
        mistake = _first_mistake(error, "")
        unknown = error.errors()[0]["type"] in _UNKNOWN_KEY
        allowed = ", ".join(("kind", *signature(function).parameters)) if unknown else mistake.allowed
        raise InputError(mistake.problem, allowed=allowed, where=key or mistake.where) from None
    except InputError as error:
        raise InputError(error.problem, allowed=error.allowed, where=error.where or key) from error


def _apply(content: dict[str, Any], change: str) -> None:
    """Set one dotted key to a value given as "key=value"."""
    key, equals, text = change.partition("=")
    if not equals or not key.strip():
        raise InputError(
            f"{change!r} sets nothing", allowed="key=value, such as sites=120 or probe.contact=0.1", where="--set"
        )
    try:
        value = tomllib.loads(f"value = {text}")["value"]
    except tomllib.TOMLDecodeError:
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
