"""A process forked while its threads are at work: the child can use every object."""

import os
import subprocess
import sys

import pytest

pytestmark = pytest.mark.skipif(not hasattr(os, "fork"), reason="no forks here")

# In a process of its own: threads that fork are nothing to do to a test run.
PROGRAM = """
import os, signal, sys, threading, time, warnings
import numpy as np
from perpend import Basis, Tracker, Watch

warnings.simplefilter("ignore")  # Python's own about forks among threads: it is what is tried here.
kind, how = sys.argv[1:]
rng = np.random.default_rng(8)
if kind == "basis":
    shared, rows = Basis(3000, 300), rng.standard_normal((250, 3000))

    def work():
        shared.add_rows(rows)
        while shared.rank:
            shared.drop(shared.rank - 1)

    def use():
        assert shared.add_rows(rows[:3])[0].shape == (3,)
        assert shared.orthogonality_error() <= 10 * np.finfo(float).eps * 300**0.5
        assert Basis.from_bytes(shared.to_bytes()).rank == shared.rank
elif kind == "tracker":
    shared, rows = Tracker(60, 6, memory=100), rng.standard_normal((20_000, 60))

    def work():
        shared.update_rows(rows)

    def use():
        before = shared.samples
        shared.update_rows(rows[:5])
        assert shared.samples == before + 5
        assert np.isfinite(shared.energies).all()
        assert shared.copy().orthogonality_error() <= 1e-14
else:
    shared, rows = Watch(24, settle=100), rng.standard_normal((20_000, 24))

    def work():
        shared.replay(rows)

    def use():
        before = shared.ticks
        assert shared.tick(rows[0]).tick == before
        assert len(shared.replay(rows[:9])["tick"]) == 9

def go_on():
    while not done.is_set():
        work()

def read():
    while not done.is_set():
        repr(shared)

done = threading.Event()
threads = [threading.Thread(target=task, daemon=True) for task in (go_on, read, read)]
for thread in threads:
    thread.start()
for attempt in range(20):
    time.sleep(0.002 * (attempt % 5))
    child = os.fork()
    if child == 0:
        signal.alarm(20)  # ends a child that hangs
        use()
        if how == "again":
            grandchild = os.fork()
            if grandchild == 0:
                use()
                os._exit(0)
            assert os.waitpid(grandchild, 0)[1] == 0
        os._exit(0)
    status = os.waitpid(child, 0)[1]
    assert status == 0, f"child {attempt}: status {status}"
done.set()
for thread in threads:
    thread.join()
"""


@pytest.mark.parametrize("how", ["once", "again"])
@pytest.mark.parametrize("kind", ["basis", "tracker", "watch"])
def test_a_child_forked_while_others_work_on_an_object_can_use_it(kind, how):
    command = [sys.executable, "-c", PROGRAM, kind, how]
    outcome = subprocess.run(command, capture_output=True, text=True, timeout=120, check=False)
    assert outcome.returncode == 0, outcome.stderr
