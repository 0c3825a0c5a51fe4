"""How far the tracker is from the exact answer on drifting data, by how many guard directions it keeps.

Exact is the decomposition of all rows, each with the weight forgetting leaves it, at checkpoints. Printed for guard 0,
rank, the default and twice the rank, learned row by row and in blocks: median and largest angle of the reported
subspace to the exact one where the relative eigengap is 0.2 or more, the median as a share of that with guard 0, the
largest shortfall of the captured energy, and at how many checkpoints the certificate holds the energies and bounds the
angle. An energy or an angle outside its certificate fails the run.

The last line of each kind is no tracker of ours but what stands in the way of a smaller angle: rotate and cut, the
default guard, with the energy given up assumed to be spread evenly over all directions not tracked. An axis leans
toward a new direction by their common energy over the difference of theirs; a tracker that holds nothing of what it
gave up takes the new direction's for zero, and the axis leans too little. The assumption mends that, and costs the
certificate: what is tracked then exceeds the exact scatter in some directions.

With ``../shared/telemetry`` beside the repository, on that too. ``--check`` runs one short case.
"""

import argparse
import sys
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


def telemetry_rank(rows):
    """Of 2 to 8 the rank with the widest gap behind it, so that the angle means something."""
    energies = exact(rows)[0]
    return 2 + int(np.argmax(1 - energies[2:9] / energies[1:8]))


class Checkpoints:
    """The exact answers for one stream of rows, and what came of a tracker beside them."""

    def __init__(self, rows, rank, every):
        self.rows, self.rank, self.every = rows, rank, every
        self.done = range(every, len(rows) + 1, every)
        self.answers = [exact(rows[:done]) for done in self.done]

    def angle(self, place, axes):
        """Largest angle to the exact subspace, in degrees; None where the gap says it means nothing."""
        energies, exact_axes = self.answers[place]
        if 1 - energies[self.rank] / energies[self.rank - 1] < 0.2:
            return None
        exact_axes = exact_axes[: self.rank]
        return np.degrees(np.arcsin(min(np.linalg.norm(exact_axes - (exact_axes @ axes.T) @ axes, 2), 1)))

    def shortfall(self, place, axes):
        """Share of the energy the exact axes capture that these do not."""
        energies, exact_axes = self.answers[place]
        captured = np.sum(energies @ (exact_axes @ axes.T) ** 2)
        return 1 - captured / energies[: self.rank].sum()

    def run(self, guard, in_blocks):
        """Angles, largest shortfall, checkpoints whose energies and whose angle are certified."""
        channels = self.rows.shape[1]
        tracker = perpend.Tracker(channels, self.rank, memory=MEMORY, guard=min(guard, channels - self.rank))
        angles, shortfall, within, certified = [], 0.0, 0, 0
        for place, done in enumerate(self.done):
            new = self.rows[done - self.every : done]
            if in_blocks:
                tracker.update_rows(new)
            else:
                for row in new:
                    tracker.update(row)
            energies = self.answers[place][0]
            upper, bound = tracker.certificate()
            slack = 64 * EPS * channels * energies[0]
            exact_energies = energies[: self.rank]
            within += np.all(tracker.energies <= exact_energies + slack) and np.all(exact_energies <= upper + slack)
            angle = self.angle(place, tracker.axes)
            if bound is not None:
                certified += 1
                within -= angle is not None and np.radians(angle) > bound + 1e-9
            angles += [] if angle is None else [angle]
            shortfall = max(shortfall, self.shortfall(place, tracker.axes))
        return angles, shortfall, within, certified

    def assumed_even(self, guard):
        """Angles and shortfall of rotate and cut that assumes the energy given up to be spread evenly."""
        channels, keep, kept = self.rows.shape[1], self.rank + guard, 1 - 1 / MEMORY
        weight, lost, mean = 0.0, 0.0, np.zeros(channels)
        axes, energies = np.zeros((0, channels)), np.zeros(0)
        angles, shortfall = [], 0.0
        for index, row in enumerate(self.rows, start=1):
            delta, before = row - mean, kept * weight
            weight = before + 1
            mean = mean + delta / weight
            delta = np.sqrt(before / weight) * delta
            h = axes @ delta
            rest = delta - h @ axes
            again = axes @ rest
            rest -= again @ axes
            norm = np.linalg.norm(rest)
            share = kept * lost / (channels - len(axes))
            border = np.append(h + again, norm)
            values, turn = np.linalg.eigh(np.diag(np.append(kept * energies, share)) + np.outer(border, border))
            strongest = np.argsort(-values)[:keep]
            axes = turn[:, strongest].T @ np.vstack([axes, rest / max(norm, np.finfo(float).tiny)])
            energies = values[strongest]
            lost = kept * lost - share + values.sum() - energies.sum()
            if index % self.every == 0:
                place = index // self.every - 1
                angle = self.angle(place, axes[: self.rank])
                angles += [] if angle is None else [angle]
                shortfall = max(shortfall, self.shortfall(place, axes[: self.rank]))
        return angles, shortfall


def line(name, way, rank, guard, angles, shortfall, plain):
    if angles:
        spread = f"{np.median(angles):>10.3g} {max(angles):>8.3g} {np.median(angles) / plain:>6.2f} {len(angles):>6}"
    else:
        spread = f"{'-':>10} {'-':>8} {'-':>6} {0:>6}"
    return f"{name:<16} {way:<11} {rank:>4} {guard:>5} {spread} {shortfall:>10.1e}"


def report(name, rows, rank, every):
    """Prints the lines of one stream; false where something was outside its certificate."""
    checkpoints = Checkpoints(rows, rank, every)
    total, sound, plain = len(checkpoints.done), True, np.nan
    default = max(rank, 8)
    for way in ("row by row", "in blocks"):
        for guard in (0, rank, default, 2 * rank):
            angles, shortfall, within, certified = checkpoints.run(guard, way == "in blocks")
            if guard == 0 and angles:
                plain = np.median(angles)
            text = line(name, way, rank, guard, angles, shortfall, plain)
            print(f"{text} {within:>4}/{total:<3} {certified:>4}/{total}", flush=True)
            sound &= within == total
    angles, shortfall = checkpoints.assumed_even(default)
    print(line(name, "even rest", rank, default, angles, shortfall, plain), flush=True)
    return sound


def main():
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--check", action="store_true", help="one short case")
    check = parser.parse_args().check
    print(f"{'data':<16} {'learned':<11} rank guard median deg      max  share points  shortfall  energies  angles")
    sound = True
    kinds = [rotating] if check else [rotating, stepping, growing, close]
    for kind in kinds:
        rows = kind(np.random.default_rng(5), 900 if check else 6000, 40, 5) + 20
        sound &= report(kind.__name__, rows, 5, 150)
    if not check:
        if TELEMETRY.is_dir():
            for name in ("normal_training.csv", "normal_test.csv", "fault_13_test.csv"):
                rows = telemetry(name)
                sound &= report(name.removesuffix(".csv"), rows, telemetry_rank(rows), 40)
        else:
            print("telemetry: no ../shared/telemetry beside the repository, left out")
    if not sound:
        sys.exit("an energy or an angle was outside its certificate")


if __name__ == "__main__":
    main()
