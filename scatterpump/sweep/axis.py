"""An axis of a sweep: which keys of the device it changes, and to what.

Several keys on one axis are linked: they change together.  An axis of seeds counts samples of an ensemble; the seeds
are the same on every machine, as disorder is a function of (seed, site).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, Literal

import numpy as np

from scatterpump.errors import InputError

__all__ = ["Axis"]

LONGEST = 10_000_000


@dataclass(frozen=True)
class Axis:
    """Values that some keys of a device take, one after the other.

    Parameters
    ----------
    keys : str or sequence of str
        Dotted keys of the device file, such as "onsite.0.amplitude"; for a device made by a function, its arguments.
    values : sequence
        One entry a point.  With several keys an entry may be a list with one value for each, else all take the same.
    name : str
        What to call the axis in results; by default its first key, dots replaced.
    unit : str
        Unit of the values, for labels only.
    is_seed : bool
        True if the axis counts samples of an ensemble.

    Raises
    ------
    InputError
        If there is no key, no value, or an entry does not fit the keys.
    """

    keys: tuple[str, ...]
    values: tuple[Any, ...]
    name: str = ""
    unit: str = ""
    is_seed: bool = False

    def __init__(
        self, keys: str | Sequence[str], values: Any, *, name: str = "", unit: str = "", is_seed: bool = False
    ) -> None:
        listed = (keys,) if isinstance(keys, str) else tuple(keys)
        if not listed or not all(isinstance(key, str) and key for key in listed) or len(set(listed)) < len(listed):
            raise InputError(f"the axis changes {keys!r}", allowed="one key, or a list of different keys")
        entries = values.tolist() if isinstance(values, np.ndarray) else values
        if not isinstance(entries, Sequence | range) or isinstance(entries, str) or not 1 <= len(entries) <= LONGEST:
            raise InputError(
                f"the axis {listed[0]!r} has no list of values", allowed=f"a list of 1 to {LONGEST} values"
            )
        own = name or listed[0].replace(".", "_").replace("-", "_")
        if not own.isidentifier():
            raise InputError(f"an axis is named {own!r}", allowed="letters, digits and underscores")
        for attribute, value in (
            ("keys", listed),
            ("values", tuple(_entry(entry, listed) for entry in entries)),
            ("name", own),
            ("unit", unit),
            ("is_seed", is_seed),
        ):
            object.__setattr__(self, attribute, value)

    def __len__(self) -> int:
        return len(self.values)

    @classmethod
    def even(
        cls,
        keys: str | Sequence[str],
        first: Any,
        last: Any,
        points: int,
        *,
        spacing: Literal["linear", "log"] = "linear",
        name: str = "",
        unit: str = "",
    ) -> Axis:
        """Return the axis of `points` evenly spaced values from `first` to `last`, both included.

        For linked keys `first` and `last` may be lists with one end for each.  With spacing "log" the ratio from value
        to value is even.
        """
        if isinstance(points, bool) or not isinstance(points, int) or not 1 <= points <= LONGEST:
            raise InputError(f"points is {points!r}", allowed=f"a whole number from 1 to {LONGEST}")
        if spacing not in ("linear", "log"):
            raise InputError(f"spacing is {spacing!r}", allowed="'linear' or 'log'")
        start, stop = _ends(first), _ends(last)
        if len(start) != len(stop):
            raise InputError("the ends of the axis differ in length", allowed="as many numbers in both")
        if spacing == "log" and min(*start, *stop) <= 0:
            raise InputError("a logarithmic axis reaches 0 or less", allowed="positive ends")
        rows = np.linspace(start, stop, points) if spacing == "linear" else np.geomspace(start, stop, points)
        return cls(keys, (rows if isinstance(first, Sequence) else rows[:, 0]).tolist(), name=name, unit=unit)

    @classmethod
    def seeds(cls, count: int, keys: str | Sequence[str] = "disorder.seed", *, first: int = 0, name: str = "") -> Axis:
        """Return the axis of the samples `first`, `first` + 1, ... of an ensemble."""
        for word, value, least in (("seeds", count, 1), ("first", first, 0)):
            if isinstance(value, bool) or not isinstance(value, int) or not least <= value <= LONGEST:
                raise InputError(f"{word} is {value!r}", allowed=f"a whole number from {least} to {LONGEST}")
        return cls(keys, range(first, first + count), name=name, is_seed=True)

    def changes(self, place: int) -> dict[str, Any]:
        """Return {key: value} of the entry number `place`."""
        return dict(zip(self.keys, self.values[place], strict=True))

    def to_dict(self) -> dict[str, Any]:
        """Return the axis as plain data."""
        return {
            "keys": list(self.keys),
            "values": [list(entry) for entry in self.values],
            "name": self.name,
            "unit": self.unit,
            "is_seed": self.is_seed,
        }


def _entry(entry: Any, keys: tuple[str, ...]) -> tuple[Any, ...]:
    """Return one value for each key."""
    if len(keys) == 1:
        single = isinstance(entry, tuple) and len(entry) == 1
        return entry if single else (entry,)
    if not isinstance(entry, list | tuple):
        return (entry,) * len(keys)
    if len(entry) != len(keys):
        raise InputError(
            f"an entry of the axis {keys[0]!r} has {len(entry)} values", allowed=f"one for each of {len(keys)} keys"
        )
    return tuple(entry)


def _ends(end: Any) -> list[float]:
    ends = list(end) if isinstance(end, Sequence) and not isinstance(end, str) else [end]
    if not ends or not all(isinstance(v, int | float) and not isinstance(v, bool) and abs(v) < np.inf for v in ends):
        raise InputError(f"an end of the axis is {end!r}", allowed="a finite number")
    return ends
