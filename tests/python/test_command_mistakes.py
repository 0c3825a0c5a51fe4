"""Mistakes of the first ten minutes: each is answered by one line that says what, where and what to do."""

import gzip
import re

import pytest

from perpend.cli import main

GOOD = "time,flow,pressure,speed\n" + "".join(
    f"2026-03-01 {i // 60:02}:{i % 60:02},{i % 7},{i % 5},{i % 3}\n" for i in range(60)
)

MISTAKES = {
    "empty file": ("", [], "the file is empty"),
    "blank lines only": ("\n\n\n", [], "nothing in it"),
    "header alone": ("flow,speed\n", [], "a header and no rows"),
    "no header": ("1.5,2.5\n3,4\n", [], "line 1: expected a header"),
    "column twice": ("flow,speed,flow\n1,2,3\n", [], "line 1: columns 1 and 3 are both named 'flow'"),
    "column without name": ("flow,,speed\n1,2,3\n", [], "line 1: column 2 has no name"),
    "wrong separator": (
        "flow;speed\n1;2\n",
        ["--separator", "comma"],
        "line 1: no comma in the header, one column only; try --separator semicolon",
    ),
    "one channel": ("flow\n1\n2\n", [], "at least 2 channels, got 'flow'"),
    "decimal comma": ("flow;speed\n1,5;2\n", [], "line 2, column 'flow': .*'1,5'; .*--decimal comma"),
    "decimal comma between commas": (
        "flow,speed\n1,5,2,5\n",
        [],
        "line 2: expected 2 cells .*got 4; .*--decimal comma",
    ),
    "grouped thousands": ('flow,speed\n"1,234.5",2\n', [], "line 2, column 'flow': .*must not be grouped"),
    "column of text": (
        "flow,product\n1,UHT milk\n",
        [],
        "line 2, column 'product': .*'UHT milk'; .*--ignore",
    ),
    "text far down": ("flow,speed\n" + "1,2\n" * 40 + "1,off\n", [], "line 42, column 'speed': .*'off'"),
    "infinity": ("flow,speed\n1,inf\n", [], "line 2, column 'speed': expected a finite number"),
    "row too short": (
        "flow,speed,torque\n1,2,3\n1,2\n",
        [],
        "line 3: expected 3 cells as in the header, got 2",
    ),
    "row too long": ("flow,speed,torque\n1,2,3,4\n", [], "line 2: expected 3 cells as in the header, got 4"),
    "quote open to the end": (
        'flow,speed\n1,2\n3,4\n5,"6\n' + "7,8\n" * 30,
        [],
        "line 4: a quotation mark opened there is not closed by line 34",
    ),
    "settle on a moment": (GOOD, ["--settle", "5"], "--settle: expected a whole number, at least 20, got '5'"),
    "alarm at every other row": (GOOD, ["--false-alarm", "0.5"], "--false-alarm: expected a share from 1e-9 to 0.2"),
    "no memory": (GOOD, ["--memory", "1"], "--memory: expected 2 rows or more, or none, got '1'"),
    "settle for ever": (GOOD, ["--settle", "1000000000000000"], "memory"),
    "open quote": ('flow,speed\n1,"2\n', [], "line 2: cannot be split into cells"),
    "one row": (
        "flow,speed\n1,2\n",
        [],
        "1 row, fewer than the 500 to settle on.*--learn FILE or a smaller --settle",
    ),
    "too few rows": (GOOD, [], "60 rows, fewer than the 500 to settle on"),
    "rows that never move": (
        "flow,speed,torque\n" + "4.5,1200,31\n" * 80,
        ["--settle", "50"],
        "80 rows, and no 50 of them to settle on: .*two channels or more must move",
    ),
    "time goes back": (
        "time,flow,speed\n2026-03-01 10:05,1,2\n2026-03-01 10:00,1,2\n",
        [],
        "line 3, column 'time': 2026-03-01 10:00 comes after 2026-03-01 10:05 of line 2; sort",
    ),
    "zone comes and goes": (
        "time,flow,speed\n2026-03-01 10:00,1,2\n2026-03-01T10:05Z,1,2\n",
        [],
        "line 3, column 'time': expected a date and time without zone",
    ),
    "date of two readings": (
        "time,flow,speed\n03/04/2026,1,2\n",
        [],
        "line 2, column 'time': expected a time such as",
    ),
    "empty clock": ("time,flow,speed\n,1,2\n", [], "line 2, column 'time': expected a time such as .*got ''"),
    "date and time apart": (
        "date,time,flow\n2026-03-01,10:00,1\n",
        [],
        "column 'time': .*a clock is one column",
    ),
    "clock mistyped": (GOOD, ["--time", "tiem"], "--time: there is no column 'tiem'; did you mean 'time'"),
    "ignored mistyped": (
        GOOD,
        ["--ignore", "sped"],
        "--ignore: there is no column 'sped'; did you mean 'speed'",
    ),
    "option mistyped": (GOOD, ["--setle", "20"], "no option '--setle'; did you mean --settle"),
    "option unknown": (GOOD, ["--zzz"], "no option '--zzz'; perpend watch --help lists"),
    "two files": (GOOD, ["other.csv"], "one FILE only, got 'other.csv' as well"),
    "memory of text": (
        GOOD,
        ["--memory", "long"],
        "--memory: expected 2 rows or more, or none, got 'long'",
    ),
    "memory of nothing": (GOOD, ["--memory", "0"], "--memory: expected"),
    "settle on a fraction": (
        GOOD,
        ["--settle", "2.5"],
        "--settle: expected a whole number, at least 20, got '2.5'",
    ),
    "false alarms in percent": (GOOD, ["--false-alarm", "1%"], "--false-alarm: expected a share .*got '1%'"),
    "false alarms above half": (GOOD, ["--false-alarm", "5"], "--false-alarm: expected a share"),
    "confirm backwards": (GOOD, ["--confirm", "5/3"], "--confirm: expected N/M with N up to M"),
    "rank of all channels": (GOOD, ["--rank", "3"], "--rank: expected 1 to 2 for 3 channels, got 3"),
    "rank of zero": (GOOD, ["--rank", "0"], "--rank: expected a whole number, at least 1"),
    "readings in a workbook": (
        GOOD,
        ["--readings", "out.xlsx"],
        "--readings: expected a name ending in .csv or .jsonl",
    ),
    "readings nowhere": (
        GOOD,
        ["--readings", "no/such/folder/out.csv"],
        "out.csv: --readings: cannot be written",
    ),
    "learn from nothing": (GOOD, ["--learn", "absent.csv"], "absent.csv: there is no such file"),
    "learn and settle": (GOOD, ["--learn", "a.csv", "--settle", "90"], "give --learn or --settle, not both"),
}


