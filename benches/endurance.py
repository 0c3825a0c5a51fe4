"""Months in one process: memory, handles, orthonormality and time over very many calls, and through a long silence.

`python benches/endurance.py` takes some ten minutes; `--check` runs the same on few calls.
"""

from __future__ import annotations

import argparse
import os
import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from itertools import pairwise
from pathlib import Path

import numpy as np
from safetensors.numpy import load

import perpend

EPS = float(np.finfo(float).eps)
LOOKS = 20
# Resident memory that may come and go between two looks without anything growing: a few arenas of the allocator.
MOST_GROWTH = 4 << 20


def resident() -> int:
    """Resident memory in bytes; 0 where the system does not say."""
    statm = Path("/proc/self/statm")
    return int(statm.read_text().split()[1]) * os.sysconf("SC_PAGE_SIZE") if statm.exists() else 0


def handles() -> int:
    """Open files; 0 where the system does not say."""
    folder = "/proc/self/fd"
    return len(os.listdir(folder)) if os.path.isdir(folder) else 0


@dataclass
class Looks:
    """What was seen of the process and the object on the way."""

    calls: list[int] = field(default_factory=list)
    memory: list[int] = field(default_factory=list)
    files: list[int] = field(default_factory=list)
    losses: list[float] = field(default_factory=list)
    times: list[float] = field(default_factory=list)

    def take(self, calls: int, loss: float) -> None:
        """Look once."""
        self.calls.append(calls)
        self.memory.append(resident())
        self.files.append(handles())
        self.losses.append(loss)
        self.times.append(time.perf_counter())

    def report(self, name: str, bound: float) -> None:
        """Assert that nothing has grown, and print the figures."""
        # The first look comes after warming up.
        slope = np.polyfit(self.calls, self.memory, 1)[0] * 1e6
        rates = [
            1e6 * (late - early) / (b - a)
            for (a, b), (early, late) in zip(pairwise(self.calls), pairwise(self.times), strict=True)
        ]
        print(
            f"{name}: {self.calls[-1]} calls\n"
            f"    memory {self.memory[0] >> 10} to {self.memory[-1] >> 10} KiB, {slope:+.1f} bytes a million calls; "
            f"handles {self.files[0]} to {self.files[-1]}\n"
            f"    orthogonality error {self.losses[0]:.1e}, at most {max(self.losses):.1e}\n"
            f"    us a call {rates[0]:.2f} at first, {rates[-1]:.2f} at last",
            flush=True,
        )
        assert self.memory[-1] - self.memory[0] <= MOST_GROWTH, self.memory
        assert len(set(self.files)) == 1, self.files
        assert max(self.losses) <= bound, self.losses


def watched(count: int, step: Callable[[int], None], loss: Callable[[], float]) -> Looks:
    """Make `count` calls in pieces, with a look before, between and after."""
    looks, piece = Looks(), count // LOOKS
    step(piece)
    looks.take(piece, loss())
    for look in range(2, LOOKS + 1):
        step(piece)
        looks.take(look * piece, loss())
    return looks


