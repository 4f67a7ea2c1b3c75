"""Closed paths: which parameters the pump has at the angle phi.

A cycle maps phi, in radians with period 2 pi, to the named parameters of a Hamiltonian.  Everything downstream
asks a cycle three things only: its values, the phases where its path has corners, and whether it is straight between
them (then a Hamiltonian that is linear in the parameters changes at a constant rate there, which is exact knowledge).
"""

from __future__ import annotations

import csv
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from keyword import iskeyword
from math import cos, floor, isfinite, pi, sin
from pathlib import Path
from typing import Any, Literal

import numpy as np

from scatterpump.errors import CycleError, InputError

__all__ = ["NAMES", "Cycle", "is_name"]

TURN = 2 * pi
NAMES = "names of letters, digits and underscores, no word of Python"
Parameters = dict[str, Any]


def is_name(text: str) -> bool:
    """Tell whether `text` can name a parameter of a Hamiltonian, as `NAMES` says."""
    return text.isidentifier() and not iskeyword(text)


@dataclass(frozen=True)
class Cycle:
    """A closed path phi -> {parameter: value}.

    Parameters
    ----------
    function : callable
        Takes phi in radians, returns the parameters as a mapping.  It need not be trigonometric, but has to be
        closed: the Hamiltonian at 2 pi must be the one at 0, which the audit checks.
    corners : tuple of float
        Phases in [0, 2 pi) where the path is not smooth.
    straight : bool
        True if every parameter is linear in phi between corners.
    plain : bool
        True if every parameter is known to be phi itself or a trigonometric polynomial of low degree in it, so that
        no pulse can hide between samples.

    Examples
    --------
    >>> Cycle.ellipse(x=("delta", 0.0, 0.6), y=("stagger", 0.0, 0.5)).at(0.0)
    {'delta': 0.6, 'stagger': 0.0}
    """

    function: Callable[[float], Mapping[str, Any]]
    corners: tuple[float, ...] = ()
    straight: bool = False
    plain: bool = False

    def at(self, phase: float) -> Parameters:
        """Return the parameters at `phase` (radians; any real number).

        Raises
        ------
        CycleError
            If the function fails there, or returns no mapping of names.
        """
        try:
            found = self.function(phase)
            if not (isinstance(found, Mapping) and all(isinstance(name, str) for name in found)):
                raise TypeError(f"it returned a {type(found).__name__}, no mapping from names to values")
            return dict(found)
        except Exception as cause:  # a user's function may raise anything
            raise CycleError(phase, cause) from cause

    @property
    def names(self) -> tuple[str, ...]:
        """Names of the parameters the cycle sets."""
        return tuple(self.at(0.0))

    @classmethod
    def angle(cls, name: str = "phi") -> Cycle:
        """Return the cycle on which the parameter `name` is the angle itself."""
        return cls(lambda phase: {name: phase}, plain=True)

    @classmethod
    def ellipse(cls, *, x: tuple[str, float, float], y: tuple[str, float, float]) -> Cycle:
        """Return the counter-clockwise ellipse x = centre + radius cos phi, y = centre + radius sin phi.

        Parameters
        ----------
        x, y : (name, centre, radius)
            Parameter name, its value in the middle and its half-axis.  A negative radius turns the direction.
        """
        (x_name, x_centre, x_radius), (y_name, y_centre, y_radius) = x, y
        if x_name == y_name:
            raise InputError(f"both axes of the ellipse are named {x_name!r}", allowed="two different parameters")
        if not all(map(isfinite, (x_centre, x_radius, y_centre, y_radius))):
            raise InputError("the ellipse has a centre or radius that is not finite", allowed="finite numbers")
        return cls(
            lambda phase: {x_name: x_centre + x_radius * cos(phase), y_name: y_centre + y_radius * sin(phase)},
            plain=True,
        )

    @classmethod
    def through(
        cls,
        table: str | Path | Mapping[str, Sequence[float]],
        *,
        curve: Literal["linear", "spline"] = "linear",
    ) -> Cycle:
        """Return the cycle through recorded points, equally spaced in phi.

        Parameters
        ----------
        table : path or mapping
            A CSV file with one named column a parameter and one row a point, or the columns themselves.  Lines that
            start with ``#`` are comments.  The last row must repeat the first: a trace that does not close is no cycle.
        curve : "linear" or "spline"
            Straight lines between the points, or a periodic cubic spline through them.

        Raises
        ------
        InputError
            If the file cannot be read, a number is missing or not finite, or the trace is open.
        """
        columns, source = _columns(table)
        points = _closed_points(columns, source)
        if curve == "linear":
            count = len(points) - 1
            return cls(_linear(columns, points), corners=tuple(TURN * i / count for i in range(count)), straight=True)
        if curve == "spline":
            return cls(_spline(columns, points))
        raise InputError(f"curve is {curve!r}", allowed='"linear" or "spline"')

    @classmethod
    def __get_pydantic_core_schema__(cls, source: Any, handler: Any) -> Any:
        """Let a device file's reader, handed in as validation context, build the cycle."""
        from pydantic_core import core_schema

        return core_schema.with_info_plain_validator_function(lambda value, info: info.context["cycle"](value))

    def reversed(self) -> Cycle:
        """Return the same path run backwards: phi -> -phi."""
        return replace(
            self, function=lambda phase: self.function(-phase), corners=_sorted_corners(-c for c in self.corners)
        )

    def repeated(self, times: int) -> Cycle:
        """Return the path run `times` times (a whole number of at least 1) while phi goes round once."""
        if times < 1 or times != int(times):
            raise InputError(f"a cycle cannot be repeated {times} times", allowed="a whole number of at least 1")
        corners = ((c + TURN * lap) / times for c in self.corners for lap in range(times))
        return replace(self, function=lambda phase: self.function(times * phase), corners=_sorted_corners(corners))

    def started_at(self, start: float) -> Cycle:
        """Return the same path begun at the phase `start` (radians)."""
        if not isfinite(start):
            raise InputError(f"start is {start}", allowed="a finite angle in radians")
        corners = _sorted_corners(c - start for c in self.corners)
        return replace(self, function=lambda phase: self.function(phase + start), corners=corners)


