"""What a report needs of a run, kept as it goes by: a few figures a row, and the rows around each alarm."""

from array import array
from collections import deque
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from perpend._core import Reading
from perpend.intake import Row
from perpend.tally import Moment

BEFORE = 60
DURING = 360
EPISODES = 8

FIGURES = ("spe", "spe_limit", "t2", "t2_limit", "drift", "captured", "mean_shift", "weight")
PHASES = ("settling", "healthy", "exceeding", "alarmed", "adopting")


@dataclass(slots=True)
class Episode:
    """The rows around the start of one alarm.

    Attributes
    ----------
    number : int
        Of the alarm, from 1.
    peak : float
        How far above its limit the worst statistic went, while the rows were kept.
    values, contributions : list of arrays, each of shape (channels,)
        One a row.
    alarm : list of bool
        Whether it was on.
    time : list of float
        Where each row stands.
    """

    number: int
    peak: float = 0.0
    values: list[NDArray[np.float64]] = field(default_factory=list)
    contributions: list[NDArray[np.float64]] = field(default_factory=list)
    alarm: list[bool] = field(default_factory=list)
    time: list[float] = field(default_factory=list)

    def take(self, row: Row, reading: Reading) -> None:
        """Keep one row."""
        self.values.append(np.array(row.values, dtype=np.float64))
        self.contributions.append(reading.contributions())
        self.alarm.append(reading.alarm)
        self.time.append(Moment.of(row).value)
        for name in reading.exceeds:
            limit = getattr(reading, f"{name}_limit")
            if limit > 0:
                self.peak = max(self.peak, getattr(reading, name) / limit)


class History:
    """Keeps what the report draws: some 90 bytes a row, and the rows around the worst alarms."""

    def __init__(self) -> None:
        self._figures = {name: array("d") for name in FIGURES}
        self._time = array("d")
        self._phase = array("B")
        self._alarm = array("B")
        self._missing = array("I")
        self._recent: deque[tuple[Row, Reading]] = deque(maxlen=BEFORE)
        self._open: Episode | None = None
        self._alarms = 0
        self.episodes: list[Episode] = []

    def __len__(self) -> int:
        """Count the rows."""
        return len(self._time)

    def take(self, row: Row, reading: Reading) -> None:
        """Keep one reading."""
        for name, series in self._figures.items():
            value = getattr(reading, name)
            series.append(np.nan if value is None else value)
        self._time.append(Moment.of(row).value)
        self._phase.append(PHASES.index(reading.phase))
        self._missing.append(len(reading.missing))
        if reading.alarm and not (self._alarm and self._alarm[-1]):
            self._begin()
        self._alarm.append(reading.alarm)
        if self._open is not None:
            self._open.take(row, reading)
            if len(self._open.time) >= BEFORE + DURING or not reading.alarm:
                self._open = None
        self._recent.append((row, reading))

    @property
    def time(self) -> NDArray[np.float64]:
        """Where each row stands."""
        return np.array(self._time, dtype=np.float64)

    @property
    def missing(self) -> NDArray[np.uint32]:
        """Channels without a value, a row."""
        return np.array(self._missing, dtype=np.uint32)

    def figures(self) -> dict[str, NDArray[np.float64]]:
        """Return the figures of every row, named as in `Reading`, with `alarm`."""
        found = {name: np.array(series, dtype=np.float64) for name, series in self._figures.items()}
        found["alarm"] = np.array(self._alarm, dtype=np.float64)
        return found

    def in_phase(self, phase: str) -> NDArray[np.bool_]:
        """Tell which rows were in a phase."""
        flags: NDArray[np.bool_] = np.array(self._phase, dtype=np.uint8) == PHASES.index(phase)
        return flags

    def _begin(self) -> None:
        self._alarms += 1
        if len(self.episodes) >= EPISODES:
            self.episodes.remove(min(self.episodes, key=lambda each: each.peak))
        self._open = Episode(self._alarms)
        for row, reading in self._recent:
            self._open.take(row, reading)
        self.episodes.append(self._open)
