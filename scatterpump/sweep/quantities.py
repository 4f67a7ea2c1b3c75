"""What a sweep can keep of every point: the list of quantities, each with its columns, units and meaning.

To add one, put a `Quantity` on the list: how to work it out from a `Point`, as one value for each of its columns.
A value that does not exist is None: it is stored as NaN, or as `columns.MISSING` among whole numbers.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass
from typing import Any, Literal

import numpy as np

from scatterpump.errors import ClosedGapError, InputError
from scatterpump.sweep.lost import lost_integer
from scatterpump.sweep.point import Point
from scatterpump.winding.unwrap import steps

__all__ = ["DTYPES", "QUANTITIES", "Column", "Quantity", "columns_of", "quantities_named"]

DTYPES = {"float": np.float64, "integer": np.int32, "complex": np.complex128}


@dataclass(frozen=True)
class Column:
    """One number, or array of numbers, that is kept of every point.

    Attributes
    ----------
    name, meaning, unit : str
    kind : "float", "integer" or "complex"
    dims : tuple of str
        Names of its further dimensions; their lengths may differ from point to point, and are filled up.
    """

    name: str
    meaning: str
    unit: str = "1"
    kind: Literal["float", "integer", "complex"] = "float"
    dims: tuple[str, ...] = ()


@dataclass(frozen=True)
class Quantity:
    """Something to keep: its columns, and how they are worked out."""

    name: str
    columns: tuple[Column, ...]
    of: Callable[[Point], Iterable[Any]]


RIGHT_ANGLE = np.pi / 2  # with larger steps even a device without narrow levels may be misread
ENERGY = "energy unit of the device"


def _integer(point: Point) -> tuple[Any, ...]:
    return (None if point.winding is None else point.winding.number,)


def _proven(point: Point) -> tuple[Any, ...]:
    return (point.winding is not None and point.winding.certified,)


def _leak(point: Point) -> tuple[Any, ...]:
    return (1.0 if point.winding is None else point.winding.leak.bound,)


def _smallest(point: Point) -> tuple[Any, ...]:
    return (0.0 if point.winding is None else point.winding.smallest_reflection,)


def _crossings(point: Point) -> tuple[Any, ...]:
    found = () if point.winding is None else point.winding.crossings
    return [c.phase for c in found], [c.direction for c in found], [c.width for c in found]


def _gap(point: Point) -> tuple[Any, ...]:
    gap = point.gap
    return (None, None) if gap is None else (gap.lower, gap.upper)


def _window(point: Point) -> tuple[Any, ...]:
    gap = point.gap
    return (None,) * 3 if gap is None else (gap.lower_edge.upper, gap.upper_edge.lower, gap.distance_lower)


def _chern(point: Point) -> tuple[Any, ...]:
    from scatterpump.bulk.cell import known_cell
    from scatterpump.bulk.chern import chern_number

    if point.whole:
        return (point.verdict.chern,)
    try:
        return (None if known_cell(point.pump) is None else chern_number(point.pump),)
    except ClosedGapError:
        return (None,)


def _sampled(point: Point) -> tuple[Any, ...]:
    r = point.trace.reflection
    taken = steps(np.concatenate((r, r[:1])))
    largest = float(taken.largest.max())
    return round(taken.turns) if largest < RIGHT_ANGLE else None, largest, float(point.trace.leakage.max())


QUANTITIES = {
    quantity.name: quantity
    for quantity in (
        Quantity("integer", (Column("integer", "proven charges a cycle, probe to drain", kind="integer"),), _integer),
        Quantity("proven", (Column("proven", "1 if the proof covers every phi", kind="integer"),), _proven),
        Quantity(
            "trustworthy",
            (
                Column("trustworthy", "1 if there is a proven integer and no alarm", kind="integer"),
                Column("alarms", "number of alarms of the audit", kind="integer"),
            ),
            lambda point: (point.verdict.trustworthy, len(point.verdict.audit.alarms)),
        ),
        Quantity("leak", (Column("leak", "bound on the share of electrons that leaks, at every phi"),), _leak),
        Quantity(
            "smallest_reflection",
            (Column("smallest_reflection", "lower bound on the smallest singular value of r"),),
            _smallest,
        ),
        Quantity(
            "crossings",
            (
                Column("crossing_phase", "where levels cross the Fermi level", "rad", dims=("crossing",)),
                Column("crossing_direction", "+1 filled from the probe", kind="integer", dims=("crossing",)),
                Column(
                    "crossing_width", "half-width of the crossings; from pi on, no resonance", "rad", dims=("crossing",)
                ),
            ),
            _crossings,
        ),
        Quantity(
            "gap",
            (
                Column("gap_lower", "lower bound on the smallest direct bulk gap", ENERGY),
                Column("gap_upper", "upper bound on the smallest direct bulk gap", ENERGY),
            ),
            _gap,
        ),
        Quantity(
            "window",
            (
                Column("window_lower", "Fermi levels above this carry the same integer", ENERGY),
                Column("window_upper", "Fermi levels below this carry the same integer", ENERGY),
                Column("distance", "lower bound on the distance of the Fermi level from the bands", ENERGY),
            ),
            _window,
        ),
        Quantity("chern", (Column("chern", "Chern number of the filled bands", kind="integer"),), _chern),
        Quantity(
            "sampled",
            (
                Column(
                    "sampled_integer",
                    "turns of det r read from samples, no proof; missing if they are too coarse",
                    kind="integer",
                ),
                Column("largest_step", "largest eigenphase between neighbouring samples", "rad"),
                Column("sampled_leak", "largest share of electrons that leaks at the sampled phases"),
            ),
            _sampled,
        ),
        Quantity(
            "reflection",
            (Column("reflection", "r, at even phases from 0", kind="complex", dims=("phase", "out", "in")),),
            lambda point: (point.trace.reflection,),
        ),
        Quantity(
            "lost",
            (
                Column("kept_at", "largest value searched at which the integer was still proven"),
                Column("lost_at", "smallest value above it at which it was not"),
            ),
            lost_integer,
        ),
    )
}


def quantities_named(names: Iterable[str]) -> list[Quantity]:
    """Return the quantities called `names`, or say which there are."""
    names = list(names)
    for name in names:
        if name not in QUANTITIES:
            raise InputError(f"there is no quantity {name!r}", allowed=", ".join(QUANTITIES), where="keep")
    if not names or len(set(names)) < len(names):
        raise InputError("the quantities to keep are none, or one of them twice", allowed=", ".join(QUANTITIES))
    return [QUANTITIES[name] for name in names]


def columns_of(names: Iterable[str]) -> list[Column]:
    """Return the columns of the quantities called `names`."""
    return [column for quantity in quantities_named(names) for column in quantity.columns]
