"""The clock column: recognised, read and held to rising order."""

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import UTC, date, datetime
from typing import Literal

from perpend.refusal import InputError, shown

UNITS = {
    "seconds": "s",
    "time_s": "s",
    "minutes": "min",
    "time_min": "min",
    "hours": "h",
    "time_h": "h",
    "days": "d",
}
NAMES = frozenset(UNITS) | {
    *("time", "timestamp", "datetime", "date_time", "date", "clock", "utc", "epoch"),
    *("zeit", "zeitstempel", "datum", "uhrzeit"),
}

# Seconds and milliseconds since 1970 for the years 2001 to 2286: nothing else in a clock column is so large.
EPOCH_SECONDS = (1e9, 1e10)
EPOCH_MILLISECONDS = (1e12, 1e13)

Form = Literal["instant with zone", "date and time", "number", "seconds since 1970", "milliseconds since 1970"]
FORMATS = ("%d.%m.%Y %H:%M:%S", "%d.%m.%Y %H:%M", "%Y/%m/%d %H:%M:%S", "%Y/%m/%d %H:%M")


@dataclass(slots=True, frozen=True)
class Instant:
    """What the clock said at a row.

    Attributes
    ----------
    value : float
        Seconds since 1970 for dates, the number itself otherwise: it rises.
    text : str
        For a person to read.
    """

    value: float
    text: str


@dataclass(slots=True)
class Clock:
    """Reads one column as a clock; its form is settled by the first cell and kept.

    Parameters
    ----------
    column : str
        Name of the column.
    """

    column: str
    form: Form | None = None
    _last: Instant | None = None
    _last_place: str = ""

    @property
    def dated(self) -> bool:
        """Whether values are seconds since 1970."""
        return self.form not in (None, "number")

    @property
    def unit(self) -> str:
        """Unit of a clock that counts in plain numbers; empty where it is not known."""
        return UNITS.get(self.column.strip().lower(), "")

    def read(self, cell: object, place: str) -> Instant:
        """Read a cell.

        Raises
        ------
        InputError
            Where the cell is no time, of another form than the first, or earlier than the one before.
        """
        where = f"{place}, column {shown(self.column)}"
        found = read_time(cell)
        if found is None:
            raise InputError(
                f"expected a time such as 2026-03-01 06:05 or a number, got {shown(str(cell).strip())}"
                "; --time COLUMN names another clock, --time none has none",
                where,
            )
        form, value, text = found
        if self.form is None:
            self.form = form
        elif form != self.form:
            got = shown(str(cell).strip())
            raise InputError(f"expected {_called(self.form)} as in the first row, got {got}", where)
        instant = Instant(value, f"{text} {self.unit}".rstrip() if form == "number" else text)
        last = self._last
        if last is not None and value < last.value:
            hint = "sort the rows by time"
            if form == "date and time":
                hint += ", or write them in UTC if the clocks went back"
            raise InputError(f"{instant.text} comes after {last.text} of {self._last_place}; {hint}", where)
        self._last, self._last_place = instant, place.rpartition(", ")[2]
        return instant


def guess_clock(columns: Sequence[str], first: Mapping[str, object]) -> str | None:
    """Name the column that is a clock by its name or else by a date in its first cell; None for none."""
    for name in columns:
        if name.strip().lower().replace(" ", "_") in NAMES:
            return name
    for name in columns:
        found = read_time(first.get(name, ""))
        if found is not None and found[0] in ("instant with zone", "date and time"):
            return name
    return None


def read_time(cell: object) -> tuple[Form, float, str] | None:
    """Read one cell as form, value and text; None where it is no time."""
    if isinstance(cell, datetime):
        return _dated(cell)
    if isinstance(cell, date):
        return _dated(datetime(cell.year, cell.month, cell.day))
    if isinstance(cell, int | float):
        return _number(float(cell))
    text = str(cell).strip()
    try:
        return _number(float(text)) if text.isascii() and "_" not in text else None
    except ValueError:
        pass
    for form in (None, *FORMATS):
        try:
            moment = datetime.fromisoformat(text) if form is None else datetime.strptime(text, form)
        except ValueError:
            continue
        return _dated(moment)
    return None


def _number(value: float) -> tuple[Form, float, str] | None:
    if not math.isfinite(value):
        return None
    if EPOCH_SECONDS[0] <= value < EPOCH_SECONDS[1]:
        return "seconds since 1970", value, _since_1970(value)
    if EPOCH_MILLISECONDS[0] <= value < EPOCH_MILLISECONDS[1]:
        return "milliseconds since 1970", value / 1000, _since_1970(value / 1000)
    return "number", value, f"{value:.10g}"


def _since_1970(seconds: float) -> str:
    return _written(datetime.fromtimestamp(seconds, UTC)) + " UTC"


def _dated(moment: datetime) -> tuple[Form, float, str]:
    if moment.tzinfo is None:
        return "date and time", moment.replace(tzinfo=UTC).timestamp(), _written(moment)
    return "instant with zone", moment.timestamp(), _written(moment) + _zone(moment)


def _written(moment: datetime) -> str:
    if moment.microsecond:
        return moment.strftime("%Y-%m-%d %H:%M:%S.%f").rstrip("0")
    return moment.strftime("%Y-%m-%d %H:%M:%S" if moment.second else "%Y-%m-%d %H:%M")


def _zone(moment: datetime) -> str:
    offset = moment.strftime("%z")
    return " UTC" if offset == "+0000" else f" {offset[:3]}:{offset[3:]}"


def _called(form: Form) -> str:
    if form == "date and time":
        return "a date and time without zone"
    return {"instant with zone": "an instant with zone", "number": "a number"}.get(form, form)
