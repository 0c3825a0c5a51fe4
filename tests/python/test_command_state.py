"""``perpend watch --state``: cut off at any moment, the next run goes on from a whole state."""

import csv
import os
import random
import signal
import subprocess
import sys
import time
from contextlib import suppress
from pathlib import Path

import numpy as np
import pytest

from perpend import Watch
from perpend.cli import main
from perpend.keeping import Keeper, resume
from perpend.refusal import InputError

NAMES = ["flow", "torque", "gap", "heat", "speed"]
OPTIONS = ["--time", "none", "--settle", "60", "--memory", "300"]
posix = pytest.mark.skipif(os.name != "posix", reason="signals as POSIX has them")


def rows_of(count: int, seed: int = 12) -> np.ndarray:
    rng = np.random.default_rng(seed)
    rows = rng.standard_normal((count, 1)) * [2, 1, -1, 3, 1] + 0.2 * rng.standard_normal((count, 5)) + 9
    rows[count // 2 :, 3] += 2.5
    return rows


def lines_of(rows: np.ndarray) -> list[str]:
    return [",".join(map(repr, row)) + "\n" for row in rows.tolist()]


def write(path: Path, rows: np.ndarray, names: list[str] = NAMES) -> str:
    path.write_text(",".join(names) + "\n" + "".join(lines_of(rows)))
    return str(path)


def statistics(path: Path) -> list[list[str]]:
    """The readings without the number of the row in its input."""
    with path.open() as file:
        return [row[1:] for row in csv.reader(file)]


def test_two_runs_with_a_state_give_the_readings_of_one_run(tmp_path, capsys):
    rows = rows_of(400)
    whole = write(tmp_path / "whole.csv", rows)
    code = main(["watch", whole, *OPTIONS, "--readings", str(tmp_path / "whole.jsonl.csv")])
    state, readings = str(tmp_path / "state"), str(tmp_path / "readings.csv")
    for part in (rows[:150], rows[150:151], rows[151:]):
        name = write(tmp_path / "part.csv", part)
        last = main(["watch", name, *OPTIONS, "--state", state, "--readings", readings])
    assert last == code == 3
    assert statistics(tmp_path / "readings.csv") == statistics(tmp_path / "whole.jsonl.csv")
    assert f"{state}: resumed after row 151" in capsys.readouterr().err


def test_rows_to_settle_on_are_read_by_the_first_run_only(tmp_path, capsys):
    learn = write(tmp_path / "learn.csv", rows_of(200)[:100])
    rows = write(tmp_path / "rows.csv", rows_of(30)[:15])
    state = tmp_path / "state"
    command = ["watch", rows, "--time", "none", "--learn", learn, "--state", str(state)]
    assert main(command) == 0
    assert Watch.load(state).ticks == 15
    Path(learn).unlink()
    assert main(command) == 0
    assert Watch.load(state).ticks == 30
    assert "resumed after row 15" in capsys.readouterr().err


def test_a_run_too_short_to_settle_is_kept_and_gone_on_with(tmp_path):
    state = tmp_path / "state"
    for part in range(3):
        name = write(tmp_path / "part.csv", rows_of(200)[25 * part : 25 * part + 25])
        assert main(["watch", name, *OPTIONS, "--state", str(state)]) == 0
        assert Watch.load(state).phase == ("settling" if part < 2 else "healthy")


@pytest.mark.parametrize(
    ("options", "names", "said"),
    [
        (["--memory", "77"], NAMES, "--memory: the state was made with 300.0, got 77.0"),
        (["--confirm", "2/4"], NAMES, "--confirm: the state was made with"),
        (["--false-alarm", "0.01"], NAMES, "--false-alarm: the state was made with 0.001, got 0.01"),
        ([], ["flow", "torque", "gap", "heat", "pressure"], "watches column 'speed', which the input does not have"),
        ([], ["torque", "flow", "gap", "heat", "speed"], "the same columns in another order"),
    ],
)
def test_a_state_of_another_watch_is_refused_and_left_alone(tmp_path, capsys, options, names, said):
    state = tmp_path / "state"
    main(["watch", write(tmp_path / "a.csv", rows_of(80)), *OPTIONS, "--state", str(state)])
    before = state.read_bytes()
    capsys.readouterr()
    code = main(
        ["watch", write(tmp_path / "b.csv", rows_of(80), names), "--time", "none", "--state", str(state), *options]
    )
    error = capsys.readouterr().err.splitlines()[-1]
    assert code == 2
    assert said in error
    assert state.read_bytes() == before


def test_what_is_no_state_is_refused_and_left_alone(tmp_path, capsys):
    rows = write(tmp_path / "rows.csv", rows_of(80))
    state = tmp_path / "notes.txt"
    state.write_text("not a state but somebody's notes\n")
    assert main(["watch", rows, *OPTIONS, "--state", str(state)]) == 2
    assert "give another file, or move this one away" in capsys.readouterr().err
    assert state.read_text() == "not a state but somebody's notes\n"
    assert main(["watch", rows, *OPTIONS, "--state", rows]) == 2
    assert "would overwrite the input" in capsys.readouterr().err
    assert main(["watch", rows, *OPTIONS, "--state", str(tmp_path / "none" / "state")]) == 2
    assert "--state: not saved, No such file or directory" in capsys.readouterr().err


def test_a_full_disk_on_the_way_is_said_once_and_watching_goes_on(tmp_path, capsys):
    watch, seconds = Watch(5, NAMES), iter(range(0, 10_000, 6))
    keeper = Keeper(watch, str(tmp_path / "state"), now=lambda: float(next(seconds)))
    (tmp_path / "state").mkdir()
    for row in rows_of(20):
        keeper.take(None, watch.tick(row))
    said = capsys.readouterr().err
    assert said.count("not saved") == 1
    assert "watching on" in said
    with pytest.raises(InputError, match="not saved"):
        keeper.save()
    (tmp_path / "state").rmdir()
    keeper.save()
    assert resume(str(tmp_path / "state"), NAMES, {}).to_bytes() == watch.to_bytes()


# A run that saves after every row, so that a kill often falls into a save.
PROGRAM = """
import sys
from perpend import keeping
keeping.EVERY_SECONDS = 0.0
from perpend.cli import main
sys.exit(main(sys.argv[1:]))
"""


def start(folder: Path, first: int, lines: list[str]) -> subprocess.Popen[str]:
    """A run on standard input, fed with the rows from `first` on."""
    process = subprocess.Popen(
        [sys.executable, "-c", PROGRAM, "watch", "-", *OPTIONS, "--state", "state"],
        cwd=folder,
        stdin=subprocess.PIPE,
        stdout=subprocess.DEVNULL,
        stderr=subprocess.DEVNULL,
        text=True,
    )
    assert process.stdin is not None
    with suppress(BrokenPipeError):
        process.stdin.write(",".join(NAMES) + "\n" + "".join(lines[first:]))
        process.stdin.flush()
    return process


def kill_again_and_again(folder: Path, kills: int, seed: int) -> None:
    chance = random.Random(seed)
    rows = rows_of(40_000)
    lines = lines_of(rows)
    state, seen = folder / "state", 0
    for _ in range(kills):
        # The pipe holds some hundred rows: the run is fed them while it is being killed.
        process = start(folder, seen, lines[: seen + 700])
        deadline = time.monotonic() + 60
        while not state.exists() and time.monotonic() < deadline:
            time.sleep(0.01)
        time.sleep(chance.uniform(0.0, 0.6))
        process.send_signal(signal.SIGKILL)
        process.wait()
        with suppress(BrokenPipeError):
            process.stdin.close()
        # Whole, whatever the moment; and never behind what it was.
        ticks = Watch.load(state).ticks
        assert ticks >= seen
        seen = ticks
    expected = Watch(5, NAMES, settle=60, memory=300)
    expected.replay(rows[:seen])
    assert Watch.load(state).to_bytes() == expected.to_bytes()
    assert seen > 0
    # What kills left beside is taken away by a save that none interrupts.
    expected.save(state)
    assert not list(folder.glob(".perpend-*"))


@posix
def test_killed_at_any_moment_it_resumes_from_a_whole_state(tmp_path):
    kill_again_and_again(tmp_path, kills=6, seed=1)


@posix
@pytest.mark.slow
def test_killed_two_hundred_times_it_resumes_each_time_from_a_whole_state(tmp_path):
    kill_again_and_again(tmp_path, kills=200, seed=2)


@posix
@pytest.mark.parametrize("number", [signal.SIGTERM, signal.SIGINT])
def test_asked_to_end_it_saves_all_it_has_judged(tmp_path, number):
    lines = lines_of(rows_of(200))
    process = subprocess.Popen(
        [sys.executable, "-m", "perpend", "watch", "-", *OPTIONS, "--state", "state", "--readings", "out.csv"],
        cwd=tmp_path,
        stdin=subprocess.PIPE,
        stdout=subprocess.DEVNULL,
        stderr=subprocess.PIPE,
        text=True,
    )
    assert process.stdin is not None
    assert process.stderr is not None
    process.stdin.write(",".join(NAMES) + "\n" + "".join(lines[:90]))
    process.stdin.flush()
    out, deadline = tmp_path / "out.csv", time.monotonic() + 60
    while time.monotonic() < deadline and (not out.exists() or out.read_text().count("\n") < 91):
        time.sleep(0.02)
    process.send_signal(number)
    process.stdin.close()
    assert process.wait() == 130
    with process.stderr as error:
        assert "interrupted after row 90" in error.read()
    assert Watch.load(tmp_path / "state").ticks == 90
