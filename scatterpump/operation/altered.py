"""The same pump with disorder on its sites, or driven more or less strongly.

Both change the value functions of a finalized kwant system, so that they work for any pump, however it was built:

    disorder:  H + noise,                noise drawn for each site of the scattering region from (seed, site)
    drive:     mean H + factor (H(phi) - mean H),    the mean taken over the cycle, element by element

The leads stay as they are.
"""

from __future__ import annotations

from collections.abc import Callable
from copy import copy
from dataclasses import replace
from typing import Any

import numpy as np

from scatterpump.errors import InputError
from scatterpump.pump import Pump

__all__ = ["CIRCLE", "with_disorder", "with_drive"]

CIRCLE = 64  # equally spaced phases of a mean over the cycle: exact for waves of up to 63 harmonics
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


def with_drive(pump: Pump, factor: float) -> Pump:
    """Return `pump` with all that moves in its Hamiltonian multiplied by `factor`, about its mean over the cycle."""
    circle = [pump.parameters(2 * np.pi * i / CIRCLE) for i in range(CIRCLE)]
    return replace(
        pump,
        system=_redriven(pump.finalized, circle, factor),
        bulk=None if pump.finalized_bulk is None else _redriven(pump.finalized_bulk, circle, factor),
    )


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


def _redriven(system: Any, circle: list[dict[str, Any]], factor: float) -> Any:
    from kwant.builder import Other

    system, known = _own(system), {}

    def redriven(value: Value) -> Value:
        function, names = value
        if names is None or function is Other:
            return value
        key = (id(function), id(names))
        if key not in known:
            known[key] = _about_mean(function, [tuple(p[name] for name in names) for p in circle], factor)
        return known[key], names

    system.onsites = [redriven(value) for value in system.onsites]
    system.hoppings = [redriven(value) for value in system.hoppings]
    return system


def _about_mean(function: Callable[..., Any], circle: list[tuple[Any, ...]], factor: float) -> Callable[..., Any]:
    """Return the value function whose distance from its mean over `circle` is `factor` times that of `function`."""
    count = len(circle[0])
    means: dict[Any, Any] = {}

    def value(*arguments: Any) -> Any:
        sites, parameters = arguments[: len(arguments) - count], arguments[len(arguments) - count :]
        if sites not in means:
            means[sites] = sum(np.asarray(function(*sites, *place)) for place in circle) / len(circle)
        return means[sites] + factor * (function(*sites, *parameters) - means[sites])

    return value
