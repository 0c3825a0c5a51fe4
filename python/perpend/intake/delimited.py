"""Delimited text, row by row: each row is given out as soon as its line has arrived."""

import csv
import math
import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from zlib import error as DamagedStream  # noqa: N812 - zlib names its exception like a variable

from perpend.intake.clock import Clock
from perpend.intake.opening import Opened
from perpend.intake.row import Row
from perpend.refusal import InputError, shown

BLANKS = " \t\r\n"
GAPS = frozenset({"", "nan", "na", "null"})
SEPARATORS = {",": "comma", ";": "semicolon", "\t": "tab"}
GROUPING = str.maketrans("", "", ",._' \u00a0\u202f")
TIME_OF_DAY = re.compile(r"\d{1,2}:\d{2}")
LONGEST_LINE = 16 * 1024 * 1024


@dataclass(slots=True, frozen=True)
class Dialect:
    """How numbers and cells are written.

    Attributes
    ----------
    separator : str or None
        Between cells; None takes what the header shows.
    decimal : str
        ``.`` or ``,``.
    """

    separator: str | None = None
    decimal: str = "."


class DelimitedTable:
    """A header and rows of text.

    Parameters
    ----------
    opened : Opened
        The stream; read no further ahead than its first row.
    dialect : Dialect
        How cells are separated and decimals written.

    Raises
    ------
    InputError
        Where the header is missing, has names twice or none, or is not UTF-8 text.
    """

    def __init__(self, opened: Opened, dialect: Dialect) -> None:
        self.label = opened.label
        self.opened = opened
        self.dialect = dialect
        self._line = 0
        lines = self._lines()
        header = next(lines, "")
        while header and not header.strip():
            header = next(lines, "")
        if not header:
            raise InputError("there is nothing in it; expected a header line and rows", self.label)
        self.separator = dialect.separator or _separator_of(header)
        guessed = dialect.separator is None and self.separator != ","
        self.guessed_separator: str | None = self.separator if guessed else None
        self._records = self._split(header, lines)
        self.columns = tuple(name.strip() for name in next(self._records)[1])
        self._check_header()
        self._first = next(self._records, None)

    def first_cells(self) -> tuple[str, ...] | None:
        """Cells of the first row, for guessing what they are; None where there is no row."""
        return None if self._first is None else tuple(self._first[1])

    def rows(self, channels: Sequence[str], clock: Clock | None) -> Iterator[Row]:
        """Give the rows, channels in the order asked for; once only.

        Raises
        ------
        InputError
            At a cell or a line that cannot be read, named by line and column.
        """
        places = [self.columns.index(name) for name in channels]
        clock_place = None if clock is None else self.columns.index(clock.column)
        number = 0
        record = self._first
        while record is not None:
            line, cells = record
            number += 1
            self._check_width(line, cells)
            texts = [cells[place] for place in places]
            place = f"{self.label}, line {line}"
            instant = clock.read(cells[clock_place], place) if clock and clock_place is not None else None
            yield Row(number, f"line {line}", self._numbers(texts, channels, place), instant)
            record = next(self._records, None)

    def _lines(self) -> Iterator[str]:
        """Decode line by line, without reading further ahead than a line."""
        stream = self.opened.stream
        while True:
            try:
                raw = stream.readline(LONGEST_LINE + 1)
            except (OSError, EOFError, DamagedStream) as error:
                raise InputError(f"reading stopped after line {self._line}: {error}", self.label) from None
            if not raw:
                return
            self._line += 1
            if len(raw) > LONGEST_LINE:
                raise InputError("the line is longer than 16 MiB", self._here())
            try:
                yield raw.decode("utf-8-sig" if self._line == 1 else "utf-8")
            except UnicodeDecodeError as error:
                raise InputError(
                    f"byte {raw[error.start]:#04x} is not UTF-8 text; save the file as UTF-8",
                    self._here(),
                ) from None

    def _split(self, header: str, lines: Iterator[str]) -> Iterator[tuple[int, list[str]]]:
        def all_lines() -> Iterator[str]:
            yield header
            yield from lines

        reader = csv.reader(all_lines(), delimiter=self.separator, strict=True)
        begun = self._line
        while True:
            try:
                cells = next(reader, None)
            except csv.Error as error:
                if self._line > begun:
                    what = f"a quotation mark opened there is not closed by line {self._line}"
                    raise InputError(what, f"{self.label}, line {begun}") from None
                raise InputError(f"cannot be split into cells ({error})", self._here()) from None
            if cells is None:
                return
            if cells:
                yield self._line, cells
            begun = self._line + 1

    def _check_header(self) -> None:
        place = self._here()
        if all(_is_number_or_gap(name) for name in self.columns):
            got = shown(self.columns[0])
            raise InputError(f"expected a header with the channels' names, got numbers ({got} ...)", place)
        if len(self.columns) == 1:
            for other, name in SEPARATORS.items():
                if other in self.columns[0]:
                    none = SEPARATORS[self.separator]
                    raise InputError(f"no {none} in the header, one column only; try --separator {name}", place)
        where: dict[str, int] = {}
        for index, name in enumerate(self.columns, start=1):
            if not name:
                raise InputError(f"column {index} has no name; name it or leave it out of the file", place)
            if name in where:
                both = f"columns {where[name]} and {index} are both named {shown(name)}"
                raise InputError(f"{both}; names must differ", place)
            where[name] = index

    def _here(self) -> str:
        return f"{self.label}, line {self._line}"

    def _check_width(self, line: int, cells: list[str]) -> None:
        if len(cells) == len(self.columns):
            return
        what = f"expected {len(self.columns)} cells as in the header, got {len(cells)}"
        if self.separator == "," and len(cells) >= 2 * len(self.columns) - 1:
            what += "; decimal commas? separate the cells by semicolons and give --decimal comma"
        raise InputError(what, f"{self.label}, line {line}")

    def _numbers(self, texts: list[str], channels: Sequence[str], place: str) -> list[float]:
        if self.dialect.decimal == ".":
            try:
                values = list(map(float, texts))
            except ValueError:
                pass
            else:
                # A sum that is not finite says that a cell may not be: then, and for 1_000, cell by cell.
                if math.isfinite(sum(values)) and _is_plain("".join(texts)):
                    return values
        return [self._number(text, name, place) for text, name in zip(texts, channels, strict=True)]

    def _number(self, text: str, name: str, place: str) -> float:
        text = text.strip(BLANKS)
        if text.lower() in GAPS:
            return math.nan
        place = f"{place}, column {shown(name)}"
        plain = text.replace(",", ".") if self.dialect.decimal == "," else text
        try:
            value = float(plain) if _is_plain(plain) else None
        except ValueError:
            value = None
        if value is None:
            what = f"expected a number or an empty cell, got {shown(text)}"
            raise InputError(f"{what}; {self._advice(text)}", place)
        if math.isinf(value):
            what = f"expected a finite number, got {shown(text)}"
            raise InputError(f"{what}; leave the cell empty where there is no value", place)
        return value

    def _advice(self, text: str) -> str:
        if self.dialect.decimal == "." and _is_number_or_gap(text.replace(",", ".", 1)):
            return "for decimal commas give --decimal comma"
        if _is_number_or_gap(text.translate(GROUPING)):
            return "thousands must not be grouped"
        if TIME_OF_DAY.match(text):
            return "a clock is one column, such as 2026-03-01 10:00; others are left out with --ignore COLUMN"
        return "a column of text is left out with --ignore COLUMN"


def _separator_of(header: str) -> str:
    return max(SEPARATORS, key=lambda each: (header.count(each), each == ","))


def _is_plain(text: str) -> bool:
    """Tell whether a number is written as people and loggers do: Python reads more, such as 1_000 and other scripts."""
    return text.isascii() and text.isprintable() and "_" not in text


def _is_number_or_gap(text: str) -> bool:
    if text.strip(BLANKS).lower() in GAPS:
        return True
    try:
        float(text)
    except ValueError:
        return False
    return "_" not in text
