"""What a report draws of a run, kept as it goes by, in the same room however long it is."""

import math
from collections import deque
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from perpend._core import Reading, Watch
from perpend.envelope import Band
from perpend.intake import Row
from perpend.report.reduced import Reduced
from perpend.tally import Moment

BEFORE = 60
DURING = 360
EPISODES = 8
RUNS = 1200
# Axes whose energies are kept, and how often they are asked for: they change every few tens of rows at most.
AXES = 6
ASKED = 16

FIGURES = ("spe", "spe_limit", "t2", "t2_limit", "drift", "captured", "mean_shift")
LANES = ("settling", "learned", "held", "adopted", "gaps")
ENERGIES = tuple(f"energy_{axis}" for axis in range(1, AXES + 1))
COLUMNS = ("time", *FIGURES, *LANES, *ENERGIES)


@dataclass(slots=True)
class Episode:
    """The rows around the start of one alarm.

    Attributes
    ----------
    number : int
        Of the alarm, from 1.
    peak : float
        How far above its limit the worst statistic went, while the rows were kept.
    values, expected : list of arrays, each of shape (channels,)
        One a row: as measured, and what the others say of each channel.
    alarm : list of bool
        Whether it was on.
    time : list of float
        Where each row stands.
    """

    number: int
    peak: float = 0.0
    values: list[NDArray[np.float64]] = field(default_factory=list)
    expected: list[NDArray[np.float64]] = field(default_factory=list)
    alarm: list[bool] = field(default_factory=list)
    time: list[float] = field(default_factory=list)

    def take(self, row: Row, reading: Reading) -> None:
        """Keep one row."""
        self.values.append(np.array(row.values, dtype=np.float64))
        self.expected.append(reading.corrected())
        self.alarm.append(reading.alarm)
        self.time.append(Moment.of(row).value)
        for name in reading.exceeds:
            limit = getattr(reading, f"{name}_limit")
            if limit > 0:
                self.peak = max(self.peak, getattr(reading, name) / limit)


class History:
    """Keeps what the report draws: the whole run reduced, and the rows around the worst alarms.

    Parameters
    ----------
    watch : Watch
        Asked for its energies.
    """

    def __init__(self, watch: Watch) -> None:
        self._watch = watch
        self._reduced = Reduced(len(COLUMNS), RUNS)
        self._energies = (math.nan,) * AXES
        self._rows = 0
        self._recent: deque[tuple[Row, Reading]] = deque(maxlen=BEFORE)
        self._open: Episode | None = None
        self._alarms = 0
        self._on = False
        self.lanes = dict.fromkeys(LANES, 0)
        self.episodes: list[Episode] = []

    def __len__(self) -> int:
        """Count the rows."""
        return self._rows

    def take(self, row: Row, reading: Reading) -> None:
        """Keep one reading."""
        self._keep(Moment.of(row).value, reading)
        self._rows += 1
        if reading.alarm and not self._on:
            self._begin()
        self._on = reading.alarm
        if self._open is not None:
            self._open.take(row, reading)
            if len(self._open.time) >= BEFORE + DURING or not reading.alarm:
                self._open = None
        self._recent.append((row, reading))

    def bands(self) -> dict[str, Band]:
        """Return the run reduced: a band a figure, lane and energy, by name; a lane's is 1 where any row is in it."""
        lowest, highest = self._reduced.runs()
        where = lowest[:, 0]
        return {name: Band(where, lowest[:, each], highest[:, each]) for each, name in enumerate(COLUMNS)}

    def _keep(self, time: float, reading: Reading) -> None:
        settling, adopting = reading.phase == "settling", reading.phase == "adopting"
        learned = reading.weight > 0
        lanes = (
            settling,
            learned and not adopting,
            not (settling or learned),
            adopting,
            bool(reading.missing),
        )
        for name, there in zip(LANES, lanes, strict=True):
            self.lanes[name] += there
        if self._rows % ASKED == 0:
            found = self._watch.energies[:AXES].tolist()
            self._energies = (*found, *(math.nan,) * (AXES - len(found)))
        figures = (getattr(reading, name) for name in FIGURES)
        self._reduced.take(
            (time, *(math.nan if value is None else value for value in figures), *lanes, *self._energies)
        )

    def _begin(self) -> None:
        self._alarms += 1
        if len(self.episodes) >= EPISODES:
            self.episodes.remove(min(self.episodes, key=lambda each: each.peak))
        self._open = Episode(self._alarms)
        for row, reading in self._recent:
            self._open.take(row, reading)
        self.episodes.append(self._open)
