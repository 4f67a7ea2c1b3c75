"""Sums of waves as kwant wants them: value functions of a place and of the cycle's parameters."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from fractions import Fraction
from math import lcm, pi
from typing import Any

import numpy as np

from scatterpump.builder.description import Wave, require
from scatterpump.builder.matrix import as_array
from scatterpump.cycle import NAMES, Cycle, is_name
from scatterpump.errors import InputError

__all__ = ["common_period", "require_parameters", "wave_sum"]


def require_parameters(waves: Sequence[Wave], cycle: Cycle) -> None:
    """Raise an `InputError` unless the cycle sets every parameter that a wave needs."""
    have = cycle.names
    for name in have:
        require(is_name(name), "a parameter of the cycle", name, NAMES)
    for wave in waves:
        for name in sorted(wave.needs - set(have)):
            raise InputError(
                f"a wave uses the parameter {name!r}, which the cycle does not set",
                allowed=f"parameters of the cycle: {', '.join(have)}",
            )


def common_period(waves: Sequence[Wave], longest: int) -> int | None:
    """Return the smallest number of lattice constants after which all waves repeat, or None if that is too long."""
    ratios = [Fraction(wave.period).limit_denominator(1000) for wave in waves]
    exact = all(abs(float(r) - w.period) < 1e-12 * w.period for r, w in zip(ratios, waves, strict=True))
    cell = lcm(*(ratio.numerator for ratio in ratios))
    return cell if exact and cell <= longest else None


def wave_sum(waves: Sequence[Wave], names: Sequence[str], one: Any = 1.0) -> Callable[[int, float, Any], Any]:
    """Return (x, offset, values of the parameters `names`) -> the sum of waves at x + offset.

    The values may be arrays of shape (n, 1, 1).  `one` stands for a wave's matrix where it has none.
    """
    place = {name: i for i, name in enumerate(names)}
    terms = [(place.get(str(w.amplitude)), w.amplitude, w.period, w.lag, w.harmonic, _factor(w, one)) for w in waves]
    phi = place.get("phi")

    def total(x: int, offset: float, values: Any) -> Any:
        result: Any = 0.0
        for named, amplitude, period, lag, harmonic, factor in terms:
            angle = 2 * pi * ((x % period + offset) / period) + lag
            if harmonic and phi is not None:
                angle = angle - harmonic * values[phi]
            result = result + (amplitude if named is None else values[named]) * np.cos(angle) * factor
        return result

    return total


def _factor(wave: Wave, one: Any) -> Any:
    return one if wave.matrix is None else as_array(wave.matrix, np.size(one, 0) if np.ndim(one) else 1, "matrix")
