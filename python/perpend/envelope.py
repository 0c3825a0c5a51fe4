"""Reduce a long series for drawing, so that no peak and no dip is lost."""

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

Series = NDArray[np.float64]


@dataclass(slots=True, frozen=True)
class Band:
    """A series for drawing: where each run of rows begins, and its lowest and highest value."""

    where: NDArray[Any]
    lowest: Series
    highest: Series


def band(values: ArrayLike, where: NDArray[Any], runs: int) -> Band:
    """Reduce a series to a band of at most so many runs."""
    start, lowest, highest = envelope(values, runs)
    return Band(where[start], lowest, highest)


def envelope(values: ArrayLike, buckets: int) -> tuple[NDArray[np.intp], Series, Series]:
    """Lowest and highest value of each of so many runs of rows.

    Parameters
    ----------
    values : array_like, shape (rows,)
        NaN where there is none.
    buckets : int
        Runs to make, of equal length as far as that goes; as many as there are rows where those are fewer.

    Returns
    -------
    start : ndarray of int, shape (runs,)
        First row of each run.
    lowest, highest : ndarray, shape (runs,)
        Of the run's values; NaN where it has none.
    """
    series = np.asarray(values, dtype=np.float64)
    if len(series) == 0:
        return np.empty(0, dtype=np.intp), series, series
    runs = min(buckets, len(series))
    start: NDArray[np.intp] = (np.arange(runs) * len(series)) // runs
    lowest: Any = np.fmin.reduceat(series, start)
    highest: Any = np.fmax.reduceat(series, start)
    return start, lowest, highest


def spans(flags: ArrayLike) -> list[tuple[int, int]]:
    """Find the runs of rows for which a flag is set.

    Parameters
    ----------
    flags : array_like of bool, shape (rows,)
        One a row.

    Returns
    -------
    list of (start, end)
        First row of each run and the first row after it.
    """
    padded = np.concatenate([[False], np.asarray(flags, dtype=bool), [False]])
    edges = np.flatnonzero(padded[1:] != padded[:-1])
    return [(int(start), int(end)) for start, end in zip(edges[::2], edges[1::2], strict=True)]
