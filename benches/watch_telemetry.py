"""The watch on open telemetry of the Tennessee Eastman process, beside a batch detector with as many healthy alarms.

The batch detector learns the training run and has its two limits set on the healthy test run itself, so that as many of
that run's rows are beyond as with the watch: it could not know them, so it is flattered. The data lie outside the
repository; without them this says so and ends.
"""

import argparse
import csv
from pathlib import Path

import numpy as np

from perpend import Watch
from watch_simulation import BatchDetector

TELEMETRY = Path(__file__).parents[2] / "shared" / "telemetry"
START = 160
FAULTS = ("fault_02", "fault_04", "fault_10", "fault_13", "fault_14")


def run(name):
    with (TELEMETRY / f"{name}.csv").open() as file:
        header, *rows = csv.reader(file)
    return header[1:], np.array(rows, dtype=float)[:, 1:]


def watched(name, names, training):
    watch = Watch(len(names), names)
    watch.settle_on(training)
    return [watch.tick(row) for row in run(name)[1]], watch.rank


def first(alarms):
    """Rows from the fault's first to the first alarmed one; None where there is none."""
    after = np.asarray(alarms)[START:]
    return int(after.argmax()) + 1 if after.any() else None


def main():
    if not TELEMETRY.is_dir():
        print("the telemetry lies outside the repository and is not here: nothing to do")
        return
    names, training = run("normal_training")
    healthy, rank = watched("normal_test", names, training)
    beyond = np.mean([bool(reading.exceeds) for reading in healthy])
    alarmed = np.mean([reading.alarm for reading in healthy])
    assert alarmed <= 0.01, alarmed
    batch = BatchDetector(training, rank)
    batch.set_limits(run("normal_test")[1], beyond)
    print(f"healthy run: {beyond:.2%} of rows beyond a limit, {alarmed:.2%} alarmed; rank {rank}\n")
    print("| fault | watch: rows to alarm | batch: rows | suspects at the alarm |\n|---|---|---|---|")
    for name in FAULTS:
        readings, _ = watched(f"{name}_test", names, training)
        ours = first([reading.alarm for reading in readings])
        theirs = first(batch.alarms(run(f"{name}_test")[1]))
        suspects = readings[START + ours - 1].suspects(3) if ours else []
        named = ", ".join(f"{channel} {share:.0%}" for channel, share in suspects)
        print(f"| {name} | {ours} | {theirs} | {named} |")
        if name != "fault_10":
            assert ours, name


if __name__ == "__main__":
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--check", action="store_true", help="the same: it is short")
    parser.parse_args()
    main()
