"""Saves that were killed: what they left beside the file goes with the next one, what is being written stays."""

import os
import signal
import subprocess
import sys
import threading

import numpy as np
import pytest

from perpend import Basis

fcntl = pytest.importorskip("fcntl", reason="locks as POSIX has them")

# Killed by the system in the middle of writing: the limit on the size of files, which Python would ignore.
KILLED = """
import resource, signal, sys
import numpy as np
from perpend import Basis
signal.signal(signal.SIGXFSZ, signal.SIG_DFL)
resource.setrlimit(resource.RLIMIT_FSIZE, (4096, 4096))
basis = Basis(40)
basis.add_rows(np.random.default_rng(2).normal(size=(30, 40)))
basis.save(sys.argv[1])
"""


def save_killed(path):
    """Has a process save there that does not live to the end; the file it leaves."""
    before = set(os.listdir(path.parent))
    assert subprocess.run([sys.executable, "-c", KILLED, path], check=False).returncode == -signal.SIGXFSZ
    (left,) = set(os.listdir(path.parent)) - before
    return path.parent / left


def test_what_a_killed_save_left_goes_with_the_next_and_the_old_file_was_whole(tmp_path):
    path, basis = tmp_path / "state", Basis(3)
    basis.save(path)
    for _ in range(2):
        assert 0 < save_killed(path).stat().st_size <= 4096
        assert Basis.load(path).to_bytes() == basis.to_bytes()
        basis.add(np.random.default_rng(3).normal(size=3))
        basis.save(path)
        assert os.listdir(tmp_path) == ["state"]
        assert Basis.load(path).to_bytes() == basis.to_bytes()


def test_saves_killed_over_and_over_leave_one_file_at_most(tmp_path):
    path = tmp_path / "state"
    left = save_killed(path)
    for _ in range(3):
        assert subprocess.run([sys.executable, "-c", KILLED, path], check=False).returncode == -signal.SIGXFSZ
        assert os.listdir(tmp_path) == [left.name]


def test_what_is_still_being_written_is_left_alone(tmp_path):
    path, basis = tmp_path / "state", Basis(3)
    left = save_killed(path)
    with left.open("rb") as writer:
        # As its writer would, if it lived.
        fcntl.flock(writer, fcntl.LOCK_EX)
        basis.save(path)
        assert sorted(os.listdir(tmp_path)) == [left.name, "state"]
    basis.save(path)
    assert os.listdir(tmp_path) == ["state"]


def test_leftovers_of_other_files_and_all_that_only_looks_like_one_stay(tmp_path):
    other = save_killed(tmp_path / "other")
    left = save_killed(tmp_path / "state")
    assert other.name != left.name
    os.remove(left)
    victim = tmp_path / "victim"
    victim.write_text("not to be touched")
    left.symlink_to(victim)
    second = left.with_name(left.name.removesuffix("0") + "1")
    os.mkfifo(second)
    Basis(3).save(tmp_path / "state")
    assert victim.read_text() == "not to be touched"
    assert set(os.listdir(tmp_path)) == {"state", "victim", other.name, left.name, second.name}


def test_a_name_as_long_as_names_can_be_is_saved_to(tmp_path):
    path = tmp_path / ("n" * 255)
    Basis(3).save(path)
    assert Basis.load(path).rank == 0
    assert os.listdir(tmp_path) == [path.name]


def test_many_threads_saving_over_leftovers_leave_one_file(tmp_path):
    path = tmp_path / "state"
    save_killed(path)
    failures = []

    def save():
        try:
            for _ in range(20):
                Basis(3).save(path)
        except OSError as failure:
            failures.append(failure)

    threads = [threading.Thread(target=save) for _ in range(6)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join(60)
    assert not failures
    Basis(3).save(path)
    assert os.listdir(tmp_path) == ["state"]
