"""``perpend watch``: the same readings from a file and a pipe, each as soon as its row arrives."""

import csv
import gzip
import json
import math
import os
import re
import signal
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import pytest

from perpend.cli import main

NAMES = [f"ch{i}" for i in range(8)]
SETTLE = 120
ROWS = 240
FAULT_AT = 200
PERPEND = [sys.executable, "-m", "perpend"]


def healthy(rows: int, seed: int) -> np.ndarray:
    random = np.random.default_rng(seed)
    axes = np.random.default_rng(11).standard_normal((2, len(NAMES)))
    return random.standard_normal((rows, 2)) @ axes * 3 + 0.3 * random.standard_normal((rows, len(NAMES))) + 40


def write(path: Path, rows: np.ndarray, start: int = 0) -> Path:
    with path.open("w", newline="") as out:
        table = csv.writer(out)
        table.writerow(["minutes", *NAMES])
        for index, row in enumerate(rows.tolist(), start=start):
            table.writerow([index, *("" if math.isnan(value) else repr(value) for value in row)])
    return path


@pytest.fixture(scope="module")
def folder(tmp_path_factory) -> Path:
    """Files of healthy rows and of rows with a shifted channel."""
    folder = tmp_path_factory.mktemp("watch")
    write(folder / "learn.csv", healthy(400, 1))
    rows = healthy(ROWS, 2)
    rows[30, 3] = math.nan
    rows[60:63] = math.nan
    write(folder / "quiet.csv", rows)
    rows = rows.copy()
    rows[FAULT_AT:, 5] += 12
    write(folder / "fault.csv", rows)
    return folder


def run(folder: Path, *arguments: str, **options) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [*PERPEND, "watch", *arguments],
        cwd=folder,
        capture_output=True,
        text=True,
        timeout=60,
        check=False,
        **options,
    )


def test_a_fault_is_told_with_row_time_statistic_limit_and_suspect(folder):
    found = run(folder, "fault.csv", "--learn", "learn.csv", "--time", "minutes")
    assert found.returncode == 3
    assert found.stderr == ""
    alarm = next(line for line in found.stdout.splitlines() if "ALARM" in line)
    row = int(alarm.split()[1])
    assert FAULT_AT < row <= FAULT_AT + 10
    assert f"{row - 1} min" in alarm
    assert re.search(r"(SPE|T2) [\d.]+ against [\d.]+ \(\d+(\.\d+)? times\)", alarm)
    suspects = next(line for line in found.stdout.splitlines() if "suspects:" in line)
    assert suspects.split()[1] == "ch5"


def test_healthy_rows_raise_nothing_and_the_summary_counts_them(folder):
    found = run(folder, "quiet.csv", "--learn", "learn.csv")
    assert found.returncode == 0
    assert "column 'minutes' is taken as the clock" in found.stderr
    lines = {line.split()[0]: line for line in found.stdout.splitlines() if line and line[0] != " "}
    assert f"{ROWS} of 8 channels; settled on learn.csv (400 rows)" in lines["rows"]
    assert "25 cells in 4 rows" in lines["gaps"]
    assert lines["alarms"].split()[1] == "none"
    assert "no protective system" in found.stdout
    assert all(len(line) <= 80 for line in found.stdout.splitlines())


def test_rows_on_standard_input_give_the_readings_of_the_file(folder):
    options = ["--learn", "learn.csv", "--time", "minutes", "--readings"]
    from_file = run(folder, "fault.csv", *options, "file.jsonl")
    with (folder / "fault.csv").open() as rows:
        from_pipe = run(folder, "-", *options, "pipe.jsonl", stdin=rows)
    assert (from_file.returncode, from_file.stdout) == (from_pipe.returncode, from_pipe.stdout)
    assert (folder / "file.jsonl").read_bytes() == (folder / "pipe.jsonl").read_bytes()


