"""Ctrl-C in the middle of a block call: it stops soon, and the object is whole and goes on."""

import os
import subprocess
import sys

import pytest

pytestmark = pytest.mark.skipif(os.name != "posix", reason="signals as POSIX has them")

# In a process of its own, which the signal is for. Without it each call would take half a minute or more.
PROGRAM = """
import os, signal, sys, threading, time
import numpy as np
from perpend import Basis, Tracker, Watch

rng = np.random.default_rng(12)
call = sys.argv[1]
if call in ("add_rows", "split_rows"):
    one = Basis(4000, 2000)
    rows = rng.standard_normal((400, 4000))
    if call == "split_rows":
        one.add_rows(rows)
        rows = np.repeat(rows, 6, axis=0)
    else:
        rows = rng.standard_normal((4000, 4000))
    known = lambda: one.rank
elif call == "update_rows":
    one, rows = Tracker(400, 40, memory=1000), np.resize(rng.standard_normal((4999, 400)), (60_000, 400))
    known = lambda: one.samples
else:
    one, rows = Watch(400, settle=200, rank=40), np.resize(rng.standard_normal((4999, 400)), (60_000, 400))
    known = lambda: one.ticks

wait = 0.5
if call == "split_rows":
    # It leaves no trace of how far it came: half of its own time has to do.
    begun = time.perf_counter()
    one.split_rows(rows)
    whole = time.perf_counter() - begun
    wait = whole / 20

before = known()
timer = threading.Timer(wait, os.kill, (os.getpid(), signal.SIGINT))
begun = time.perf_counter()
timer.start()
try:
    getattr(one, call)(rows)
except KeyboardInterrupt:
    stopped = time.perf_counter()
else:
    sys.exit("it went through")

eps = np.finfo(float).eps
learned = known() - before
if call == "add_rows":
    assert 0 < learned < len(rows)
    assert one.orthogonality_error() <= 10 * eps * one.rank**0.5
    # The rows up to somewhere, in their order, and nothing of the one after.
    again = one.triangular.T @ one.vectors
    assert np.abs(again - rows[:learned]).max() <= 8 * eps * 2000 * np.abs(rows).max()
    assert one.add(rows[learned]).accepted
elif call == "split_rows":
    assert stopped - begun < whole / 2
    coefficients, residuals = one.split_rows(rows[:2])
    assert np.linalg.norm(residuals) <= 4000 * eps * np.linalg.norm(rows[:2])
elif call == "update_rows":
    assert 0 < learned < len(rows)
    serial = Tracker(400, 40, memory=1000)
    serial.update_rows(rows[:learned])
    assert serial.to_bytes() == one.to_bytes()
    one.update_rows(rows[:10])
    assert one.samples == learned + 10
else:
    assert 0 < learned < len(rows)
    serial = Watch(400, settle=200, rank=40)
    serial.replay(rows[:learned])
    for row in rows[:5]:
        reading, expected = one.tick(row), serial.tick(row)
        assert (reading.tick, reading.spe, reading.t2) == (expected.tick, expected.spe, expected.t2)
"""


@pytest.mark.parametrize("call", ["add_rows", "split_rows", "update_rows", "replay"])
def test_an_interrupt_stops_a_block_call_and_leaves_the_rows_before_it_learned(call):
    command = [sys.executable, "-c", PROGRAM, call]
    outcome = subprocess.run(command, capture_output=True, text=True, timeout=300, check=False)
    assert outcome.returncode == 0, outcome.stderr
