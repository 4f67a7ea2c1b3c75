"""The same pump with disorder on its sites: H + noise, drawn for each site of the scattering region from (seed, site).

The value functions of the finalized kwant system are changed, so that it works for any pump, however it was built.  The
leads stay as they are.
"""

from __future__ import annotations

from copy import copy
from dataclasses import replace
from typing import Any

import numpy as np

from scatterpump.errors import InputError
from scatterpump.pump import Pump

__all__ = ["with_disorder"]

Value = tuple[Any, Any]


def with_disorder(pump: Pump, width: float, *, seed: int) -> Pump:
    """Return `pump` with a static energy from [-width/2, width/2] added to every site of its scattering region.

    Parameters
    ----------
    pump : Pump
    width : float
        Full width of the box, in the pump's unit of energy.
    seed : int
        Which sample; with the site it determines the energy.
    """
    import kwant.digest

    system = _own(pump.finalized)
    noise = [width * (kwant.digest.uniform(_label(site), f"disorder {seed}") - 0.5) for site in system.sites]
    system.onsites = [_raised(value, by) for value, by in zip(system.onsites, noise, strict=True)]
    return replace(pump, system=system, bulk=pump.finalized_bulk)


def _own(system: Any) -> Any:
    if not hasattr(system, "onsites"):
        raise InputError(
            "the kwant system was built with vectorize=True, whose values cannot be changed one by one",
            allowed="a system of a plain kwant.Builder",
        )
    return copy(system)


def _label(site: Any) -> str:
    return f"{site.family.name} {tuple(site.tag)}"


def _raised(value: Value, by: float) -> Value:
    function, names = value
    if names is None:
        return _plus(function, by), None
    return (lambda site, *parameters: _plus(function(site, *parameters), by)), names


def _plus(value: Any, by: float) -> Any:
    """Add an energy to a number, to an array of numbers, or to a matrix or an array of matrices."""
    return value + by if np.ndim(value) < 2 else np.asarray(value) + by * np.eye(np.shape(value)[-1])
