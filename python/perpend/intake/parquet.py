"""Parquet files, read in batches; needs the extra ``parquet``."""

from collections.abc import Iterator, Sequence
from typing import Any

import numpy as np

from perpend.intake.clock import Clock
from perpend.intake.opening import Opened
from perpend.intake.row import Row
from perpend.refusal import InputError, shown

BATCH = 4096


class ParquetTable:
    """The columns and rows of a Parquet file.

    Parameters
    ----------
    opened : Opened
        A file, not standard input: the format is read from its end.

    Raises
    ------
    InputError
        Where the extra is not installed, the file is damaged, or a name occurs twice.
    """

    def __init__(self, opened: Opened) -> None:
        self.label = opened.label
        self.opened = opened
        self.guessed_separator: str | None = None
        try:
            import pyarrow.parquet as pq
        except ImportError:
            raise InputError("Parquet needs the extra: pip install 'perpend[parquet]'", self.label) from None
        if not opened.stream.seekable():
            raise InputError("Parquet cannot be read from a pipe; give the file's name", self.label)
        try:
            self._file: Any = pq.ParquetFile(opened.stream)
            self.columns: tuple[str, ...] = tuple(self._file.schema_arrow.names)
        except (OSError, ValueError) as error:
            raise InputError(f"the Parquet file is damaged ({str(error).splitlines()[0]})", self.label) from None
        for name in self.columns:
            if self.columns.count(name) > 1:
                raise InputError(f"two columns are named {shown(name)}; names must differ", self.label)

    def first_cells(self) -> tuple[object, ...] | None:
        """Cells of the first row, for guessing what they are; None where there is no row."""
        for batch in self._file.iter_batches(batch_size=1):
            return tuple(column[0].as_py() for column in batch.columns)
        return None

    def rows(self, channels: Sequence[str], clock: Clock | None) -> Iterator[Row]:
        """Give the rows, channels in the order asked for.

        Raises
        ------
        InputError
            At a column that is no number or a value that is not finite.
        """
        wanted = [*channels, *([clock.column] if clock else [])]
        number = 0
        for batch in self._file.iter_batches(batch_size=BATCH, columns=wanted):
            table = {name: batch.column(batch.schema.get_field_index(name)) for name in wanted}
            values = np.column_stack([self._floats(table[name], name, number) for name in channels])
            times = table[clock.column].to_pylist() if clock else None
            for index, row in enumerate(values.tolist()):
                number += 1
                place = f"{self.label}, row {number}"
                instant = clock.read(times[index], place) if clock and times is not None else None
                yield Row(number, f"row {number}", row, instant)

    def _floats(self, column: Any, name: str, before: int) -> np.ndarray[Any, np.dtype[np.float64]]:
        import pyarrow as pa

        try:
            floats = column.cast(pa.float64(), safe=False).to_numpy(zero_copy_only=False)
        except (pa.ArrowInvalid, pa.ArrowNotImplementedError):
            raise InputError(
                f"expected numbers, got {column.type}; a column of text is left out with --ignore COLUMN",
                f"{self.label}, column {shown(name)}",
            ) from None
        values = np.asarray(floats, dtype=np.float64)
        for index in np.flatnonzero(np.isinf(values))[:1].tolist():
            raise InputError(
                f"expected a finite number, got {values[index]}; use a null where there is no value",
                f"{self.label}, row {before + index + 1}, column {shown(name)}",
            )
        return values