def window(count: int) -> None:
    """A basis as a sliding window: adds and drops in turn."""
    basis = perpend.Basis(8, 4)
    pool = list(np.random.default_rng(1).standard_normal((997, 8)))

    def forever() -> Iterator[np.ndarray]:
        while True:
            yield from pool

    vectors = forever()
    basis.add_rows(np.array(pool[:4]))

    def step(calls: int) -> None:
        add, drop = basis.add, basis.drop
        for _ in range(calls // 2):
            drop(0)
            add(next(vectors))

    watched(count, step, basis.orthogonality_error).report("Basis.add and drop, 8 x 4", 10 * EPS * 2)


def rows_of(count: int, channels: int, seed: int) -> np.ndarray:
    """Rows of two movements and some noise about a level."""
    rng = np.random.default_rng(seed)
    mixing = np.random.default_rng(99).standard_normal((2, channels))
    return 20.0 + rng.standard_normal((count, 2)) @ mixing + 0.3 * rng.standard_normal((count, channels))


def pace(call: Callable[[np.ndarray], object], rows: np.ndarray) -> float:
    """Microseconds a row."""
    begun = time.perf_counter()
    call(rows)
    return 1e6 * (time.perf_counter() - begun) / len(rows)


def track(count: int) -> None:
    """A tracker fed with blocks of rows."""
    tracker, rows = perpend.Tracker(16, 3, memory=1000), rows_of(5000, 16, 2)

    def step(calls: int) -> None:
        for first in range(0, calls, len(rows)):
            tracker.update_rows(rows[: calls - first])

    watched(count, step, tracker.orthogonality_error).report("Tracker.update_rows, 16 x 3", 1e-14)
    assert tracker.samples == count // LOOKS * LOOKS
    # The machine has other work at times: old and new in turn, the best of each.
    new = perpend.Tracker(16, 3, memory=1000)
    best = {owner: min(pace(owner.update_rows, rows) for _ in range(20)) for owner in (tracker, new, tracker, new)}
    print(f"    us a row: {best[tracker]:.2f} for this one, {best[new]:.2f} for a new one", flush=True)


def tick(count: int) -> None:
    """A watch, a row at a time, all that a reading tells asked for."""
    watch, rows = perpend.Watch(8, memory=2000, settle=200), rows_of(4999, 8, 3)
    watch.settle_on(rows[:400])
    baseline = list(rows)

    def step(calls: int) -> None:
        tick, total = watch.tick, len(baseline)
        for call in range(calls):
            reading = tick(baseline[call % total])
            if reading.alarm:
                reading.suspects(3)

    def loss() -> float:
        # The tracker within is not shown in Python, but any reader of its state finds the directions.
        directions = load(watch.to_bytes())["watch.model.tracker.directions"]
        held = directions[np.any(directions != 0, axis=1)]
        return float(np.linalg.norm(np.eye(len(held)) - held @ held.T, 2))

    watched(count, step, loss).report("Watch.tick, 8 channels", 1e-14)


def silence(count: int) -> None:
    """All channels at one value for very long, then moving again: numbers stay numbers, and nothing slows down."""
    rows = rows_of(20_000, 8, 4)
    still = np.tile(rows.mean(axis=0), (10_000, 1))
    tracker, watch = perpend.Tracker(8, 3, memory=500), perpend.Watch(8, memory=500, settle=500, hold=200)

    for name, call in (("Tracker.update_rows", tracker.update_rows), ("Watch.replay", watch.replay)):
        moving = pace(call, rows)
        quiet = [pace(call, still) for _ in range(max(count // len(still), 1))]
        again = pace(call, rows)
        print(
            f"{name:20} us a row: moving {moving:.2f}, still {quiet[0]:.2f}, worst {max(quiet):.2f}, "
            f"at last {quiet[-1]:.2f}, moving again {again:.2f}",
            flush=True,
        )
    energies = tracker.energies
    assert np.isfinite(energies).all(), energies
    assert (energies > 1e-3).all(), energies
    assert tracker.orthogonality_error() <= 1e-14
    arrays = watch.replay(rows)
    for name in ("spe", "spe_limit", "t2", "t2_limit", "spe_smooth", "t2_smooth"):
        assert np.isfinite(arrays[name]).all(), name
    healthy = np.mean(arrays["phase"] == "healthy")
    print(f"healthy again: {healthy:.4f} of the rows, energies {energies}")
    assert healthy > 0.9, healthy


def main() -> None:
    """Run all, on many calls or few."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--check", action="store_true", help="few calls, for a check that it runs")
    few = parser.parse_args().check
    window(20_000 if few else 100_000_000)
    track(20_000 if few else 100_000_000)
    tick(20_000 if few else 10_000_000)
    silence(20_000 if few else 1_000_000)


if __name__ == "__main__":
    main()
