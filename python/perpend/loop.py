"""The loop itself: each row is judged as it comes, and whoever needs the reading is handed it."""

from collections.abc import Iterable, Sequence
from typing import Protocol

from perpend._core import Reading, Watch
from perpend.intake import Row
from perpend.refusal import InputError


class Observer(Protocol):
    """Takes each row with its reading."""

    def take(self, row: Row, reading: Reading) -> None:
        """Take one row and what the watch found in it."""


def judge(watch: Watch, rows: Iterable[Row], observers: Sequence[Observer]) -> None:
    """Tick through rows and hand every reading on before the next row is asked for.

    Parameters
    ----------
    watch : Watch
        Judges and learns.
    rows : iterable of Row
        Taken one at a time.
    observers : sequence of Observer
        Called in order, each with every row.

    Raises
    ------
    InputError
        Where a row cannot be read or the watch refuses it.
    """
    for row in rows:
        try:
            reading = watch.tick(row.values)
        except ValueError as error:
            raise InputError(str(error), row.place) from None
        for observer in observers:
            observer.take(row, reading)
