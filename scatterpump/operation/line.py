"""One answer on a sheet, and how it was obtained."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any, Literal

__all__ = ["How", "Line"]

How = Literal["proven", "computed", "estimated"]


@dataclass(frozen=True)
class Line:
    """One answer.

    Attributes
    ----------
    label : str
        What it is about.
    how : "proven", "computed" or "estimated"
        Proven: by a bound that holds for every phi.  Computed: found numerically.  Estimated: from samples,
        or by a formula for its size.
    text : str
        The answer as a person reads it.
    values : dict
        The same as data; energies in the pump's unit.
    """

    label: str
    how: How
    text: str
    values: dict[str, Any] = field(default_factory=dict)
