"""Device files: TOML to a description, and every mistake in one to a single line.

A device file has the fields of the description it stands for under the same names; ``kind`` says which ("chain").  The table
``[cycle]`` names one of the constructors of `Cycle` in its own ``kind`` and gives that constructor's arguments; a table's file is
looked for next to the device file.
"""

from __future__ import annotations

import json
import tomllib
from collections.abc import Callable, Iterable
from pathlib import Path
from typing import Any

from scatterpump.builder.chain import ModulatedChain
from scatterpump.cycle import Cycle
from scatterpump.errors import InputError

__all__ = ["load_device", "read_device"]

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
    try:
        content = tomllib.loads(path.read_text(encoding="utf-8"))
    except (OSError, UnicodeDecodeError) as error:
        reason = getattr(error, "strerror", None) or "it is not UTF-8 text"
        raise InputError(f"the device file cannot be read: {reason}", allowed="a readable TOML file; "
                         "'scatterpump example' lists devices to start from", where=str(path)) from error
    except ValueError as error:  # invalid TOML, or a number of thousands of digits
        raise InputError(f"the file is not valid TOML: {error}", allowed="TOML 1.0", where=str(path)) from error
    for change in changes:
        _apply(content, change)
    return read_device(content, folder=path.parent, source=str(path))


def read_device(content: dict[str, Any], *, folder: Path = Path("."), source: str = "device") -> ModulatedChain:
    """Turn the content of a device file into the description it stands for."""
    from pydantic import TypeAdapter, ValidationError

    content = {"cycle": {"kind": "angle"}, **content}
    description = _choice(content.pop("kind", "chain"), KINDS, f"{source}: kind")
    try:  # through JSON, whose strict mode still takes lists for tuples
        device: ModulatedChain = TypeAdapter(description).validate_json(
            json.dumps(content, default=str), strict=True, context={"cycle": lambda table: _cycle(table, folder)}
        )
        return device
    except ValidationError as error:
        raise _first_mistake(error, source) from None


def _choice(name: Any, among: dict[str, Any], where: str) -> Any:
    if not isinstance(name, str) or name not in among:
        raise InputError(f"{name!r} is unknown", allowed=", ".join(map(repr, among)), where=where)
    return among[name]


def _first_mistake(error: Any, source: str) -> InputError:
    first, *more = error.errors()
    keys = ".".join(str(key) for key in first["loc"] if key not in _UNION_TAGS)
    rest = f" (and {len(more)} more)" if more else ""
    cause = first.get("ctx", {}).get("error")
    if isinstance(cause, InputError):
        where = ": ".join(part for part in (source, keys, cause.where) if part)
        return InputError(cause.problem + rest, allowed=cause.allowed, where=where)
    otherwise = first["msg"].removeprefix("Input should be ").removeprefix("Value should be ")
    problem, allowed = _WORDS.get(first["type"], ("{input} does not fit", otherwise))
    return InputError(problem.format(input=_shown(first["input"])) + rest, allowed=allowed,
                      where=": ".join(part for part in (source, keys) if part))


def _shown(value: Any) -> str:
    text = repr(value)
    return text if len(text) <= LONGEST_SHOWN else text[:LONGEST_SHOWN] + "..."


LONGEST_SHOWN = 40
_UNION_TAGS = {"Lead", "float", "str", "literal['wall']"}
_WORDS = {
    "unexpected_keyword_argument": ("this key is unknown", "the keys of the description; 'scatterpump example' shows them"),
    "extra_forbidden": ("this key is unknown", "the keys of the description; 'scatterpump example' shows them"),
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
}


def _cycle(table: Any, folder: Path) -> Cycle:
    """Read the table [cycle]: a constructor's name and arguments, then what is done to the path."""
    if not isinstance(table, dict):
        raise InputError(f"{table!r} is no table", allowed="a table [cycle] with its kind")
    table = dict(table)
    make = _choice(table.pop("kind", None), CYCLES, "kind")
    changes = {key: table.pop(key) for key in ("reversed", "repeated", "started_at") if key in table}
    if make == Cycle.through and isinstance(table.get("table"), str):
        table["table"] = folder / table["table"]
    cycle = _called(make, table)
    if "reversed" in changes and not isinstance(changes["reversed"], bool):
        raise InputError(f"{changes['reversed']!r} is neither true nor false", allowed="true or false", where="reversed")
    if changes.get("reversed"):
        cycle = cycle.reversed()
    if "repeated" in changes:
        cycle = _called(cycle.repeated, {"times": changes["repeated"]})
    return _called(cycle.started_at, {"start": changes["started_at"]}) if "started_at" in changes else cycle


def _called(function: Callable[..., Cycle], arguments: dict[str, Any]) -> Cycle:
    """Call a constructor of `Cycle` with arguments checked against its own signature."""
    from pydantic import ValidationError, validate_call

    frozen = {key: tuple(value) if isinstance(value, list) else value for key, value in arguments.items()}
    try:
        cycle: Cycle = validate_call(config={"strict": True})(function)(**frozen)
        return cycle
    except ValidationError as error:
        raise _first_mistake(error, "") from None


def _apply(content: dict[str, Any], change: str) -> None:
    """Set one dotted key to a value given as "key=value"."""
    key, equals, text = change.partition("=")
    if not equals or not key.strip():
        raise InputError(f"{change!r} sets nothing", allowed="key=value, such as sites=120 or probe.contact=0.1",
                         where="--set")
    try:
        value = tomllib.loads(f"value = {text}")["value"]
    except tomllib.TOMLDecodeError:
        value = text
    *path, last = key.strip().split(".")
    place: Any = content
    for part in path:
        place = place.setdefault(part, {}) if isinstance(place, dict) else _item(place, part, key)
    if isinstance(place, dict):
        place[last] = value
    else:
        _item(place, last, key)
        place[int(last)] = value


def _item(place: Any, part: str, key: str) -> Any:
    if not isinstance(place, list) or not (part.isascii() and part.isdigit()) or int(part) >= len(place):
        size = f"0 to {len(place) - 1}" if isinstance(place, list) else "a key of a table"
        raise InputError(f"there is no {part!r} in {key!r}", allowed=size, where="--set")
    return place[int(part)]
