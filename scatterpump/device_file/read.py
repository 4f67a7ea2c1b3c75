"""A device file's content, and the description it stands for."""

from __future__ import annotations

import json
import tomllib
from collections.abc import Iterable
from functools import cache
from pathlib import Path
from typing import Any

from scatterpump.device_file.changes import apply_change
from scatterpump.device_file.cycles import read_cycle
from scatterpump.device_file.kinds import KINDS, USUAL, Description
from scatterpump.device_file.mistakes import choice, first_mistake
from scatterpump.errors import InputError

__all__ = ["load_device", "read_content", "read_device"]


def load_device(path: str | Path, changes: Iterable[str] = ()) -> Description:
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
        apply_change(content, change)
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


def read_device(content: dict[str, Any], *, folder: Path = Path("."), source: str = "device") -> Description:
    """Turn the content of a device file into the description it stands for."""
    from pydantic import ValidationError

    content = dict(content)
    kind = choice(content.pop("kind", USUAL), KINDS, f"{source}: kind")
    try:  # through JSON, whose strict mode still takes lists for tuples
        device: Description = _reader(kind).validate_json(
            json.dumps(content, default=lambda value: [str(value)]),
            strict=True,
            context={"cycle": lambda table: read_cycle(table, folder)},
        )
    except ValidationError as error:
        raise first_mistake(error, content, source=source, description=kind) from None
    located: Description = device.located(folder) if hasattr(device, "located") else device
    return located


@cache
def _reader(kind: type[Description]) -> Any:
    """Return pydantic's reader of a description, which takes it some ten milliseconds to put together."""
    from pydantic import TypeAdapter

    return TypeAdapter(kind)
