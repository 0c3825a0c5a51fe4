"""Long columns in bounded room: runs of rows, each as its lowest and highest value, that grow as the rows come."""

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

# Rows gathered before they are worked on together, where runs are longer.
TOGETHER = 512


class Reduced:
    """Keeps columns of numbers as at most so many runs of equal length; no peak and no dip is lost.

    Parameters
    ----------
    columns : int
        Numbers a row.
    runs : int
        The most to keep, even. When they are full, every two become one: once there are as many rows, at least half as
        many runs are there.
    """

    def __init__(self, columns: int, runs: int) -> None:
        self._lowest = np.full((runs, columns), np.nan)
        self._highest = np.full((runs, columns), np.nan)
        self._done = 0
        self._length = 1
        self._left = 1
        self._gathered: list[Sequence[float]] = []

    def take(self, values: Sequence[float]) -> None:
        """Keep one row; NaN where there is no value."""
        self._gathered.append(values)
        self._left -= 1
        if self._left == 0 or len(self._gathered) == TOGETHER:
            self._work()
        if self._left == 0:
            self._done += 1
            if self._done == len(self._lowest):
                self._join()
            self._left = self._length

    def runs(self) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Return the lowest and the highest values, shape (runs, columns); NaN where a run has none."""
        self._work()
        count = self._done + (self._left < self._length)
        return self._lowest[:count].copy(), self._highest[:count].copy()

    def _work(self) -> None:
        if not self._gathered:
            return
        rows = np.array(self._gathered, dtype=np.float64)
        self._gathered.clear()
        for kept, extreme in ((self._lowest, np.fmin), (self._highest, np.fmax)):
            kept[self._done] = extreme(kept[self._done], extreme.reduce(rows))

    def _join(self) -> None:
        self._length *= 2
        self._done //= 2
        for kept, extreme in ((self._lowest, np.fmin), (self._highest, np.fmax)):
            kept[: self._done] = extreme(kept[::2], kept[1::2])
            kept[self._done :] = np.nan
