"""What a run came to: rows, gaps, the healthy share, alarms and drift."""

import math
from dataclasses import dataclass, field

from perpend._core import Reading
from perpend.intake import Row

STATISTICS = ("spe", "t2", "spe_smooth", "t2_smooth")
CALLED = {"spe": "SPE", "t2": "T2", "spe_smooth": "smoothed SPE", "t2_smooth": "smoothed T2"}
SUSPECTS = 3
TEN = 10


@dataclass(slots=True, frozen=True)
class Moment:
    """A row, by number and clock."""

    number: int
    text: str
    value: float

    @classmethod
    def of(cls, row: Row) -> "Moment":
        """Take the moment of a row; its number stands in where there is no clock."""
        if row.instant is None:
            return cls(row.number, "", float(row.number))
        return cls(row.number, row.instant.text, row.instant.value)


@dataclass(slots=True, frozen=True)
class Excess:
    """One statistic against its limit."""

    statistic: str
    value: float
    limit: float

    @property
    def ratio(self) -> float:
        """How many times the limit it is."""
        return self.value / self.limit if self.limit > 0 else math.nan

    @property
    def brief(self) -> str:
        """Write it without its figures."""
        return f"{CALLED[self.statistic]} at {times(self.ratio)} its limit"

    def __str__(self) -> str:
        """Write it as the narrator does."""
        against = f"{self.value:.4g} against {self.limit:.4g}"
        return f"{CALLED[self.statistic]} {against} ({times(self.ratio)})"


def times(ratio: float) -> str:
    """Write a ratio so that one just above 1 shows as such."""
    return f"{ratio:.2f} times" if ratio < TEN else f"{ratio:,.0f} times"


def largest_excess(reading: Reading) -> Excess | None:
    """Return the statistic that is highest above its limit; None where none is above."""
    found = [Excess(name, getattr(reading, name), getattr(reading, f"{name}_limit")) for name in reading.exceeds]
    return max(found, key=lambda each: each.ratio, default=None)


@dataclass(slots=True)
class Alarm:
    """One alarm, from on to off.

    Attributes
    ----------
    start : Moment
        The row at which it went on.
    end : Moment or None
        The row at which it went off; None while it is on.
    rows, adopted : int
        Rows it was on, and how many of them the watch learned in spite of it, after the hold.
    peak, peak_at : Excess and Moment, or None
        The statistic that went highest above its limit, and when.
    first : list of (name, share)
        Suspects at the start.
    opening : Excess or None
        The statistic that was highest above its limit at the start.
    """

    start: Moment
    first: list[tuple[str, float]]
    opening: Excess | None = None
    end: Moment | None = None
    rows: int = 0
    adopted: int = 0
    peak: Excess | None = None
    peak_at: Moment | None = None
    _shares: dict[str, float] = field(default_factory=dict)
    _asked: int = 0

    @property
    def height(self) -> float:
        """How many times its limit the peak was; 0 where that cannot be said."""
        ratio = 0.0 if self.peak is None else self.peak.ratio
        return 0.0 if math.isnan(ratio) else ratio

    def take(self, row: Row, reading: Reading) -> None:
        """Take one row of the alarm."""
        self.rows += 1
        self.adopted += reading.phase == "adopting"
        excess = largest_excess(reading)
        if excess is None:
            return
        self._asked += 1
        for name, share in reading.suspects(SUSPECTS):
            self._shares[name] = self._shares.get(name, 0.0) + share
        if self.peak is None or excess.ratio > self.peak.ratio:
            self.peak, self.peak_at = excess, Moment.of(row)

    def suspects(self, n: int = SUSPECTS) -> list[tuple[str, float]]:
        """Name the channels suspected most, with their share averaged over the alarm's exceeding rows."""
        ranked = sorted(self._shares.items(), key=lambda item: -item[1])[:n]
        return [(name, total / self._asked) for name, total in ranked]


@dataclass(slots=True)
class Tally:
    """Counts a run as its readings come in; `still` counts the judged rows in which a channel had stopped moving."""

    rows: int = 0
    settling: int = 0
    judged: int = 0
    healthy: int = 0
    gaps: int = 0
    rows_with_gaps: int = 0
    adopted: int = 0
    still: int = 0
    stopped: dict[str, int] = field(default_factory=dict)
    alarms: list[Alarm] = field(default_factory=list)
    last: Reading | None = None

    @property
    def current(self) -> Alarm | None:
        """The alarm that is on, if one is."""
        return self.alarms[-1] if self.alarms and self.alarms[-1].end is None else None

    @property
    def unjudged(self) -> int:
        """Rows with too few values to be judged."""
        return self.rows - self.settling - self.judged

    def take(self, row: Row, reading: Reading) -> None:
        """Count one reading."""
        self.rows += 1
        self.last = reading
        missing = len(reading.missing)
        self.gaps += missing
        self.rows_with_gaps += missing > 0
        if reading.phase == "settling":
            self.settling += 1
        elif not math.isnan(reading.spe):
            self.judged += 1
            self.healthy += reading.phase == "healthy"
            self.adopted += reading.phase == "adopting"
            stuck = reading.stuck
            self.still += bool(stuck)
            for name in stuck:
                self.stopped[name] = self.stopped.get(name, 0) + 1
        alarm = self.current
        if reading.alarm:
            if alarm is None:
                alarm = Alarm(Moment.of(row), reading.suspects(SUSPECTS), largest_excess(reading))
                self.alarms.append(alarm)
            alarm.take(row, reading)
        elif alarm is not None:
            alarm.end = Moment.of(row)
