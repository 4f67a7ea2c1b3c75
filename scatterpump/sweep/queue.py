"""The points still to do, as stretches of positions that are handed out one after the other."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

__all__ = ["Queue"]


class Queue:
    """Positions `start`, `start` + 1, ... of which those with `waiting` true are to be done.

    Parameters
    ----------
    waiting : (n,) bool array
    start : int
    backwards : bool
        True to begin at the far end, as a second run in the same stretch does.
    """

    def __init__(self, waiting: NDArray[np.bool_], start: int, *, backwards: bool = False) -> None:
        self._waiting, self._start, self._backwards = waiting.copy(), start, backwards
        self._view = self._waiting[::-1] if backwards else self._waiting
        self._cursor = 0
        self._left = int(waiting.sum())

    def __len__(self) -> int:
        return self._left

    def take(self, most: int) -> tuple[int, int]:
        """Hand out the next stretch [start, stop) of at most so many positions; there must be one."""
        self._cursor += int(np.argmax(self._view[self._cursor :]))
        ahead = self._view[self._cursor : self._cursor + most]
        length = len(ahead) if ahead.all() else int(np.argmin(ahead))
        ahead[:length] = False
        self._left -= length
        first = len(self._view) - self._cursor - length if self._backwards else self._cursor
        return self._start + first, self._start + first + length

    def drop(self, done: NDArray[np.bool_]) -> int:
        """Leave out what another run has done meanwhile, and tell how many that were."""
        met = int((self._waiting & done).sum())
        self._waiting &= ~done
        self._left -= met
        return met
