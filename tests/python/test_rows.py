"""The row reader: any text that a logger writes is read exactly, or refused by line and column."""

import gzip
import io
import math
import os
import threading

import pytest
from hypothesis import given
from hypothesis import strategies as st

from perpend.intake import arrange, open_table
from perpend.intake.delimited import DelimitedTable, Dialect
from perpend.intake.opening import Opened
from perpend.refusal import InputError

NAMES = ("flow", "pressure", "speed")
SEPARATORS = st.sampled_from([",", ";", "\t"])
CELLS = st.one_of(
    st.none(), st.floats(allow_nan=False, allow_infinity=False), st.integers(-(10**12), 10**12).map(float)
)
GAPS = st.sampled_from(["", "nan", "NaN", "NA", "null", "NULL", " "])


def table_of(data: bytes, dialect: Dialect | None = None) -> DelimitedTable:
    stream = io.BytesIO(data)
    return DelimitedTable(Opened("rows.csv", "delimited", stream, stream, len(data)), dialect or Dialect())


def values_of(data: bytes, dialect: Dialect | None = None) -> list[list[float]]:
    table = table_of(data, dialect)
    return [list(row.values) for row in table.rows(table.columns, None)]


def same(found: list[list[float]], wanted: list[list[float | None]]) -> bool:
    return len(found) == len(wanted) and all(
        (math.isnan(a) if b is None else a == b)
        for one, other in zip(found, wanted, strict=True)
        for a, b in zip(one, other, strict=True)
    )


@given(st.lists(st.lists(CELLS, min_size=3, max_size=3), min_size=1, max_size=8), SEPARATORS, GAPS, st.booleans())
def test_every_finite_number_and_gap_survives_the_trip_through_text(rows, separator, gap, crlf):
    if separator == "\t" and gap == " ":
        gap = ""
    lines = [
        separator.join(NAMES),
        *(separator.join(gap if v is None else repr(v) for v in row) for row in rows),
    ]
    data = ("\r\n" if crlf else "\n").join(lines).encode()
    assert same(values_of(data), rows)


@given(st.lists(st.lists(CELLS, min_size=3, max_size=3), min_size=1, max_size=5))
def test_decimal_commas_give_the_same_numbers(rows):
    lines = [
        ";".join(NAMES),
        *(";".join("" if v is None else repr(v).replace(".", ",") for v in row) for row in rows),
    ]
    assert same(values_of("\n".join(lines).encode(), Dialect(decimal=",")), rows)


@given(st.binary(max_size=200))
def test_any_bytes_are_read_or_refused_and_nothing_else(data):
    rows, refused = [], "rows.csv"
    try:
        rows = values_of(data)
    except InputError as error:
        refused = str(error)
    assert not any(math.isinf(value) for row in rows for value in row)
    assert refused.startswith("rows.csv")
    assert refused.isprintable()


@given(st.text(max_size=12), st.integers(1, 5))
def test_a_cell_that_is_no_number_is_named_by_line_and_column(text, good):
    quoted = '"' + text.replace('"', '""') + '"'
    data = "flow,speed\n" + "1,2\n" * good + f"3,{quoted}\n"
    plain = text.strip(" \t\r\n")
    try:
        value = float(plain) if plain.isascii() and plain.isprintable() and "_" not in plain else None
    except ValueError:
        value = None
    if plain.lower() in ("", "nan", "na", "null") or (value is not None and not math.isinf(value)):
        assert len(values_of(data.encode("utf-8", "surrogatepass"))) == good + 1
        return
    extra = len(("x" + text + "x").splitlines()) - 1 if any(mark in text for mark in "\r\n") else 0
    with pytest.raises(InputError, match=r"column 'speed'|cannot be split") as caught:
        values_of(data.encode("utf-8", "surrogatepass"))
    if not extra:
        assert f"line {good + 2}" in str(caught.value)


def test_columns_in_another_order_are_matched_by_name():
    table = table_of(b"speed,flow,pressure\n3,1,2\n")
    layout = arrange(table, like=NAMES)
    assert [list(row.values) for row in table.rows(layout.channels, None)] == [[1.0, 2.0, 3.0]]


def test_a_column_that_was_not_learned_is_left_out_and_said():
    layout = arrange(table_of(b"speed,flow,pressure,note\n3,1,2,x\n"), like=NAMES)
    assert layout.channels == list(NAMES)
    assert "'note'" in layout.said[0]


@pytest.mark.parametrize("text", ["0\x1f", "1_000", "\u0661", "1\x0b"])
def test_a_number_that_only_python_would_read_is_refused(text):
    with pytest.raises(InputError, match=r"line 2, column 'flow': expected a number"):
        values_of(f"flow,speed\n{text},1\n".encode())