def complaint(capsys: pytest.CaptureFixture[str], *arguments: str) -> str:
    """Run and return the last line of the error stream; there must be no other but what was guessed."""
    assert main(arguments) == 2
    printed = capsys.readouterr()
    *guesses, last = printed.err.splitlines()
    assert all(re.search("is taken as the clock|are taken as separated|left out", line) for line in guesses)
    assert "Traceback" not in printed.err
    return last


@pytest.mark.parametrize("mistake", MISTAKES)
def test_a_mistake_is_answered_in_one_line_that_names_the_place(mistake, tmp_path, monkeypatch, capsys):
    text, options, wanted = MISTAKES[mistake]
    monkeypatch.chdir(tmp_path)
    (tmp_path / "rows.csv").write_text(text, encoding="utf-8")
    last = complaint(capsys, "watch", "rows.csv", *options)
    assert last.startswith("perpend watch: ")
    assert re.search(wanted, last)


@pytest.mark.parametrize(
    ("data", "wanted"),
    [
        (b"flow,temp \xb0C\n1,2\n", "line 1: byte 0xb0 is not UTF-8 text; save the file as UTF-8"),
        ("flow,speed\n1,2\n".encode("utf-16"), "UTF-16; save it as UTF-8"),
        (b"PK\x03\x04" + bytes(60), "a workbook or an archive; save the sheet as CSV"),
        (bytes(range(256)), "this is not text"),
        (b"\x1f\x8b\x08\x00broken", "gzip file is damaged"),
        (b"PAR1 and nothing more", "Parquet"),
    ],
    ids=["latin-1", "utf-16", "workbook", "binary", "gzip", "parquet"],
)
def test_bytes_that_are_no_text_are_told_by_what_they_are(data, wanted, tmp_path, monkeypatch, capsys):
    monkeypatch.chdir(tmp_path)
    (tmp_path / "rows.csv").write_bytes(data)
    last = complaint(capsys, "watch", "rows.csv")
    assert last.startswith("perpend watch: rows.csv")
    assert re.search(wanted, last)


