"""Values of many points as arrays: filled up where they are ragged or missing.  No knowledge of pumps."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

__all__ = ["MISSING", "empty", "filler", "joined", "stacked"]

MISSING = -(2**31)


def filler(dtype: Any) -> Any:
    """Return what stands for a missing value of this type."""
    return MISSING if np.issubdtype(dtype, np.integer) else dtype(np.nan)


def empty(shape: tuple[int, ...], dtype: Any) -> NDArray[Any]:
    """Return an array of missing values."""
    return np.full(shape, filler(dtype), dtype=dtype)


def stacked(values: Sequence[Any], dtype: Any, dimensions: int) -> NDArray[Any]:
    """Return one array of all `values`, each None or an array of so many `dimensions`, filled up to the largest."""
    arrays = [None if value is None else np.asarray(value, dtype=dtype) for value in values]
    tails = [array.shape for array in arrays if array is not None]
    tail = tuple(max(sizes) for sizes in zip(*tails, strict=True)) if tails else (0,) * dimensions
    result = empty((len(arrays), *tail), dtype)
    for row, array in zip(result, arrays, strict=True) if tail else ():
        if array is not None:
            row[tuple(slice(size) for size in array.shape)] = array
    if not tail:
        result[:] = [filler(dtype) if array is None else array for array in arrays]
    return result


def joined(whole: NDArray[Any], rows: NDArray[np.int64], part: NDArray[Any]) -> NDArray[Any]:
    """Put `part` into `rows` of `whole`, which grows where the part's further dimensions are larger."""
    tail = tuple(max(sizes) for sizes in zip(whole.shape[1:], part.shape[1:], strict=True))
    if tail != whole.shape[1:]:
        grown = empty((len(whole), *tail), whole.dtype.type)
        grown[tuple(slice(size) for size in whole.shape)] = whole
        whole = grown
    place: Any = (rows, *(slice(size) for size in part.shape[1:]))
    whole[place] = part
    return whole