def test_each_reading_is_written_before_the_next_row_arrives(folder):
    lines = (folder / "fault.csv").read_text().splitlines(keepends=True)[:6]
    target = folder / "live.csv"
    arguments = [
        *PERPEND,
        "watch",
        "-",
        "--learn",
        "learn.csv",
        "--time",
        "minutes",
        "--readings",
        "live.csv",
    ]
    with subprocess.Popen(
        arguments, cwd=folder, stdin=subprocess.PIPE, stdout=subprocess.PIPE, stderr=subprocess.PIPE
    ) as watch:
        assert watch.stdin is not None
        watch.stdin.write(lines[0].encode())
        for count, line in enumerate(lines[1:], start=1):
            watch.stdin.write(line.encode())
            watch.stdin.flush()
            deadline = time.monotonic() + 20
            while time.monotonic() < deadline and not (target.exists() and target.read_text().count("\n") == count + 1):
                time.sleep(0.01)
            assert target.read_text().count("\n") == count + 1
        watch.communicate(timeout=20)
    assert watch.returncode == 0


def test_csv_and_jsonl_readings_hold_the_same_figures(folder):
    run(folder, "fault.csv", "--learn", "learn.csv", "--readings", "both.csv")
    run(folder, "fault.csv", "--learn", "learn.csv", "--readings", "both.jsonl")
    objects = [json.loads(line) for line in (folder / "both.jsonl").read_text().splitlines()]
    with (folder / "both.csv").open(newline="") as file:
        cells = list(csv.DictReader(file))
    assert len(objects) == len(cells) == ROWS
    for one, other in zip(objects, cells, strict=True):
        for name in ("spe", "spe_limit", "t2", "t2_limit"):
            assert (float(other[name]) if other[name] else None) == one[name]
        assert other["phase"] == one["phase"]
        assert other["alarm"] == str(int(one["alarm"]))
    assert objects[60]["spe"] is None
    assert objects[30]["missing"] == ["ch3"]
    assert objects[-1]["suspects"][0]["channel"] == "ch5"


def test_settling_on_the_first_rows_of_the_stream_needs_no_other_file(folder):
    found = run(folder, "fault.csv", "--settle", str(SETTLE), "--time", "minutes", "--memory", "none")
    assert found.returncode == 3
    assert f"settled on the first {SETTLE}" in found.stdout


def test_gzip_semicolons_and_column_order_change_nothing(folder):
    options = ["--learn", "learn.csv", "--time", "minutes"]
    plain = run(folder, "fault.csv", *options).stdout
    text = (folder / "fault.csv").read_text()
    (folder / "packed.csv.gz").write_bytes(gzip.compress(text.encode()))
    shuffled = [";".join(reversed(line.split(","))) for line in text.splitlines()]
    (folder / "shuffled.csv").write_text("\n".join(shuffled) + "\n")
    assert run(folder, "packed.csv.gz", *options).stdout == plain
    learned = run(folder, "shuffled.csv", *options)
    assert learned.stdout == plain
    assert "separated by semicolons" in learned.stderr


def test_an_error_in_the_middle_keeps_the_readings_before_it(folder):
    lines = (folder / "quiet.csv").read_text().splitlines()
    lines[101] = lines[101].replace(lines[101].split(",")[4], "fault", 1)
    (folder / "broken.csv").write_text("\n".join(lines) + "\n")
    found = run(folder, "broken.csv", "--learn", "learn.csv", "--time", "minutes", "--readings", "broken.jsonl")
    assert found.returncode == 2
    assert found.stderr.startswith("perpend watch: broken.csv, line 102, column 'ch3': ")
    assert found.stderr.count("\n") == 1
    assert len((folder / "broken.jsonl").read_text().splitlines()) == 100


