"""Plan files: a device file with a table ``[sweep]``, or the JSON of a plan that ran before.

    [sweep]
    keep = ["integer", "proven", "gap"]
    device = "superlattice.toml"     # or the device's keys in this file

    [[sweep.axis]]
    key = "fermi_level"
    from = -2.0
    to = 2.0
    points = 41

An axis has ``key`` (or a list of them, which are linked) and either ``values``, or ``from``, ``to`` and ``points``
(with ``spacing = "log"`` if wanted), or ``seeds``, a number of samples.
"""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

from scatterpump.device_file import read_content
from scatterpump.errors import InputError, PumpError
from scatterpump.sweep.axis import Axis
from scatterpump.sweep.plan import SweepPlan
from scatterpump.sweep.point import Bisection
from scatterpump.sweep.worker import maker_of

__all__ = ["load_plan"]

LARGEST_FILE = 10_000_000
PLAN_KEYS = ("axis", "keep", "device", "phases", "engine", "lost", "expected")
AXIS_KEYS = ("key", "values", "from", "to", "points", "spacing", "seeds", "first", "name", "unit")
LOST_KEYS = ("key", "from", "to", "accuracy")


def load_plan(path: str | Path) -> SweepPlan:
    """Read a plan from a TOML file, or from JSON that `SweepPlan.to_json` wrote.

    Raises
    ------
    InputError
        On anything that cannot be used, with file, key, and what is allowed.
    """
    path = Path(path)
    try:
        plan = _from_json(path) if path.suffix == ".json" else _from_toml(path)
        _try(plan)
    except InputError as error:
        where = error.where if error.where.startswith(str(path.parent)) and error.where else f"{path}: {error.where}"
        raise InputError(error.problem, allowed=error.allowed, where=where.rstrip(": ")) from error
    return plan


def _from_json(path: Path) -> SweepPlan:
    try:
        data = json.loads(path.read_text(encoding="utf-8"))
        return SweepPlan.from_dict(data)
    except OSError as error:
        raise InputError(f"the plan cannot be read: {error.strerror}", allowed="a readable file") from error
    except PumpError:
        raise
    except (ValueError, KeyError, TypeError, AttributeError, RecursionError) as error:
        raise InputError("this is no plan", allowed="a TOML plan, or plan.json of a folder of results") from error


def _from_toml(path: Path) -> SweepPlan:
    content = read_content(path)
    table = content.pop("sweep", None)
    _only(table, PLAN_KEYS, "sweep")
    if "axis" not in table:
        raise InputError("there is no axis", allowed="at least one table [[sweep.axis]]", where="sweep")
    folder = path.parent
    if "device" in table:
        if content:
            raise InputError(
                f"the device is in another file, so {next(iter(content))!r} means nothing here",
                allowed="the table [sweep] alone, or the device's keys in this file",
                where="sweep.device",
            )
        other = folder / _text(table["device"], "sweep.device")
        content, folder = read_content(other), other.parent
    axes = table["axis"] if isinstance(table["axis"], list) else [table["axis"]]
    files: dict[str, str] = {}
    options: dict[str, Any] = {key: table[key] for key in ("phases", "engine", "expected") if key in table}
    if "keep" in table:
        options["keep"] = tuple(_list(table["keep"], "sweep.keep"))
    return SweepPlan(
        _with_files(content, folder, files),
        [_axis(_with_files(axis, folder, files), f"sweep.axis.{i}") for i, axis in enumerate(axes)],
        files=files,
        bisection=_bisection(table["lost"]) if "lost" in table else None,
        **options,
    )


def _axis(table: Any, where: str) -> Axis:
    _only(table, AXIS_KEYS, where)
    ways = [way for way in (("values",), ("from", "to", "points"), ("seeds",)) if way[0] in table]
    if len(ways) != 1 or "key" not in table and ways != [("seeds",)]:
        raise InputError(
            "the axis does not say what it changes, or to what",
            allowed="key, and one of: values; from, to and points; seeds",
            where=where,
        )
    missing = [part for part in ways[0] if part not in table]
    if missing:
        raise InputError("this key is missing", allowed="a value for it", where=f"{where}.{missing[0]}")
    labels: dict[str, Any] = {part: _text(table[part], f"{where}.{part}") for part in ("name", "unit") if part in table}
    key = table.get("key", "disorder.seed")
    try:
        if "seeds" in table:
            name = {"name": labels["name"]} if "name" in labels else {}
            return Axis.seeds(table["seeds"], key, first=table.get("first", 0), **name)
        if "values" in table:
            return Axis(key, table["values"], **labels)
        spacing = table.get("spacing", "linear")
        return Axis.even(key, table["from"], table["to"], table["points"], spacing=spacing, **labels)
    except InputError as error:
        raise InputError(error.problem, allowed=error.allowed, where=where) from error


def _bisection(table: Any) -> Bisection:
    _only(table, LOST_KEYS, "sweep.lost")
    for key in LOST_KEYS:
        if key not in table:
            raise InputError("this key is missing", allowed="a value for it", where=f"sweep.lost.{key}")
    key = _text(table["key"], "sweep.lost.key")
    return Bisection(key, table["from"], table["to"], table["accuracy"])


def _only(table: Any, keys: tuple[str, ...], where: str) -> None:
    if not isinstance(table, dict):
        raise InputError("this table is missing", allowed=", ".join(keys), where=where)
    for key in table:
        if key not in keys:
            raise InputError("this key is unknown", allowed=", ".join(keys), where=f"{where}.{key}")


def _text(value: Any, where: str) -> str:
    if not isinstance(value, str):
        raise InputError(f"{value!r} is no text", allowed="text in quotes", where=where)
    return value


def _list(value: Any, where: str) -> list[Any]:
    if not isinstance(value, list):
        raise InputError(f"{value!r} is no list", allowed="a list", where=where)
    return value


def _with_files(value: Any, folder: Path, files: dict[str, str]) -> Any:
    """Take the text of every file that is named anywhere in `value` into `files`, under a name without folders."""
    if isinstance(value, dict):
        return {key: _with_files(part, folder, files) for key, part in value.items()}
    if isinstance(value, list):
        return [_with_files(part, folder, files) for part in value]
    if not isinstance(value, str) or not Path(value).suffix or not (folder / value).is_file():
        return value
    path = folder / value
    try:
        text = path.read_text(encoding="utf-8") if path.stat().st_size < LARGEST_FILE else None
    except (OSError, UnicodeDecodeError):
        text = None
    if text is None:
        raise InputError("a plan cannot take this file along", allowed="text of less than 10 MB", where=str(path))
    name = path.name
    while files.get(name, text) != text:
        name = f"other_{name}"
    files[name] = text
    return name


def _try(plan: SweepPlan) -> None:
    """Make the devices at the two ends of every axis, so that a misspelt key is found before a million points fail."""
    make = maker_of(plan)
    first = plan.changes(0)
    for axis in plan.axes:
        for place in (0, len(axis) - 1):
            make({**first, **axis.changes(place)})
    if plan.bisection is not None:
        for value in (plan.bisection.first, plan.bisection.last):
            make({**first, plan.bisection.key: value})
