"""Where along one key of a device its integer is lost, by bisection.

The integer of reference is the proven one at the beginning of the search.  Kept means: proven, and the same.  The
bracket found holds a place where that changes; if kept and lost alternate there may be others.
"""

from __future__ import annotations

from math import inf, nan

from scatterpump.sweep.point import Point

__all__ = ["lost_integer"]


def lost_integer(point: Point) -> tuple[float, float]:
    """Return the bracket (kept, lost) of the value at which the integer of `point` is lost.

    (nan, first) if there is no proven integer at the beginning, (last, inf) if it is still there at the end.
    """
    search = point.bisection
    assert search is not None, "a plan that keeps 'lost' has a bisection"  # checked by Plan
    reference = _number(point, search.first)
    if reference is None:
        return nan, search.first
    if _number(point, search.last) == reference:
        return search.last, inf
    kept, lost = float(search.first), float(search.last)
    while lost - kept > search.accuracy and kept < (middle := (kept + lost) / 2) < lost:
        if _number(point, middle) == reference:
            kept = middle
        else:
            lost = middle
    return kept, lost


def _number(point: Point, value: float) -> int | None:
    assert point.bisection is not None
    winding = point.changed(point.bisection.key, value).winding
    return None if winding is None else winding.number
