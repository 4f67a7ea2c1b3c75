"""What an ensemble of samples says: the share that stays quantised, with its interval, and quantiles.

A sample counts as quantised if its integer is proven (if the audit was kept: and raises no alarm), and is the expected
one if the plan expects one.  Failed samples do not count at all, and are not hidden: ``samples`` tells how many did.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cache
from typing import Any

import numpy as np
from numpy.typing import NDArray

__all__ = ["QUANTILES", "Fraction", "quantiles", "quantised", "quantised_fraction"]

CONFIDENCE = 0.95
QUANTILES = (0.05, 0.25, 0.5, 0.75, 0.95)

Floats = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Fraction:
    """The share of samples that is quantised.

    Attributes
    ----------
    samples : integer array
        How many counted.
    value : float array
        nan where none did.
    lower, upper : float array
        Wilson score interval at 95 %: E. B. Wilson, J. Am. Stat. Assoc. 22, 209 (1927).
    """

    samples: NDArray[np.int64]
    value: Floats
    lower: Floats
    upper: Floats


def quantised(columns: dict[str, NDArray[Any]], expected: int | None = None) -> NDArray[np.bool_] | None:
    """Tell for each point whether it is quantised, or return None if nothing that was kept tells."""
    sure = columns.get("trustworthy", columns.get("proven"))
    if sure is None or (expected is not None and "integer" not in columns):
        return None
    return np.asarray((sure == 1) & (True if expected is None else columns["integer"] == expected))


def quantised_fraction(is_quantised: NDArray[np.bool_], counts: NDArray[np.bool_], axes: Sequence[int]) -> Fraction:
    """Return the share of `is_quantised` among those that count, over the axes of the samples."""
    samples = np.asarray(counts.sum(axis=tuple(axes)))
    hits = np.asarray((is_quantised & counts).sum(axis=tuple(axes)))
    values = np.array([_wilson(int(k), int(n)) for k, n in zip(hits.ravel(), samples.ravel(), strict=True)])
    value, lower, upper = values.T.reshape(3, *samples.shape)
    return Fraction(samples, value, lower, upper)


def quantiles(values: Floats, counts: NDArray[np.bool_], axes: Sequence[int]) -> Floats:
    """Return `QUANTILES` of the values that count, over the axes of the samples; they become the last axis.

    A quantile is always a value that was met, the smallest that at least such a share of the samples does not exceed,
    so that infinite ones do no harm.
    """
    kept = np.where(counts, values, np.nan)
    kept = np.moveaxis(kept, tuple(axes), range(kept.ndim - len(axes), kept.ndim))
    kept = np.sort(kept.reshape(*kept.shape[: kept.ndim - len(axes)], -1), axis=-1)  # nan comes last
    known = np.sum(~np.isnan(kept), axis=-1)[..., None]
    ranks = np.ceil(np.asarray(QUANTILES) * known - RANK_ROUNDING).astype(int)
    found = np.take_along_axis(kept, np.clip(ranks - 1, 0, kept.shape[-1] - 1), axis=-1)
    return np.asarray(np.where(known > 0, found, np.nan))


RANK_ROUNDING = 1e-9  # 0.05 * 20 is not to count as more than 1


@cache
def _wilson(hits: int, samples: int) -> tuple[float, float, float]:
    from scipy.stats import binomtest

    if samples == 0:
        return np.nan, np.nan, np.nan
    interval = binomtest(hits, samples).proportion_ci(CONFIDENCE, method="wilson")
    return hits / samples, float(interval.low), float(interval.high)
