"""Write every reading to a file, as CSV or as a JSON object a line."""

import csv
import json
import math
import os
from pathlib import Path
from typing import Any, TextIO

from perpend._core import Reading
from perpend.intake import Row
from perpend.refusal import InputError, shown
from perpend.tally import STATISTICS

FORMATS = (".csv", ".jsonl")
SUSPECTS = 3
BLOCK = 1 << 16
FIELDS = (
    *("row", "time", "phase", "alarm"),
    *(field for name in STATISTICS for field in (name, f"{name}_limit")),
    *(
        "exceeds",
        "weight",
        "rank",
        "drift",
        "captured",
        "mean_shift",
        "missing",
        "stuck",
        "vanished",
        "suspects",
    ),
)


class ReadingsFile:
    """Every reading, one a line; suspects are named for rows beyond a limit.

    Parameters
    ----------
    name : str
        File to write, ``.csv`` or ``.jsonl``.
    live : bool
        Whether each line is to be out before the next row is read.
    follows : bool
        Whether the readings follow those that the file holds; else it is begun anew.

    Raises
    ------
    InputError
        Where the name says neither format or the file cannot be written.
    """

    def __init__(self, name: str, *, live: bool, follows: bool = False) -> None:
        self._live = live
        self._json = format_of(name) == ".jsonl"
        try:
            held = _whole_lines(Path(name)) if follows else 0
            self._out: TextIO = Path(name).open("r+" if held else "w", encoding="utf-8", newline="")  # noqa: SIM115
            self._out.seek(held)
            self._out.truncate()
        except OSError as error:
            raise InputError(f"--readings: cannot be written: {error.strerror or error}", name) from None
        self._table = csv.writer(self._out, lineterminator="\n")
        if not self._json and not held:
            self._table.writerow(FIELDS)
            self._out.flush()

    def take(self, row: Row, reading: Reading) -> None:
        """Write one reading."""
        cells = _cells(row, reading)
        if self._json:
            self._out.write(json.dumps(cells, ensure_ascii=False, allow_nan=False) + "\n")
        else:
            self._table.writerow([_flat(cells[field]) for field in FIELDS])
        if self._live:
            self._out.flush()

    def close(self) -> None:
        """Finish the file."""
        self._out.close()


def _whole_lines(path: Path) -> int:
    """Bytes up to the end of the last whole line: a run that was killed may have left half of one."""
    if not path.exists():
        return 0
    with path.open("rb") as file:
        end = file.seek(0, os.SEEK_END)
        while end > 0:
            start = max(0, end - BLOCK)
            file.seek(start)
            place = file.read(end - start).rfind(b"\n")
            if place >= 0:
                return start + place + 1
            end = start
    return 0


def format_of(name: str) -> str:
    """Tell the format of a readings file by its name.

    Raises
    ------
    InputError
        Where it is neither.
    """
    suffix = Path(name).suffix.lower()
    if suffix not in FORMATS:
        raise InputError(f"--readings: expected a name ending in .csv or .jsonl, got {shown(name)}")
    return suffix


def _cells(row: Row, reading: Reading) -> dict[str, Any]:
    cells: dict[str, Any] = {
        "row": row.number,
        "time": None if row.instant is None else row.instant.text,
        "phase": reading.phase,
        "alarm": reading.alarm,
    }
    for name in STATISTICS:
        cells[name] = _known(getattr(reading, name))
        cells[f"{name}_limit"] = _known(getattr(reading, f"{name}_limit"))
    cells["exceeds"] = list(reading.exceeds)
    for name in ("weight", "rank", "drift", "captured", "mean_shift"):
        cells[name] = _known(getattr(reading, name))
    cells["missing"] = reading.missing
    cells["stuck"] = reading.stuck
    cells["vanished"] = reading.vanished
    suspects = reading.suspects(SUSPECTS) if reading.exceeds else []
    cells["suspects"] = [{"channel": name, "share": part} for name, part in suspects]
    return cells


def _known(value: float | None) -> float | None:
    return None if value is None or not math.isfinite(value) else value


def _flat(cell: Any) -> Any:
    """Put a cell of the JSON form into one of CSV; floats keep every digit."""
    if cell is None:
        return ""
    if isinstance(cell, bool):
        return int(cell)
    if isinstance(cell, list):
        return ";".join(f"{each['channel']}={each['share']:.4f}" if isinstance(each, dict) else each for each in cell)
    return cell
