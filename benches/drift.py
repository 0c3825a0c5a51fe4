"""How far the tracker is from the exact answer on drifting data, by how many guard directions it keeps.

Exact is the decomposition of all rows, each with the weight forgetting leaves it, at checkpoints. Printed for guard 0,
rank, the default and twice the rank: median and largest angle of the reported subspace to the exact one where the
relative eigengap is 0.2 or more, largest shortfall of the captured energy, and at how many checkpoints the certificate
bounds the angle. Exact energies and angles outside their certificate stop the script. With ``../shared/telemetry``
beside the repository, on that too. ``--check`` runs one short case.
"""

import argparse
from pathlib import Path

import numpy as np

import perpend

TELEMETRY = Path(__file__).resolve().parents[1].parent / "shared" / "telemetry"
MEMORY = 300.0
EPS = np.finfo(float).eps


def rotating(rng, count, channels, rank):
    """Every direction turns, slowly, into one of its own that it had nothing of."""
    frame = np.linalg.qr(rng.standard_normal((channels, 2 * rank)))[0].T
    angle = np.linspace(0, 3 * np.pi, count)[:, None, None]
    axes = np.cos(angle) * frame[:rank] + np.sin(angle) * frame[rank:]
    scores = rng.standard_normal((count, 1, rank)) * np.geomspace(4, 1.5, rank)
    return (scores @ axes)[:, 0] + 0.3 * rng.standard_normal((count, channels))


def stepping(rng, count, channels, rank):
    """A new set of directions every thousand rows."""
    scores = rng.standard_normal((count, rank)) * np.geomspace(4, 1.5, rank)
    axes = np.linalg.qr(rng.standard_normal((count // 1000 + 1, channels, rank)))[0]
    rows = np.einsum("tr,tcr->tc", scores, axes[np.arange(count) // 1000])
    return rows + 0.3 * rng.standard_normal((count, channels))


def growing(rng, count, channels, rank):
    """One direction comes up from nothing past all the others."""
    axes = np.linalg.qr(rng.standard_normal((channels, rank + 1)))[0].T
    sizes = np.tile(np.geomspace(4, 1.5, rank + 1), (count, 1))
    sizes[:, 0] = np.geomspace(0.05, 6, count)
    return (rng.standard_normal((count, rank + 1)) * sizes) @ axes + 0.3 * rng.standard_normal((count, channels))


def close(rng, count, channels, rank):
    """Energies that fall by a tenth from one direction to the next, all of them turning."""
    frame = np.linalg.qr(rng.standard_normal((channels, channels)))[0].T
    other = np.linalg.qr(rng.standard_normal((channels, channels)))[0].T
    turn = np.linspace(0, 1, count)[:, None, None]
    scores = rng.standard_normal((count, 1, channels)) * 0.9 ** (np.arange(channels) / 2)
    return (scores @ ((1 - turn) * frame + turn * other))[:, 0]


def telemetry(name):
    """Channels of a recorded file, each in units of its own spread."""
    table = np.genfromtxt(TELEMETRY / name, delimiter=",", skip_header=1)[:, 1:]
    spread = table.std(axis=0)
    return (table / np.where(spread > 1e-9 * np.abs(table).max(axis=0), spread, 1))[:, spread > 0]


def exact(rows):
    """Energies and axes of the weighted rows, by one decomposition."""
    weights = (1 - 1 / MEMORY) ** np.arange(len(rows))[::-1]
    rows, weights = rows[weights > 1e-18], weights[weights > 1e-18]
    weights = weights / weights.sum()
    _, values, axes = np.linalg.svd(np.sqrt(weights)[:, None] * (rows - weights @ rows), full_matrices=False)
    return values**2, axes


def compare(rows, rank, guard, every):
    """Angles where they mean something, and shortfalls of energy, at checkpoints."""
    channels = rows.shape[1]
    tracker = perpend.Tracker(channels, rank, memory=MEMORY, guard=min(guard, channels - rank))
    angles, shortfalls, certified = [], [], 0
    for done in range(every, len(rows) + 1, every):
        tracker.update_rows(rows[done - every : done])
        energies, axes = exact(rows[:done])
        upper, bound = tracker.certificate()
        slack = 64 * EPS * channels * energies[0]
        assert np.all(tracker.energies <= energies[:rank] + slack), "an energy above the exact one"
        assert np.all(energies[:rank] <= upper + slack), "an energy outside its certificate"
        sine = np.linalg.norm(axes[:rank] - (axes[:rank] @ tracker.axes.T) @ tracker.axes, 2)
        if bound is not None:
            assert np.arcsin(min(sine, 1)) <= bound + 1e-9, "an angle outside its certificate"
            certified += 1
        if 1 - energies[rank] / energies[rank - 1] >= 0.2:
            angles.append(np.degrees(np.arcsin(min(sine, 1))))
        weights = (1 - 1 / MEMORY) ** np.arange(done)[::-1]
        centred = np.sqrt(weights / weights.sum())[:, None] * (
            rows[:done] - np.average(rows[:done], axis=0, weights=weights)
        )
        captured = np.linalg.norm(centred @ tracker.axes.T) ** 2
        shortfalls.append(1 - captured / energies[:rank].sum())
    return angles, max(shortfalls), certified, len(rows) // every


def report(name, rows, rank, every):
    for guard in (0, rank, max(rank, 8), 2 * rank):
        angles, shortfall, certified, checkpoints = compare(rows, rank, guard, every)
        if angles:
            spread = f"{np.median(angles):>10.3g} {max(angles):>10.3g} {len(angles):>6}"
        else:
            spread = f"{'-':>10} {'-':>10} {0:>6}"
        print(f"{name:<20} {rank:>4} {guard:>5} {spread} {shortfall:>10.2e} {certified:>4}/{checkpoints}", flush=True)


def main():
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--check", action="store_true", help="one short case")
    check = parser.parse_args().check
    print(f"{'data':<20} rank guard  median deg  max deg  points  shortfall  angle certified")
    kinds = [rotating] if check else [rotating, stepping, growing, close]
    for kind in kinds:
        rows = kind(np.random.default_rng(5), 900 if check else 6000, 40, 5) + 20
        report(kind.__name__, rows, 5, 150)
    if not check and TELEMETRY.is_dir():
        for name in ("normal_training.csv", "normal_test.csv", "fault_13_test.csv"):
            report(name.removesuffix(".csv"), telemetry(name), 6, 40)


if __name__ == "__main__":
    main()
