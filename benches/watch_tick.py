"""Time of one `Watch.tick` at 24 channels against the same reading written by hand in NumPy, and its tail.

The hand-written loop does what a careful user would: it scales the row, takes it from an exponentially weighted mean,
judges SPE and T2 against chi-square-matched limits that follow winsorised moments, smooths both, takes the last five
rows for the alarm, finds each channel's reconstruction share, and learns by the incremental singular value
decomposition with forgetting, keeping as many directions as the watch tracks. Both must raise the same alarms before
they are timed.

Run without arguments for the figures; ``--check`` asserts the agreement on a short stream.
"""

import argparse
import time

import numpy as np
from scipy.stats import chi2

from perpend import Watch
from watch_simulation import CHANNELS, CONFIRM, OF, SETTLE, stream

MEMORY, RATE, GUARD = 5_000, 1e-3, 8


class ByHand:
    """The same reading, with NumPy."""

    def __init__(self, rows, rank):
        self.mean0, self.spread = rows.mean(axis=0), rows.std(axis=0)
        scaled = (rows - self.mean0) / self.spread
        self.mean, self.weight, self.rank = scaled.mean(axis=0), float(len(rows)), rank
        self.kept, self.tracked = 1 - 1 / MEMORY, rank + GUARD
        _, values, axes = np.linalg.svd(scaled - self.mean, full_matrices=False)
        self.rows = values[: self.tracked, None] * axes[: self.tracked]
        self.set_axes(values, axes)
        scores = (scaled - self.mean) @ self.axes.T
        spe = ((scaled - self.mean - scores @ self.axes) ** 2).sum(axis=1)
        t2 = (scores**2 / self.energies).sum(axis=1)
        self.moments = np.array([[spe.mean(), spe.var()], [t2.mean(), t2.var()]])
        self.smooth = np.ones(2)
        self.smooth_moments = np.array([[1.0, 0.01], [1.0, 0.01]])
        self.set_limits()
        self.window, self.alarm = [], False

    def set_axes(self, values, axes):
        self.axes, self.energies = axes[: self.rank], values[: self.rank] ** 2 / self.weight
        self.left = 1 - (self.axes**2).sum(axis=0)
        self.told = (self.axes**2 / self.energies[:, None]).sum(axis=0)

    def set_limits(self):
        mean, variance = self.moments.T
        h = 2 * mean**2 / variance
        self.limits = variance / (2 * mean) * chi2.isf(RATE / 4, h)

    def tick(self, row):
        scaled = (row - self.mean0) / self.spread
        deviation = scaled - self.mean
        scores = self.axes @ deviation
        residual = deviation - scores @ self.axes
        statistics = np.array([residual @ residual, (scores**2 / self.energies).sum()])
        beyond = statistics > self.limits
        bounded = np.minimum(statistics, self.limits)
        self.smooth += 0.1 * (np.cbrt(bounded / self.moments[:, 0]) - self.smooth)
        far = (self.smooth - self.smooth_moments[:, 0]) / np.sqrt(self.smooth_moments[:, 1])
        exceeds = bool(beyond.any() or (far > 4.5).any())
        phi = residual / self.limits[0] + (scores / self.energies) @ self.axes / self.limits[1]
        shares = phi**2 / (self.left / self.limits[0] + self.told / self.limits[1])
        shares /= (statistics / self.limits).sum()
        self.window = [*self.window, exceeds][-OF:]
        agreeing = len(self.window) - sum(self.window) if self.alarm else sum(self.window)
        if agreeing >= CONFIRM:
            self.alarm, self.window = not self.alarm, []
        if not exceeds:
            step = 1 / (self.kept * self.weight + 1)
            self.moments[:, 1] += step * ((bounded - self.moments[:, 0]) ** 2 - self.moments[:, 1])
            self.moments[:, 0] += step * (bounded - self.moments[:, 0])
            gap = self.smooth - self.smooth_moments[:, 0]
            self.smooth_moments[:, 1] += step * (gap**2 - self.smooth_moments[:, 1])
            self.smooth_moments[:, 0] += step * gap
            self.set_limits()
            new = np.sqrt(self.kept * self.weight * step) * deviation
            _, values, axes = np.linalg.svd(np.vstack([np.sqrt(self.kept) * self.rows, new]), full_matrices=False)
            self.rows = values[: self.tracked, None] * axes[: self.tracked]
            self.mean = self.mean + step * deviation
            self.weight = self.kept * self.weight + 1
            self.set_axes(values, axes)
        return statistics, self.limits.copy(), self.alarm, residual**2, shares


def faulty(count):
    """A stream in which one channel steps for 30 rows out of each 1000."""
    rows = stream(SETTLE + count, 5).rows
    for start in range(SETTLE + 500, len(rows), 1_000):
        rows[start : start + 30, 7] += 5
    return rows


def agree(count):
    """Both raise the same alarms, within two rows at either end; both settled and ready to go on."""
    rows = faulty(count)
    watch = Watch(CHANNELS)
    watch.settle_on(rows[:SETTLE])
    hand = ByHand(rows[:SETTLE], watch.rank)
    ours = np.array([watch.tick(row).alarm for row in rows[SETTLE:]])
    theirs = np.array([hand.tick(row)[2] for row in rows[SETTLE:]])
    starts = [np.flatnonzero(np.diff(alarms.astype(int)) == 1) for alarms in (ours, theirs)]
    for start in range(500, count, 1_000):
        found = [np.any((s >= start) & (s < start + 8)) for s in starts]
        assert all(found), (start, found)
    # The smoothed statistic may linger longer with one than with the other.
    assert np.mean(ours != theirs) < 0.02, np.mean(ours != theirs)
    return watch, hand


def times(tick, rows):
    clock, taken = time.perf_counter_ns, np.empty(len(rows))
    for index, row in enumerate(rows):
        start = clock()
        tick(row)
        taken[index] = clock() - start
    return taken


def line(name, taken):
    median, *tail = np.percentile(taken, [50, 99, 99.9]) / 1e3
    print(f"| {name} | {median:.2f} | " + " | ".join(f"{t:.2f} ({t / median:.1f} times)" for t in tail) + " |")
    return median


def figures(count, runs):
    """The same ticks, `runs` times over from the same start: the least time of each is its own, not the machine's."""
    _, hand = agree(3_000)
    rows = stream(SETTLE + 3_000 + count, 5).rows
    taken = []
    for _ in range(runs):
        watch = Watch(CHANNELS)
        watch.settle_on(rows[:SETTLE])
        watch.replay(rows[SETTLE : SETTLE + 3_000])
        taken.append(times(watch.tick, rows[SETTLE + 3_000 :]))
    print(f"{count} ticks, {runs} runs of them, {CHANNELS} channels, rank {watch.rank}; microseconds\n")
    print("| | median | 99 % | 99.9 % |\n|---|---|---|---|")
    ours = line("tick, as it came", np.concatenate(taken))
    line("tick, the least of its runs", np.min(taken, axis=0))
    by_hand = line("by hand in NumPy, as it came", times(hand.tick, rows[SETTLE + 3_000 :][:5_000]))
    line("nothing, for 75 additions", times(lambda _: sum(range(75)), rows[:100_000]))
    print(f"\n{by_hand / ours:.0f} times faster than by hand")


if __name__ == "__main__":
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--check", action="store_true", help="assert that both agree, on a short stream")
    if parser.parse_args().check:
        agree(2_000)
    else:
        figures(200_000, 5)
