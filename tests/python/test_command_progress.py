"""Progress is shown on a terminal only, with rate and time left, and never inside a line of the narration."""

import os
import subprocess
import sys

import numpy as np
import pytest

fcntl = pytest.importorskip("fcntl", reason="no pseudo-terminals here")
pty = pytest.importorskip("pty", reason="no pseudo-terminals here")
termios = pytest.importorskip("termios", reason="no pseudo-terminals here")
pytest.importorskip("tqdm", reason="the extra progress is not installed")

ROWS = 30_000


@pytest.fixture(scope="module")
def rows(tmp_path_factory) -> str:
    """Write healthy rows with one stretch that alarms."""
    random = np.random.default_rng(4)
    values = random.standard_normal((ROWS, 2)) @ random.standard_normal((2, 5)) + 0.2 * random.standard_normal(
        (ROWS, 5)
    )
    values[20_000:20_050, 2] += 9
    path = tmp_path_factory.mktemp("progress") / "rows.csv"
    np.savetxt(path, values, delimiter=",", header="a,b,c,d,e", comments="", fmt="%.5f")
    return str(path)


def on_terminal(*arguments: str) -> str:
    ours, theirs = pty.openpty()
    fcntl.ioctl(theirs, termios.TIOCSWINSZ, b"\x18\x00\x50\x00\x00\x00\x00\x00")
    with subprocess.Popen([sys.executable, "-m", "perpend", *arguments], stdout=theirs, stderr=theirs, stdin=theirs):
        os.close(theirs)
        seen = b""
        while True:
            try:
                part = os.read(ours, 65536)
            except OSError:
                break
            if not part:
                break
            seen += part
    os.close(ours)
    return seen.decode()


def test_a_terminal_sees_rate_and_time_left_and_clean_lines(rows):
    seen = on_terminal("watch", rows)
    assert "rows/s" in seen
    assert " left" in seen
    for line in seen.replace("\r\n", "\n").split("\n"):
        shown = line.rpartition("\r")[2]
        assert not ("ALARM" in shown and "rows/s" in shown)
    alarm = next(line for line in seen.replace("\r\n", "\n").split("\n") if "ALARM" in line)
    assert alarm.rpartition("\r")[2].startswith("row ")


def test_a_pipe_sees_none_of_it(rows):
    found = subprocess.run([sys.executable, "-m", "perpend", "watch", rows], capture_output=True, text=True, timeout=60)
    assert found.returncode == 3
    assert found.stderr == ""
    assert "rows/s" not in found.stdout