def test_a_column_missing_from_what_was_learned_is_named(tmp_path, monkeypatch, capsys):
    monkeypatch.chdir(tmp_path)
    (tmp_path / "learn.csv").write_text(GOOD)
    (tmp_path / "rows.csv").write_text("time,flow,speed\n2026-03-02,1,2\n")
    last = complaint(capsys, "watch", "rows.csv", "--learn", "learn.csv")
    assert last == "perpend watch: rows.csv: missing, though in the file given to --learn: 'pressure'"


def test_readings_never_overwrite_the_input(tmp_path, monkeypatch, capsys):
    monkeypatch.chdir(tmp_path)
    (tmp_path / "rows.csv").write_text(GOOD)
    assert "overwrite the input" in complaint(capsys, "watch", "rows.csv", "--readings", "./rows.csv")
    assert (tmp_path / "rows.csv").read_text() == GOOD


def test_a_missing_file_a_folder_and_no_file_at_all_are_told_apart(tmp_path, monkeypatch, capsys):
    monkeypatch.chdir(tmp_path)
    assert complaint(capsys, "watch", "rows.csv") == "perpend watch: rows.csv: there is no such file"
    assert complaint(capsys, "watch", ".") == "perpend watch: .: expected a file, got a folder"
    assert "required: FILE" in complaint(capsys, "watch")


@pytest.mark.parametrize("arguments", [[], ["wach"], ["--wach"], ["demo", "--seed", "x"], ["demo", "rows.csv"]])
def test_a_command_mistyped_gets_one_line(arguments, capsys):
    assert complaint(capsys, *arguments).startswith("perpend")


def test_a_name_with_control_characters_stays_on_one_line(tmp_path, monkeypatch, capsys):
    monkeypatch.chdir(tmp_path)
    (tmp_path / "rows.csv").write_text('flow,"sp\need"\n1,x\n')
    assert "'sp\\need'" in complaint(capsys, "watch", "rows.csv")


def test_a_gzip_file_whose_inside_is_damaged_is_said_in_one_line(tmp_path, capsys):
    path = tmp_path / "rows.csv.gz"
    whole = bytearray(gzip.compress(b"flow,speed\n" + b"1,2\n" * 3000))
    whole[12:40] = bytes(28)
    path.write_bytes(bytes(whole))
    assert main(["watch", str(path)]) == 2
    complaint = capsys.readouterr().err
    assert complaint.count("\n") == 1
    assert "damaged" in complaint or "stopped after" in complaint


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (["--settle", "9999999999999"], "memory"),
        (["--report", "out.csv", "--readings", "out.csv"], "overwrite the readings"),
    ],
)
def test_what_cannot_be_had_is_said_in_one_line(tmp_path, capsys, monkeypatch, arguments, words):
    monkeypatch.chdir(tmp_path)
    (tmp_path / "rows.csv").write_text("flow,speed\n" + "1,2\n" * 30, encoding="utf-8")
    assert main(["watch", "rows.csv", *arguments]) == 2
    complaint = capsys.readouterr().err
    assert words in complaint
    assert complaint.count("\n") == 1
