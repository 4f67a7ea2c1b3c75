"""What is wrong with a device file, in the file's own words: pydantic's complaints as one `InputError`."""

from __future__ import annotations

import json
from collections.abc import Iterator
from dataclasses import fields, is_dataclass
from typing import Any, get_args, get_type_hints

from scatterpump.errors import InputError

__all__ = ["choice", "first_mistake", "is_about_unknown_key"]

LONGEST_SHOWN = 40
UNKNOWN_KEY = ("unexpected_keyword_argument", "extra_forbidden")
LISTS = "a list of tables, each headed by its name in double brackets"
WORDS = {
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
    "dict_type": ("{input} is no table", "a table of keys and values"),
    "tuple_type": ("{input} is no list", "a list"),
    "sequence_type": ("{input} is no list", LISTS),
    "list_type": ("{input} is no list", LISTS),
}


def choice(name: Any, among: dict[str, Any], where: str) -> Any:
    """Return the entry of `among` that `name` names."""
    if not isinstance(name, str) or name not in among:
        raise InputError(f"{name!r} is unknown", allowed=", ".join(map(repr, among)), where=where)
    return among[name]


def first_mistake(error: Any, content: Any, *, source: str = "", description: Any = None) -> InputError:
    """Turn the first complaint about `content` into ours; an unknown key comes first, as it explains a missing one."""
    errors = sorted(error.errors(), key=lambda e: not is_about_unknown_key(e))
    first = errors[0]
    keys = _keys(first, content)
    others = {_keys(other, content)[:2] for other in errors} - {keys[:2]}
    rest = f" (and {len(others)} more)" if others else ""
    where = ": ".join(filter(None, (source, ".".join(keys))))
    cause = first.get("ctx", {}).get("error")
    if isinstance(cause, InputError):
        return InputError(
            cause.problem + rest, allowed=cause.allowed, where=": ".join(filter(None, (where, cause.where)))
        )
    problem, allowed = WORDS.get(first["type"], ("{input} does not fit", first["msg"].removeprefix("Input should be ")))
    if is_about_unknown_key(first) and description is not None:
        allowed = ", ".join(_known_keys(description, keys[:-1]))
    if keys[-1:] == ("drain",):
        allowed += ', or "wall"'
    return InputError(problem.format(input=_shown(first["input"])) + rest, allowed=allowed, where=where)


def is_about_unknown_key(complaint: Any) -> bool:
    """Tell whether a complaint of pydantic's is about a key that nothing knows."""
    return complaint["type"] in UNKNOWN_KEY


def _keys(complaint: Any, content: Any) -> tuple[str, ...]:
    """Path to the place of a complaint in the file, without the names that pydantic gives the branches of a union."""
    keys, place = [], content
    for number, key in enumerate(complaint["loc"]):
        there = (isinstance(place, dict) and key in place) or (
            isinstance(place, list | tuple) and isinstance(key, int) and key < len(place)
        )
        is_missing = number == len(complaint["loc"]) - 1 and complaint["type"].startswith("missing")
        if there or is_missing:
            keys.append(str(key))
        if there:
            place = place[key]
    return tuple(keys)


def _known_keys(description: Any, path: tuple[str, ...]) -> list[str]:
    """Names of the fields that the table at `path` has."""
    place = description
    for key in path:
        if not key.isdigit():
            place = next(_dataclasses(get_type_hints(place)[key]), place)
    return [field.name for field in fields(place) if field.init]


def _dataclasses(hint: Any) -> Iterator[Any]:
    """The dataclasses among the parts of an annotation."""
    if is_dataclass(hint):
        yield hint
    for part in get_args(hint):
        yield from _dataclasses(part)


def _shown(value: Any) -> str:
    """The value as it stands in the file, shortened."""
    try:
        text = json.dumps(value, ensure_ascii=False)
    except (TypeError, ValueError):
        text = str(value)
    return text if len(text) <= LONGEST_SHOWN else text[:LONGEST_SHOWN] + "..."