def test_interrupt_ends_with_a_summary_and_130(folder):
    arguments = [*PERPEND, "watch", "-", "--learn", "learn.csv", "--time", "minutes", "--readings", "cut.csv"]
    with subprocess.Popen(
        arguments, cwd=folder, stdin=subprocess.PIPE, stdout=subprocess.PIPE, stderr=subprocess.PIPE
    ) as watch:
        assert watch.stdin is not None
        watch.stdin.write("".join((folder / "quiet.csv").read_text().splitlines(keepends=True)[:50]).encode())
        watch.stdin.flush()
        deadline = time.monotonic() + 20
        target = folder / "cut.csv"
        while time.monotonic() < deadline and not (target.exists() and target.read_text().count("\n") == 50):
            time.sleep(0.01)
        watch.send_signal(signal.SIGINT)
        out, err = watch.communicate(timeout=20)
    assert watch.returncode == 130
    assert b"interrupted after row 49" in err
    assert b"Traceback" not in err
    assert b"healthy" in out


def test_a_closed_pipe_is_no_error(folder):
    command = f"'{sys.executable}' -m perpend watch fault.csv --learn learn.csv --time minutes | true"
    found = subprocess.run(["sh", "-c", command], cwd=folder, capture_output=True, text=True, timeout=60)
    assert found.stderr == ""


def test_help_fits_a_terminal_and_names_exit_codes_and_cautions():
    environment = {**os.environ, "COLUMNS": "80"}
    for command in ([], ["watch"], ["demo"]):
        found = subprocess.run(
            [*PERPEND, *command, "--help"],
            capture_output=True,
            text=True,
            timeout=60,
            check=True,
            env=environment,
        )
        assert all(len(line) <= 80 for line in found.stdout.splitlines())
        assert "no protective system" in found.stdout


def test_a_logger_that_hangs_is_told_at_the_end_and_not_passed_over_as_healthy(tmp_path, capsys):
    rng = np.random.default_rng(8)
    rows = rng.standard_normal((1500, 2)) @ rng.standard_normal((2, 5)) + 0.1 * rng.standard_normal((1500, 5))
    rows[800:] = rows[800]
    path = tmp_path / "rows.csv"
    lines = [",".join(f"p{i}" for i in range(5)), *(",".join(map(repr, row)) for row in rows.tolist())]
    path.write_text("\n".join(lines), encoding="utf-8")
    main(["watch", str(path)])
    printed = capsys.readouterr().out
    still = next(line for line in printed.splitlines() if line.startswith("still"))
    assert 600 <= int(still.split()[1]) <= 700
    assert "p0, p1, p2, p3, p4" in " ".join(printed.split())


def test_names_that_a_terminal_would_obey_are_written_out(tmp_path):
    names = ["a\x1b[31m", "b\u202e", "c\u2066", "Druck \u00e4", "\u6e29", "e", "f", "g"]
    rows = healthy(ROWS, 2)
    rows[FAULT_AT:, :3] += 12
    with (tmp_path / "names.csv").open("w", newline="", encoding="utf-8") as out:
        table = csv.writer(out)
        table.writerow(names)
        table.writerows(rows.tolist())
    outcome = run(
        tmp_path, "names.csv", "--time", "none", "--settle", str(SETTLE), "--readings", "r.csv", encoding="utf-8"
    )
    said = outcome.stdout + outcome.stderr + (tmp_path / "r.csv").read_text(encoding="utf-8")
    assert not any(character in said for character in "\x1b\u202e\u2066")
    assert "a\\x1b[31m" in outcome.stdout
    assert "suspects" in outcome.stdout


@pytest.mark.skipif(os.name != "posix", reason="pipes as POSIX has them")
def test_a_run_whose_reader_has_gone_is_finished_all_the_same(folder, tmp_path):
    readings = tmp_path / "readings.csv"
    command = [*PERPEND, "watch", "fault.csv", "--settle", str(SETTLE), "--readings", str(readings)]
    reader, writer = os.pipe()
    os.close(reader)
    try:
        outcome = subprocess.run(command, cwd=folder, stdout=writer, stderr=subprocess.PIPE, text=True, check=False)
    finally:
        os.close(writer)
    assert outcome.returncode == 3
    assert readings.read_text().count("\n") == ROWS + 1
    assert "Traceback" not in outcome.stderr
    assert "Broken" not in outcome.stderr
