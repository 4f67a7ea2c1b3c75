"""Values of matrix elements: functions with the parameter names that a cycle sets, and disorder."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from inspect import Parameter, Signature
from typing import Any

import numpy as np
from numpy.typing import NDArray

__all__ = ["box_noise", "with_parameters"]


def box_noise(width: float, count: int, salt: str) -> NDArray[np.float64]:
    """Return `count` numbers from [-width/2, width/2], each a function of its place and `salt` alone."""
    if width == 0:
        return np.zeros(count)
    import kwant.digest

    return np.array([width * (kwant.digest.uniform(str(x), salt) - 0.5) for x in range(count)])


def with_parameters(function: Callable[..., Any], places: int, names: Sequence[str]) -> Callable[..., Any]:
    """Give a value function of `places` sites the signature (site(s), *names) that kwant reads parameter names from."""
    free = (f"site_{i}" for i in range(places + len(names)) if f"site_{i}" not in names)
    parts = [Parameter(next(free), Parameter.POSITIONAL_ONLY) for _ in range(places)]
    parts += [Parameter(name, Parameter.POSITIONAL_OR_KEYWORD) for name in names]
    function.__signature__ = Signature(parts)  # type: ignore[attr-defined]  # the protocol inspect.signature reads
    return function
