"""The plan of a sweep, as data: a device, axes over its keys, and what to keep of every point.

A plan travels as JSON, with the files that its device names inside it, so that any machine can run it again.  Only
where a Python function makes the pumps does the function have to be brought along.
"""

from __future__ import annotations

import hashlib
import json
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from functools import cached_property
from inspect import getsource
from math import prod
from typing import Any

import numpy as np

from scatterpump.errors import InputError
from scatterpump.pump import Pump
from scatterpump.sweep.axis import Axis
from scatterpump.sweep.point import Bisection, Engine
from scatterpump.sweep.quantities import columns_of

__all__ = ["SweepPlan", "absent", "fingerprint", "flattened"]

FORMAT = 1
MOST_POINTS = 1_000_000_000
MOST_PHASES = 100_000
RESERVED = {"status", "seconds", "quantile", "samples", "point"}
DEFAULT_KEEP = ("integer", "proven", "leak")


@dataclass(frozen=True)
class SweepPlan:
    """A map to compute: every combination of the entries of all axes.

    Parameters
    ----------
    device : dict or callable
        The content of a device file; or a function that returns a `Pump` and takes the axes' keys as arguments.
    axes : sequence of Axis
        The last one runs fastest in the numbering of points.
    keep : sequence of str
        Quantities to keep, by their names in `scatterpump.sweep.quantities.QUANTITIES`.
    phases : int
        Number of even phases at which r is sampled, for "sampled" and "reflection".
    engine : "auto", "layered" or "direct"
        Which solver samples r.
    bisection : Bisection, optional
        Where to look for the loss of the integer; needed to keep "lost".
    expected : int, optional
        The integer that counts as quantised in an ensemble; by default any proven one.
    files : dict
        Text of each file that the device names.

    Raises
    ------
    InputError
        If something is out of range, two axes change the same key, or the device cannot be made at the first points.
    """

    device: Mapping[str, Any] | Callable[..., Pump]
    axes: Sequence[Axis]
    keep: Sequence[str] = DEFAULT_KEEP
    phases: int = 48
    engine: Engine = "auto"
    bisection: Bisection | None = None
    expected: int | None = None
    files: Mapping[str, str] = field(default_factory=dict)

    def __post_init__(self) -> None:
        columns = columns_of(self.keep)
        taken = {word for column in columns for word in (column.name, *column.dims)} | RESERVED
        for axis in self.axes:
            if axis.name in taken:
                raise InputError(
                    f"an axis is named {axis.name!r} like a result", allowed="another name", where="sweep.axis"
                )
        _refuse_doubles("axes are named", [axis.name for axis in self.axes])
        _refuse_doubles("axes change", [key for axis in self.axes for key in axis.keys])
        if not self.axes or self.size > MOST_POINTS:
            raise InputError(f"the plan has {self.size if self.axes else 0} points", allowed=f"1 to {MOST_POINTS}")
        if isinstance(self.phases, bool) or not isinstance(self.phases, int) or not 5 <= self.phases <= MOST_PHASES:
            raise InputError(f"phases is {self.phases!r}", allowed=f"a whole number from 5 to {MOST_PHASES}")
        if self.engine not in ("auto", "layered", "direct"):
            raise InputError(f"engine is {self.engine!r}", allowed="'auto', 'layered', 'direct'")
        if "lost" in self.keep and self.bisection is None:
            raise InputError("'lost' is to be kept, but not where to look for it", allowed="a table [sweep.lost]")
        if self.expected is not None and (isinstance(self.expected, bool) or not isinstance(self.expected, int)):
            raise InputError(f"expected is {self.expected!r}", allowed="a whole number")

    @property
    def shape(self) -> tuple[int, ...]:
        """Number of entries of each axis."""
        return tuple(map(len, self.axes))

    @property
    def size(self) -> int:
        """Number of points."""
        return prod(self.shape)

    def changes(self, point: int) -> dict[str, Any]:
        """Return {key: value} of the point number `point`."""
        places = np.unravel_index(point, self.shape)
        return {
            k: v for axis, place in zip(self.axes, places, strict=True) for k, v in axis.changes(int(place)).items()
        }

    def to_dict(self) -> dict[str, Any]:
        """Return the plan as plain data; of a function only its name and the hash of its source."""
        made_by = _signature(self.device) if callable(self.device) else None
        return {
            "scatterpump_plan": FORMAT,
            "device": None if callable(self.device) else dict(self.device),
            "function": made_by,
            "files": dict(self.files),
            "axes": [axis.to_dict() for axis in self.axes],
            "keep": list(self.keep),
            "phases": self.phases,
            "engine": self.engine,
            "lost": None if self.bisection is None else vars(self.bisection),
            "expected": self.expected,
        }

    def to_json(self) -> str:
        """Return `to_dict` as JSON text."""
        try:
            return json.dumps(self.to_dict(), allow_nan=False)
        except (TypeError, ValueError) as error:
            raise InputError(
                f"the plan holds what is no plain data ({error})", allowed="numbers, text, lists"
            ) from error

    @cached_property
    def fingerprint(self) -> str:
        """Hash of everything that the results depend on."""
        return fingerprint(json.loads(self.to_json()))

    @classmethod
    def from_dict(cls, data: Mapping[str, Any], function: Callable[..., Pump] | None = None) -> SweepPlan:
        """Return the plan that `to_dict` was taken of; `function` is the one that made its pumps, if one did."""
        if data.get("scatterpump_plan") != FORMAT:
            raise InputError("this is no plan of a format known here", allowed=f'"scatterpump_plan": {FORMAT}')
        if data["device"] is None and function is None:
            raise InputError(
                f"the pumps of this plan are made by the Python function {data['function']['name']!r}",
                allowed="that function, from Python: run_sweep(SweepPlan(function, ...), into=folder)",
            )
        axes = [
            Axis(a["keys"], [tuple(v) for v in a["values"]], name=a["name"], unit=a["unit"], is_seed=a["is_seed"])
            for a in data["axes"]
        ]
        return cls(
            function or data["device"],
            axes,
            tuple(data["keep"]),
            data["phases"],
            data["engine"],
            None if data["lost"] is None else Bisection(**data["lost"]),
            data["expected"],
            data["files"],
        )