def _sorted_corners(corners: Any) -> tuple[float, ...]:
    return tuple(sorted(corner % TURN % TURN for corner in corners))  # a tiny negative one becomes 2 pi first, then 0


def _columns(table: str | Path | Mapping[str, Sequence[float]]) -> tuple[dict[str, list[float]], str]:
    if isinstance(table, Mapping):
        return {name: [float(v) for v in values] for name, values in table.items()}, "the table"
    path = Path(table)
    try:
        text = path.read_text(encoding="utf-8-sig")
    except (OSError, UnicodeDecodeError) as error:
        raise InputError(
            f"the table cannot be read ({getattr(error, 'strerror', None) or 'it is not UTF-8 text'})",
            allowed="a readable CSV file, its path taken from the device file's folder",
            where=str(path),
        ) from error
    lines = [line for line in text.splitlines() if line.strip() and not line.startswith("#")]
    try:
        header, *rows = csv.reader(lines) if lines else [[]]
    except csv.Error as error:
        raise InputError(
            f"row 1 or a later one is no CSV ({error})", allowed="numbers with commas between", where=str(path)
        ) from error
    names = [name.strip() for name in header]
    if len(set(names)) < len(names) or "" in names:
        raise InputError(
            f"the columns are named {', '.join(map(repr, names))}",
            where=str(path),
            allowed="a different name for every column",
        )
    for name in names:
        if not is_name(name):
            raise InputError(f"the column {name!r} names no parameter", allowed=NAMES, where=str(path))
    for number, row in enumerate(rows, 1):
        if len(row) > len(names):
            raise InputError(
                "the row has more values than the header", allowed="one value a column", where=f"{path}: row {number}"
            )
    return {
        name: [
            _number(row[i] if i < len(row) else "", f"{path}: row {number}, column {name!r}")
            for number, row in enumerate(rows, 1)
        ]
        for i, name in enumerate(names)
    }, str(path)


def _number(text: str, where: str) -> float:
    try:
        return float(text)
    except ValueError:
        shown = repr(text[:30]) if text.strip() else "nothing"
        raise InputError(f"{shown} stands where a number should", allowed="a decimal number", where=where) from None


def _closed_points(columns: dict[str, list[float]], source: str) -> np.ndarray[Any, np.dtype[np.float64]]:
    if len({len(values) for values in columns.values()}) != 1 or len(next(iter(columns.values()))) < 4:
        raise InputError(
            "the trace needs named columns of equal length, at least four rows",
            where=source,
            allowed="a header of parameter names, then one row a point, the last equal to the first",
        )
    points = np.array(list(columns.values()), dtype=float).T
    if not np.isfinite(points).all():
        row, column = np.argwhere(~np.isfinite(points))[0]
        raise InputError(
            f"row {row + 1}, column {list(columns)[column]!r} is not finite", allowed="finite numbers", where=source
        )
    gap = np.abs(points[-1] - points[0])
    if (gap > 1e-9 * np.maximum(1e-300, np.ptp(points, axis=0))).any():
        worst = list(columns)[int(gap.argmax())]
        raise InputError(
            f"the trace is open: {worst!r} starts at {points[0, gap.argmax()]:g} and ends at "
            f"{points[-1, gap.argmax()]:g}",
            allowed="a closed trace, whose last row repeats the first",
            where=source,
        )
    return points


def _linear(columns: dict[str, list[float]], points: Any) -> Callable[[float], Parameters]:
    names, count = tuple(columns), len(points) - 1

    def at(phase: float) -> Parameters:
        place = (phase / TURN - floor(phase / TURN)) * count
        left = min(int(place), count - 1)
        values = points[left] + (place - left) * (points[left + 1] - points[left])
        return dict(zip(names, values.tolist(), strict=True))

    return at


def _spline(columns: dict[str, list[float]], points: Any) -> Callable[[float], Parameters]:
    from scipy.interpolate import CubicSpline

    names, closed = tuple(columns), points.copy()
    closed[-1] = closed[0]
    curve = CubicSpline(np.linspace(0.0, TURN, len(points)), closed, bc_type="periodic")
    return lambda phase: dict(zip(names, curve(phase % TURN).tolist(), strict=True))
