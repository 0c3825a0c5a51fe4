"""The watch on open telemetry of the Tennessee Eastman process, where it lies beside the repository."""

import csv
from pathlib import Path

import numpy as np
import pytest

from perpend import Watch

TELEMETRY = Path(__file__).parents[3] / "shared" / "telemetry"
FAULT_STARTS = 160

pytestmark = pytest.mark.skipif(not TELEMETRY.is_dir(), reason="the telemetry lies outside the repository")


def run(name):
    with (TELEMETRY / f"{name}.csv").open() as file:
        header, *rows = csv.reader(file)
    return header[1:], np.array(rows, dtype=float)[:, 1:]


def watched(name):
    """Every reading of a run, by a watch with default options that settled on the training run."""
    names, training = run("normal_training")
    watch = Watch(len(names), names)
    watch.settle_on(training)
    return [watch.tick(row) for row in run(name)[1]]


def test_a_healthy_run_is_alarmed_at_most_one_row_in_a_hundred():
    readings = watched("normal_test")
    assert sum(reading.alarm for reading in readings) <= 9
    assert sum(bool(reading.exceeds) for reading in readings) <= 9


@pytest.mark.parametrize(
    ("name", "within", "suspect", "among"),
    [
        ("fault_02_test", 30, None, 0),
        ("fault_04_test", 30, "xmv_10", 1),
        ("fault_13_test", 60, None, 0),
        ("fault_14_test", 10, "xmeas_21", 3),
    ],
)
def test_a_fault_is_alarmed_in_time_with_its_suspect(name, within, suspect, among):
    readings = watched(name)
    assert not any(reading.alarm for reading in readings[:FAULT_STARTS])
    first = next(reading for reading in readings[FAULT_STARTS:] if reading.alarm)
    assert first.tick - FAULT_STARTS < within
    if suspect:
        assert suspect in [name for name, _ in first.suspects(among)]
