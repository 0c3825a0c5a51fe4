"""Two ways to do the same work, timed in turns, so that a busy machine slows both."""

import contextlib
import importlib
import math
import time
from collections.abc import Callable
from contextlib import AbstractContextManager
from dataclasses import dataclass
from types import ModuleType
from typing import Any

import numpy as np

Work = Callable[[], object]

#: Seconds in one timing at least: far above the resolution of the clock.
_SHORTEST = 2e-3
#: Seconds spent on a comparison, about.
_BUDGET = 2.0
#: Timings a contender, at least and at most.
_REPEATS = (5, 51)


@dataclass(frozen=True)
class Comparison:
    """One line of the table.

    Attributes
    ----------
    what, against : str
        The contenders.
    dim, rank : int
        Entries a vector, and how many vectors.
    seconds, other_seconds : float
        Medians of the time one took; not a number where nothing was timed.
    goal : float or None
        The ratio to stay below; None for a line that is only there for scale.
    """

    what: str
    against: str
    dim: int
    rank: int
    seconds: float
    other_seconds: float
    goal: float | None

    @property
    def ratio(self) -> float:
        """Share of the other's time."""
        return self.seconds / self.other_seconds


@dataclass(frozen=True)
class Contest:
    """Two ways to do the same work, once their answers have been found alike."""

    what: str
    against: str
    dim: int
    rank: int
    goal: float | None
    ours: Work
    theirs: Work

    def timed(self, check: bool) -> Comparison:
        """Time both; with `check`, do each once and time nothing."""
        if check:
            self.ours()
            self.theirs()
        one, other = (math.nan, math.nan) if check else turns(self.ours, self.theirs)
        return Comparison(self.what, self.against, self.dim, self.rank, one, other, self.goal)


def optional(name: str) -> ModuleType | None:
    """Import a module if it is installed."""
    try:
        return importlib.import_module(name)
    except ImportError:
        return None


def one_thread() -> AbstractContextManager[Any]:
    """Keep numerical libraries to one thread, as far as that can be asked for."""
    threadpoolctl = optional("threadpoolctl")
    if threadpoolctl is None:
        return contextlib.nullcontext()
    limits: AbstractContextManager[Any] = threadpoolctl.threadpool_limits(limits=1)
    return limits


def turns(ours: Work, theirs: Work) -> tuple[float, float]:
    """Return medians of the seconds each takes, timed in turns."""

    def seconds(work: Work, calls: int) -> float:
        start = time.perf_counter()
        for _ in range(calls):
            work()
        return (time.perf_counter() - start) / calls

    calls = [max(1, math.ceil(_SHORTEST / max(seconds(work, 3), 1e-9))) for work in (ours, theirs)]
    # Warm, and long enough to plan by.
    first = [seconds(work, count) for work, count in zip((ours, theirs), calls, strict=True)]
    round_seconds = sum(count * each for count, each in zip(calls, first, strict=True))
    repeats = min(max(_REPEATS[0], round(_BUDGET / round_seconds)), _REPEATS[1])
    turns = [(seconds(ours, calls[0]), seconds(theirs, calls[1])) for _ in range(repeats)]
    one, other = np.median(turns, axis=0)
    return float(one), float(other)
