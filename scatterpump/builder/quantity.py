"""Quantities with their unit: "3.2 meV" to the number that a description counts in.

A field of a description that is annotated ``Annotated[float, Unit("meV")]`` takes a plain number, which is meant in
that unit, or text with a unit of the same kind.  pint reads the text and is loaded only then.
"""

from __future__ import annotations

import re
from dataclasses import dataclass, fields
from functools import cache
from math import isfinite
from typing import Any, get_args, get_type_hints

from scatterpump.errors import InputError

__all__ = ["Unit", "quantity", "read_quantities"]

TEXT = re.compile(r"\s*([+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?)\s*([A-Za-zµμ%°_][\w µμ*/^()]{0,39})\s*")
LONGEST_SHOWN = 40
OFFSET = 1e-9  # of a value, far above rounding: twice a temperature in degrees is not twice as hot


@dataclass(frozen=True)
class Unit:
    """The unit that a field counts in, as pint writes it.

    Parameters
    ----------
    name : str
        Such as "meV", "nm", "electron_mass"; a plain number in the field has this unit.
    """

    name: str

    def read(self, value: Any, where: str = "") -> float:
        """Return `value`, a number or text, as a number of this unit."""
        if isinstance(value, str):
            return quantity(value, self.name, where)
        if isinstance(value, bool) or not isinstance(value, int | float):
            raise InputError(f"{_shown(value)} is no quantity", allowed=self.allowed, where=where)
        return float(value)

    @property
    def allowed(self) -> str:
        """What a field of this unit takes, in words."""
        return f'a number in {self.name}, or text with a unit, such as "1.5 {self.name}"'

    def __get_pydantic_core_schema__(self, source: Any, handler: Any) -> Any:
        """Let a device file's reader take a number or text."""
        from pydantic_core import core_schema

        return core_schema.no_info_plain_validator_function(self.read)


def quantity(text: str, unit: str, where: str = "") -> float:
    """Read text such as "3.2 meV" and return the number in `unit`.

    Parameters
    ----------
    text : str
        A decimal number and a unit that pint knows.
    unit : str
        What to count in.
    where : str
        The field, for the message of an error.

    Raises
    ------
    InputError
        If the text is no number with a unit, or its unit is of another kind.

    Examples
    --------
    >>> quantity("0.08 um", "nm")
    80.0
    """
    found = TEXT.fullmatch(text)
    if found is None:
        raise InputError(f"{_shown(text)} is no quantity", allowed=Unit(unit).allowed, where=where)
    number, name = found.groups()
    factor = _factor(name.strip(), unit)
    if factor is None:
        raise InputError(f"{_shown(text)} cannot be counted in {unit}", allowed=Unit(unit).allowed, where=where)
    return float(float(number) * factor)


def read_quantities(record: Any) -> None:
    """Replace text by numbers in the fields of a frozen `record` that have a `Unit`, and refuse what is not finite."""
    hints = get_type_hints(type(record), include_extras=True)
    for name in (field.name for field in fields(record)):
        unit = _unit(hints[name])
        if unit is None or getattr(record, name) is None:
            continue
        value = unit.read(getattr(record, name), name)
        if not isfinite(value):
            raise InputError(f"{name} is {value}", allowed="a finite number")
        object.__setattr__(record, name, value)


def _unit(hint: Any) -> Unit | None:
    """The unit in an annotation, also where None is allowed beside it."""
    for part in (hint, *get_args(hint)):
        for mark in getattr(part, "__metadata__", ()):
            if isinstance(mark, Unit):
                return mark
    return None


def _factor(name: str, unit: str) -> float | None:
    """How many of `unit` one of `name` is, or None if it is none; not for scales with an offset."""
    try:
        there, here = _registry().Quantity(1.0, name), _registry().Quantity(2.0, name)
        one, two = (float(value.to(unit).magnitude) for value in (there, here))
    except Exception:  # whatever pint's parser meets in text that names no unit
        return None
    if not isfinite(one) or abs(two - 2 * one) > OFFSET * abs(two):
        return None
    return float(f"{one:.15g}")  # pint goes by way of metres and such, and rounds on the way


@cache
def _registry() -> Any:
    import pint

    return pint.UnitRegistry()


def _shown(value: Any) -> str:
    text = repr(value)
    return text if len(text) <= LONGEST_SHOWN else text[:LONGEST_SHOWN] + "..."
