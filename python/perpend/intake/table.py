"""What any source of rows gives, and how one is opened."""

from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from typing import Protocol

from perpend.intake.clock import Clock
from perpend.intake.delimited import DelimitedTable, Dialect
from perpend.intake.opening import Opened, open_input
from perpend.intake.parquet import ParquetTable
from perpend.intake.row import Row

__all__ = ["Row", "Table", "open_table"]


class Table(Protocol):
    """Named columns and their rows, read once from first to last."""

    label: str
    opened: Opened
    guessed_separator: str | None

    @property
    def columns(self) -> tuple[str, ...]:
        """Names, in the order of the source."""

    def first_cells(self) -> tuple[object, ...] | None:
        """Cells of the first row, for guessing what they are; None where there is no row."""

    def rows(self, channels: Sequence[str], clock: Clock | None) -> Iterator[Row]:
        """Give the rows, channels in the order asked for."""


@contextmanager
def open_table(name: str, dialect: Dialect) -> Iterator[Table]:
    """Open a file, or standard input for ``-``; what it is shows in its first bytes.

    Raises
    ------
    InputError
        Where it cannot be read or has no usable header.
    """
    opened = open_input(name)
    try:
        yield ParquetTable(opened) if opened.kind == "parquet" else DelimitedTable(opened, dialect)
    finally:
        opened.close()
