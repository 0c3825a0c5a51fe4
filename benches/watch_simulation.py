"""The watch on simulated streams with known truth, beside a frozen batch detector: rates, delays, suspects, recovery.

Streams of 24 channels: four shared movements, a noise of each channel's own size, optionally correlated from row to row
or drifting. The batch detector is what a user would build from the first 500 rows: standardised channels, principal
axes, SPE and T2 against fixed limits. Its limits are set on 20 000 further healthy rows of the same stream to pass as
many as the watch does (more than it could know), and the same three of five rows make an alarm.

Run without arguments for the tables; ``--check`` runs each case once, small, and asserts what the tables show.
"""

import argparse
from dataclasses import dataclass

import numpy as np
from scipy.signal import lfilter

from perpend import Watch

CHANNELS = 24
DRIVERS = np.array([2, 1.5, 1, 0.7])
SETTLE = 500
CONFIRM, OF = 3, 5
STREAMS = {
    "independent": {},
    "lag-one correlation 0.5": {"correlation": 0.5},
    "slow drift": {"period": 100_000},
    "both": {"correlation": 0.5, "period": 100_000},
}


@dataclass
class Stream:
    """A machine: how its channels move together, and the parts its rows are made of."""

    rows: np.ndarray
    shared: np.ndarray
    noise: np.ndarray


def stream(count: int, seed: int, correlation: float = 0.0, period: float | None = None) -> Stream:
    rng = np.random.default_rng(seed)
    mixing = rng.standard_normal((len(DRIVERS), CHANNELS)) * DRIVERS[:, None]
    size = 0.4 * (0.5 + rng.random(CHANNELS))
    parts = rng.standard_normal((count, len(DRIVERS) + CHANNELS))
    if correlation:
        parts = lfilter([np.sqrt(1 - correlation**2)], [1, -correlation], parts, axis=0)
    movement, noise = parts[:, : len(DRIVERS)], parts[:, len(DRIVERS) :] * size
    shared = movement @ mixing
    if period:
        # Each level swings by a spread or so, and the mixing turns.
        angle = 2 * np.pi * np.arange(count)[:, None] / period
        shared = shared + np.sin(angle + 2 * np.pi * rng.random(CHANNELS)) * rng.standard_normal(CHANNELS)
        shared += (movement * np.sin(angle)) @ rng.standard_normal((len(DRIVERS), CHANNELS)) * 0.5
    return Stream(shared + noise, shared, noise)


class BatchDetector:
    """Principal axes of the first rows, with limits that never move."""

    def __init__(self, training: np.ndarray, rank: int) -> None:
        self.mean, self.spread = training.mean(axis=0), training.std(axis=0)
        scaled = (training - self.mean) / self.spread
        _, values, axes = np.linalg.svd(scaled / np.sqrt(len(scaled)), full_matrices=False)
        self.axes, self.energies = axes[:rank], values[:rank] ** 2
        self.limits = np.array([np.inf, np.inf])

    def statistics(self, rows: np.ndarray) -> np.ndarray:
        scaled = (rows - self.mean) / self.spread
        scores = scaled @ self.axes.T
        spe = ((scaled - scores @ self.axes) ** 2).sum(axis=1)
        return np.column_stack([spe, (scores**2 / self.energies).sum(axis=1)])

    def set_limits(self, healthy: np.ndarray, rate: float) -> None:
        self.limits = np.quantile(self.statistics(healthy), 1 - rate / 2, axis=0)

    def alarms(self, rows: np.ndarray) -> np.ndarray:
        return alarmed((self.statistics(rows) > self.limits).any(axis=1))


def alarmed(beyond: np.ndarray) -> np.ndarray:
    """Three of the last five on, three of five off, the window emptied at each switch: the rule of the watch."""
    on, window, out = False, [], np.zeros(len(beyond), dtype=bool)
    for tick, row in enumerate(beyond):
        window = [*window, bool(row)][-OF:]
        if sum(window) >= CONFIRM if not on else len(window) - sum(window) >= CONFIRM:
            on, window = not on, []
        out[tick] = on
    return out


def false_alarms(count: int, seeds: int, asked: float, limits: str = "moments", **options) -> tuple[float, float]:
    """Share of healthy rows beyond a limit, and of rows alarmed."""
    beyond, alarms = [], []
    for seed in range(seeds):
        readings = Watch(CHANNELS, false_alarm=asked, limits=limits).replay(
            stream(SETTLE + count, seed, **options).rows
        )
        beyond.append(readings["exceeds"][SETTLE:].any(axis=1).mean())
        alarms.append(readings["alarm"][SETTLE:].mean())
    return float(np.mean(beyond)), float(np.mean(alarms))


def spoil(machine: Stream, start: int, fault: str, channel: int, seed: int) -> np.ndarray:
    """The rows with a fault in one channel from `start` on; sizes in that channel's own noise."""
    rows, rng = machine.rows.copy(), np.random.default_rng(1_000 + seed)
    count, noise = len(rows) - start, machine.noise[:, channel].std()
    match fault:
        case "step":
            rows[start:, channel] += 4 * noise
        case "ramp":
            rows[start:, channel] += 0.04 * noise * np.arange(count)
        case "stuck":
            rows[start:, channel] = rows[start, channel]
        case "noise burst":
            rows[start:, channel] += 4 * noise * rng.standard_normal(count)
        case "correlation break":
            shared = machine.shared[:, channel]
            other = shared.mean() + shared.std() * rng.standard_normal(count)
            rows[start:, channel] = other + machine.noise[start:, channel]
    return rows