def fingerprint(data: Mapping[str, Any]) -> str:
    """Return the hash of a plan's plain data, 64 hexadecimal digits."""
    return hashlib.sha256(json.dumps(data, sort_keys=True).encode()).hexdigest()


def absent(**_: Any) -> Pump:
    """Stand in for the function of a plan that is only looked at."""
    raise InputError("the function that made these pumps is not at hand")


def flattened(data: Any, prefix: str = "") -> dict[str, Any]:
    """Return {dotted key: value} of nested plain data, to name a difference by."""
    parts = data.items() if isinstance(data, dict) else enumerate(data) if isinstance(data, list) else None
    if parts is None or not data:
        return {prefix: data}
    return {k: v for key, part in parts for k, v in flattened(part, f"{prefix}.{key}" if prefix else str(key)).items()}


def _refuse_doubles(what: str, words: list[str]) -> None:
    twice = sorted({word for word in words if words.count(word) > 1})
    if twice:
        raise InputError(f"two {what} {twice[0]!r}", allowed="each once", where="sweep.axis")


def _signature(function: Callable[..., Pump]) -> dict[str, str]:
    """Name a function and what it says; what it closes over is not looked into."""
    try:
        text = getsource(function)
    except (OSError, TypeError):
        code = getattr(function, "__code__", None)
        text = repr((code.co_code, code.co_names)) if code else ""
    name = getattr(function, "__qualname__", type(function).__qualname__)
    return {"name": name, "source": hashlib.sha256(text.encode()).hexdigest()}
