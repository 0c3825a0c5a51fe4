"""Times the tracker against what a user would write or pick instead, one thread each.

The contenders: a hand-written incremental SVD in NumPy that keeps as many directions (rank and guard), its buffers made
once; and, for whole blocks, a general library's incremental PCA of that rank in batches of 64. Every answer is
asserted before it is timed; contenders take turns, and the median of each is compared. Last the tail of a tick over a
million rows, each tick's time the least of three runs: what is ours comes again in each, what is the machine's does
not. ``--check`` runs each case once, untimed.
"""

import argparse
import gc
import time
from statistics import median

import numpy as np
from sklearn.decomposition import IncrementalPCA
from threadpoolctl import threadpool_limits

import perpend

MEMORY = 500.0
BATCH = 64
# channels, rank
CASES = [(16, 3), (64, 6), (256, 8), (256, 16), (1000, 16), (4096, 32)]


class ByHand:
    """Rotate and cut: the classical incremental SVD with forgetting and a weighted mean."""

    def __init__(self, channels, keep, memory):
        self.kept = 1 - 1 / memory
        self.keep = keep
        self.weight = 0.0
        self.mean = np.zeros(channels)
        self.values = np.zeros(keep)
        # The row after the basis takes the new direction; two buffers, so that the product never overlaps its factors.
        self.basis = np.zeros((keep + 1, channels))
        self.other = np.zeros((keep + 1, channels))
        self.bordered = np.zeros((keep + 1, keep + 1))
        self.diagonal = np.arange(keep)

    def update(self, row):
        before = self.kept * self.weight
        self.weight = before + 1
        delta = row - self.mean
        self.mean += delta / self.weight
        delta *= np.sqrt(before / self.weight)
        basis = self.basis[: self.keep]
        h = basis @ delta
        delta -= h @ basis
        again = basis @ delta
        delta -= again @ basis
        norm = np.sqrt(delta @ delta)
        if norm > 0:
            delta /= norm
        self.basis[self.keep] = delta
        m = self.bordered
        m[self.diagonal, self.diagonal] = np.sqrt(self.kept) * self.values
        m[self.keep, : self.keep] = h + again
        m[self.keep, self.keep] = norm
        _, values, turn = np.linalg.svd(m)
        np.matmul(turn[: self.keep], self.basis, out=self.other[: self.keep])
        self.values = values[: self.keep]
        self.basis, self.other = self.other, self.basis


def rows_of(channels, rank, count):
    """Rows of a few more directions than are reported, on noise, far from zero."""
    rng = np.random.default_rng(channels + rank)
    mixing = rng.standard_normal((rank + 2, channels))
    scores = rng.standard_normal((count, rank + 2)) * np.geomspace(10, 1, rank + 2)
    return 20 + scores @ mixing + 0.3 * rng.standard_normal((count, channels))


def assert_same(tracker, contender, rank):
    """Both hold the same energies and axes."""
    energies = contender.values**2 / contender.weight
    np.testing.assert_allclose(tracker.energies, energies[:rank], rtol=1e-9)
    sines = contender.basis[:rank] - (contender.basis[:rank] @ tracker.axes.T) @ tracker.axes
    assert np.linalg.norm(sines, 2) < 1e-8
    np.testing.assert_allclose(tracker.mean, contender.mean, rtol=1e-12)


def seconds_a_row(update, rows):
    """The median over single rows: what a tick costs, undisturbed by the neighbours on the machine."""
    times = []
    for row in rows:
        start = time.perf_counter_ns()
        update(row)
        times.append(time.perf_counter_ns() - start)
    return median(times) * 1e-9


def seconds_a_block(update, rows):
    """Processor time, all in one thread: a block is too long for the neighbours on the machine to leave it alone."""
    start = time.process_time_ns()
    update(rows)
    return (time.process_time_ns() - start) * 1e-9 / len(rows)


def in_batches(library):
    def update(rows):
        for start in range(0, len(rows), BATCH):
            library.partial_fit(rows[start : start + BATCH])

    return update


def run(channels, rank, check):
    count = 3 * BATCH if check else max(4 * BATCH, min(2048, 2_000_000 // (channels * rank) // BATCH * BATCH))
    rows = rows_of(channels, rank, count)
    tracker = perpend.Tracker(channels, rank, memory=MEMORY)
    contender = ByHand(channels, rank + tracker.guard, MEMORY)
    for row in rows:
        tracker.update(row)
        contender.update(row)
    assert_same(tracker, contender, rank)
    block = perpend.Tracker(channels, rank, memory=MEMORY)
    block.update_rows(rows)
    np.testing.assert_allclose(block.energies, tracker.energies, rtol=1e-2)
    library = IncrementalPCA(n_components=rank, batch_size=BATCH)
    in_batches(library)(rows)
    if check:
        return
    times = {name: [] for name in ("tracker", "by hand", "rows", "library")}
    for _ in range(5):
        times["tracker"].append(seconds_a_row(tracker.update, rows))
        times["by hand"].append(seconds_a_row(contender.update, rows[: max(BATCH, count // 4)]))
        times["rows"].append(seconds_a_block(block.update_rows, rows))
        times["library"].append(seconds_a_block(in_batches(library), rows))
    us = {name: 1e6 * median(values) for name, values in times.items()}
    print(
        f"{channels:>8} {rank:>4} {tracker.guard:>5} {us['tracker']:>10.2f} {us['by hand']:>10.1f} "
        f"{us['by hand'] / us['tracker']:>6.1f} {us['rows']:>10.2f} {us['library']:>10.1f} "
        f"{us['library'] / us['rows']:>6.1f}",
        flush=True,
    )


def tail(channels, rank, runs):
    """Median and 99.9 % quantile over a million ticks, each tick the least of several runs from the same start."""
    rows = list(rows_of(channels, rank, 4_000))
    least = np.full(1_000_000, np.inf)
    times = np.zeros(len(least))
    gc.disable()
    for _ in range(runs):
        tracker = perpend.Tracker(channels, rank, memory=MEMORY)
        for tick in range(len(times)):
            row = rows[tick % len(rows)]
            start = time.perf_counter_ns()
            tracker.update(row)
            times[tick] = time.perf_counter_ns() - start
        np.minimum(least, times, out=least)
    gc.enable()
    middle, high = np.quantile(least, [0.5, 0.999]) * 1e-3
    print(
        f"{channels} x {rank}, a million ticks: median {middle:.2f} us, 99.9 % {high:.2f} us, {high / middle:.1f} times"
    )


def main():
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--check", action="store_true", help="run each case once, untimed")
    check = parser.parse_args().check
    if not check:
        print("us a row, one thread, kernel path", perpend.kernel_path())
        print("channels rank guard    update    by hand  ratio       rows    library  ratio")
    with threadpool_limits(limits=1):
        for channels, rank in CASES:
            run(channels, rank, check)
        if not check:
            tail(64, 6, runs=3)


if __name__ == "__main__":
    main()