FAULTS = ("step", "ramp", "stuck", "noise burst", "correlation break")


@dataclass
class Detection:
    """What became of one fault over many machines."""

    delay: float
    caught: float
    batch_delay: float
    batch_caught: float
    first: float


def detection(fault: str, machines: int, healthy: int, rate: float = 1e-3) -> Detection:
    """Delays to the alarm in rows (the median; a fault not seen in 400 rows counts as 400), and the first suspect."""
    delays, batch, right = [], [], []
    for seed in range(machines):
        before, after = SETTLE + healthy, 400
        machine = stream(before + after, 10_000 + seed)
        channel = seed % CHANNELS
        rows = spoil(machine, before, fault, channel, seed)
        watch = Watch(CHANNELS, false_alarm=rate)
        watch.replay(rows[:before])
        readings = [watch.tick(row) for row in rows[before:]]
        first = next((index for index, reading in enumerate(readings) if reading.alarm), None)
        delays.append(after if first is None else first + 1)
        if first is not None:
            right.append(readings[first].suspects(1)[0][0] == f"channel_{channel}")
        detector = BatchDetector(rows[:SETTLE], watch.rank)
        # More healthy rows of the same machine: its own noise and mixing, other draws.
        detector.set_limits(machine.rows[SETTLE:before], rate)
        alarms = detector.alarms(rows[before:])
        batch.append(int(alarms.argmax()) + 1 if alarms.any() else after)
    caught = [delay < after for delay in delays]
    return Detection(
        float(np.median(delays)),
        float(np.mean(caught)),
        float(np.median(batch)),
        float(np.mean([delay < after for delay in batch])),
        float(np.mean(right)) if right else float("nan"),
    )


LATER = 2_000


def recovery(change: str, seeds: int, memory: float = 5_000) -> tuple[float, float]:
    """What becomes of a change of regime: medians over machines.

    Rows until 200 in a row hold at most four beyond a limit, and the SPE limit 2000 to 4000 rows after the change, in
    means of the SPE, over that of a watch that has seen none but the new regime (and has its units from it).
    """
    rows_needed, widths = [], []
    for seed in range(seeds):
        before, after, rng = SETTLE + 1_500, 6_000, np.random.default_rng(seed)
        machine = stream(before + after, 20_000 + seed)
        rows = machine.rows.copy()
        match change:
            case "levels":
                rows[before:] += 5 * rng.standard_normal(CHANNELS)
            case "noise x 3":
                rows[before:] += np.sqrt(8) * machine.noise.std(axis=0) * rng.standard_normal((after, CHANNELS))
            case "mixing":
                rows[before:] = stream(after, 30_000 + seed).rows
            case "load x 2":
                rows[before:] *= 2
        readings = Watch(CHANNELS, memory=memory).replay(rows)
        fresh = Watch(CHANNELS, memory=memory).replay(rows[before:])
        later = slice(before + LATER, before + 2 * LATER)
        here = readings["spe_limit"][later].mean() / readings["spe"][later].mean()
        later = slice(LATER, 2 * LATER)
        widths.append(here / (fresh["spe_limit"][later].mean() / fresh["spe"][later].mean()))
        beyond = readings["exceeds"][before:].any(axis=1)
        window = np.convolve(beyond, np.ones(200), mode="valid") <= 4
        rows_needed.append(int(window.argmax()) if window.any() else after)
    return float(np.median(rows_needed)), float(np.median(widths))


CHANGES = ("levels", "noise x 3", "mixing", "load x 2")


def tables() -> None:
    print("Rows beyond a limit over what was asked (and rows alarmed), six machines of 100 000 rows each\n")
    print("| stream | limits | asked 1e-2 | asked 1e-3 |\n|---|---|---|---|")
    for name, options in STREAMS.items():
        for limits in ("moments", "empirical", "spectrum"):
            cells = []
            for asked in (1e-2, 1e-3):
                beyond, alarms = false_alarms(100_000, 6, asked, limits, **options)
                cells.append(f"{beyond / asked:.2f} ({alarms:.5f})")
            print(f"| {name} | {limits} | {cells[0]} | {cells[1]} |", flush=True)
    print("\nOne faulty channel of 24, 96 machines; 1e-3 of rows beyond for both detectors\n")
    print("| fault | watch: rows to alarm | caught | batch: rows | caught | first suspect right |")
    print("|---|---|---|---|---|---|")
    for fault in FAULTS:
        d = detection(fault, 96, 20_000)
        print(
            f"| {fault} | {d.delay:.0f} | {d.caught:.0%} | {d.batch_delay:.0f} | {d.batch_caught:.0%} "
            f"| {d.first:.0%} |",
            flush=True,
        )
    print("\nRows until a lasting change of regime is taken up, `hold` of 300 among them; SPE limit after 2000\n")
    print("| change | rows | limit over that of a fresh watch |\n|---|---|---|")
    for change in CHANGES:
        rows, width = recovery(change, 12)
        print(f"| {change} | {rows:.0f} | {width:.2f} |", flush=True)


def check() -> None:
    beyond, _ = false_alarms(8_000, 2, 1e-2)
    assert 0.5 < beyond / 1e-2 < 1.6, beyond
    step = detection("step", 3, 2_000)
    assert step.caught == 1, step
    rows, width = recovery("levels", 1)
    assert rows < 3_000, rows
    assert 0.7 < width < 1.4, width


if __name__ == "__main__":
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--check", action="store_true", help="each case once, small, with its answer asserted")
    check() if parser.parse_args().check else tables()
