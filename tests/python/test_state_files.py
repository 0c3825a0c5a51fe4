"""Files of states: the old one or the new one, never half of one."""

import errno
import os
import stat
import subprocess
import sys
import threading

import numpy as np
import pytest

from perpend import Basis, Tracker

posix = pytest.mark.skipif(os.name != "posix", reason="modes, links and devices as POSIX has them")
superuser = os.name == "posix" and os.geteuid() == 0


def old_and_new():
    old, new = Basis(40), Basis(40)
    new.add_rows(np.random.default_rng(2).normal(size=(30, 40)))
    return old, new


def test_saving_leaves_one_file_and_nothing_beside(tmp_path):
    old, new = old_and_new()
    path = tmp_path / "state"
    old.save(path)
    new.save(path)
    assert Basis.load(path).to_bytes() == new.to_bytes()
    assert os.listdir(tmp_path) == ["state"]


def test_a_path_without_a_folder_is_in_the_working_folder(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    old_and_new()[0].save("state")
    assert Basis.load("state").rank == 0


@posix
def test_the_mode_of_the_old_file_is_kept_and_a_new_one_has_that_of_any_new_file(tmp_path):
    old, new = old_and_new()
    path, plain = tmp_path / "state", tmp_path / "plain"
    old.save(path)
    plain.touch()
    assert stat.S_IMODE(path.stat().st_mode) == stat.S_IMODE(plain.stat().st_mode)
    for mode in (0o640, 0o600, 0o444):
        path.chmod(mode)
        new.save(path)
        assert stat.S_IMODE(path.stat().st_mode) == mode


@posix
def test_a_link_stays_a_link_even_where_its_file_is_yet_to_be_made(tmp_path):
    old, new = old_and_new()
    (tmp_path / "data").mkdir()
    link, target = tmp_path / "link", tmp_path / "data" / "state"
    link.symlink_to("data/state")
    for owner in (old, new):
        owner.save(link)
        assert link.is_symlink()
        assert target.read_bytes() == owner.to_bytes()
    (tmp_path / "circle").symlink_to("circle")
    with pytest.raises(OSError, match="circle"):
        new.save(tmp_path / "circle")


@posix
def test_what_is_no_file_is_neither_replaced_nor_read(tmp_path):
    basis = old_and_new()[0]
    os.mkfifo(tmp_path / "pipe")
    for path in (tmp_path / "pipe", tmp_path, "/dev/full"):
        with pytest.raises(OSError, match=f"{path}: expected a regular file"):
            basis.save(path)
    for path in (tmp_path, "/dev/zero"):
        with pytest.raises(OSError, match=f"{path}: expected a regular file"):
            Basis.load(path)
    assert os.listdir(tmp_path) == ["pipe"]
    assert stat.S_ISCHR(os.stat("/dev/full").st_mode)


def test_errors_are_those_of_the_system_and_name_the_path(tmp_path):
    path = tmp_path / "nowhere" / "state"
    for call in (old_and_new()[0].save, Basis.load, Tracker.load):
        with pytest.raises(FileNotFoundError) as caught:
            call(path)
        assert caught.value.errno == errno.ENOENT
        assert caught.value.filename == str(path)


# Run in a process of its own, in the folder: the superuser, who may write anywhere, becomes someone else.
READ_ONLY = """
import os, sys
sys.path.insert(0, sys.argv[1])
from test_state_files import old_and_new
old, new = old_and_new()
old.save("state")
os.chmod(".", 0o555)
if os.geteuid() == 0:
    os.setuid(65534)
try:
    new.save("state")
except PermissionError as error:
    assert error.filename == "state"
else:
    sys.exit("the save went through")
assert open("state", "rb").read() == old.to_bytes()
assert os.listdir() == ["state"]
"""


def run(program, folder, *arguments):
    here = os.path.dirname(os.path.abspath(__file__))
    command = [sys.executable, "-c", program, here, *arguments]
    outcome = subprocess.run(command, cwd=folder, capture_output=True, text=True, check=False)
    assert outcome.returncode == 0, outcome.stderr


@posix
def test_a_read_only_folder_is_an_error_and_leaves_the_old_file(tmp_path):
    try:
        run(READ_ONLY, tmp_path)
    finally:
        tmp_path.chmod(0o755)


# Run in a process of its own: fills what there is, then saves over the old file.
OUT_OF_SPACE = """
import errno, os, sys
sys.path.insert(0, sys.argv[1])
from test_state_files import old_and_new
from perpend import Basis
path, how = sys.argv[2:]
old, new = old_and_new()
old.save(path)
if how == "limit":
    import resource
    resource.setrlimit(resource.RLIMIT_FSIZE, (4096, 4096))
try:
    new.save(path)
except OSError as error:
    assert error.errno == (errno.EFBIG if how == "limit" else errno.ENOSPC), error
    assert error.filename == path
else:
    sys.exit("the save went through")
assert Basis.load(path).to_bytes() == old.to_bytes()
assert os.listdir(os.path.dirname(path)) == ["state"]
"""


@posix
def test_a_write_that_stops_halfway_leaves_the_old_file(tmp_path):
    run(OUT_OF_SPACE, tmp_path, str(tmp_path / "state"), "limit")


@pytest.mark.skipif(not (superuser and sys.platform == "linux"), reason="only the superuser mounts a disk to fill")
def test_a_full_disk_leaves_the_old_file(tmp_path):
    mounted = subprocess.run(
        ["mount", "-t", "tmpfs", "-o", "size=12k", "tmpfs", tmp_path], capture_output=True, text=True, check=False
    )
    if mounted.returncode != 0:
        pytest.skip(f"no disk can be mounted here: {mounted.stderr.strip()}")
    try:
        run(OUT_OF_SPACE, tmp_path, str(tmp_path / "state"), "disk")
    finally:
        subprocess.run(["umount", tmp_path], check=True)


def test_many_threads_saving_to_one_name_leave_one_whole_state(tmp_path):
    path = tmp_path / "state"
    owners = [Basis(30) for _ in range(4)]
    for index, owner in enumerate(owners):
        owner.add_rows(np.random.default_rng(index).normal(size=(10 + index, 30)))
    failures = []

    def save(owner):
        try:
            for _ in range(10):
                owner.save(path)
                Basis.load(path)
        except Exception as failure:
            failures.append(failure)

    threads = [threading.Thread(target=save, args=(owner,)) for owner in owners]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert not failures
    assert path.read_bytes() in [owner.to_bytes() for owner in owners]
    assert os.listdir(tmp_path) == ["state"]