def test_an_ignored_column_of_text_is_not_read():
    table = table_of(b"flow,product,speed\n1,UHT,3\n")
    layout = arrange(table, ignored=["product"])
    assert [list(row.values) for row in table.rows(layout.channels, None)] == [[1.0, 3.0]]


@pytest.mark.parametrize("text", ["NaN", "nan", "NA", "na", "null", "", "  "])
def test_gaps_are_nan(text):
    assert math.isnan(values_of(f"flow,speed\n{text},1\n".encode())[0][0])


@pytest.mark.parametrize("text", ["inf", "-inf", "Infinity", "1e999", "-1e400"])
def test_infinity_is_refused_however_written(text):
    with pytest.raises(InputError, match=r"line 2, column 'flow': expected a finite number"):
        values_of(f"flow,speed\n{text},1\n".encode())


def test_a_byte_order_mark_blank_lines_and_quotes_are_no_obstacle():
    data = b'\xef\xbb\xbf"flow, main",speed\r\n\r\n1,"2"\r\n\r\n3,4\r\n'
    table = table_of(data)
    assert table.columns == ("flow, main", "speed")
    rows = list(table.rows(table.columns, None))
    assert [row.place for row in rows] == ["line 3", "line 5"]
    assert [row.number for row in rows] == [1, 2]


def test_gzip_is_known_by_its_bytes_not_by_its_name(tmp_path):
    path = tmp_path / "rows.csv"
    path.write_bytes(gzip.compress(b"flow,speed\n1,2\n"))
    with open_table(str(path), Dialect()) as table:
        assert [list(row.values) for row in table.rows(table.columns, None)] == [[1.0, 2.0]]


def test_a_gzip_file_cut_short_says_after_which_line(tmp_path):
    path = tmp_path / "rows.csv.gz"
    whole = gzip.compress(b"flow,speed\n" + b"".join(b"%d,%d\n" % (i * 7919 % 1009, i) for i in range(5000)))
    path.write_bytes(whole[: len(whole) // 2])
    with (
        open_table(str(path), Dialect()) as table,
        pytest.raises(InputError, match=r"stopped after line \d{3,}"),
    ):
        list(table.rows(table.columns, None))


def test_a_row_is_given_out_before_the_next_one_arrives():
    reading, writing = os.pipe()
    with os.fdopen(writing, "wb", buffering=0) as source, os.fdopen(reading, "rb") as stream:
        source.write(b"flow,speed\n1,2\n")
        found: list[list[float]] = []
        arrived = threading.Semaphore(0)

        def read() -> None:
            table = DelimitedTable(Opened("standard input", "delimited", stream, stream, None), Dialect())
            for row in table.rows(table.columns, None):
                found.append(list(row.values))
                arrived.release()

        reader = threading.Thread(target=read)
        reader.start()
        assert arrived.acquire(timeout=10)
        source.write(b"3,4\n")
        assert arrived.acquire(timeout=10)
        assert found == [[1.0, 2.0], [3.0, 4.0]]
        source.close()
        reader.join(10)
        assert not reader.is_alive()


def test_parquet_gives_the_same_rows_as_text(tmp_path):
    pa = pytest.importorskip("pyarrow", reason="the extra parquet is not installed")
    pq = pytest.importorskip("pyarrow.parquet")
    path = tmp_path / "rows.parquet"
    pq.write_table(pa.table({"flow": [1.5, None, 3.0], "speed": [4, 5, 6], "time": [0.0, 0.5, 1.0]}), path)
    with open_table(str(path), Dialect()) as table:
        layout = arrange(table, time="time")
        rows = list(table.rows(layout.channels, layout.clock))
    assert same([list(row.values) for row in rows], [[1.5, 4.0], [None, 5.0], [3.0, 6.0]])
    assert rows[1].instant is not None
    assert rows[1].instant.value == 0.5


def test_parquet_text_and_infinity_are_named_by_column(tmp_path):
    pa = pytest.importorskip("pyarrow", reason="the extra parquet is not installed")
    pq = pytest.importorskip("pyarrow.parquet")
    path = tmp_path / "rows.parquet"
    pq.write_table(pa.table({"flow": ["a", "b"], "speed": [1.0, math.inf]}), path)
    for channels, message in (
        (["flow"], "column 'flow': expected numbers"),
        (["speed"], "row 2, column 'speed'"),
    ):
        with open_table(str(path), Dialect()) as table, pytest.raises(InputError, match=message):
            list(table.rows(channels, None))
