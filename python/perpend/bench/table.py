"""Comparisons as a table."""

import math
from collections.abc import Iterable, Iterator

from perpend.bench.turns import Comparison


def _duration(seconds: float) -> str:
    if math.isnan(seconds):
        return "-"
    for unit, size in (("s", 1.0), ("ms", 1e-3), ("us", 1e-6)):
        if seconds >= size:
            return f"{seconds / size:.3g} {unit}"
    return f"{seconds / 1e-9:.3g} ns"


def told(comparisons: Iterable[Comparison]) -> list[Comparison]:
    """Print comparisons as a table, a line as each arrives, and return them."""
    kept: list[Comparison] = []

    def keep() -> Iterator[Comparison]:
        for each in comparisons:
            kept.append(each)
            yield each

    for line in lines(keep()):
        print(line, flush=True)
    return kept


def lines(comparisons: Iterable[Comparison]) -> Iterator[str]:
    """Write comparisons as a table, a line as each arrives.

    Parameters
    ----------
    comparisons : iterable of Comparison
        From `compare`.

    Yields
    ------
    str
        A heading, then a line a comparison; ``ratio`` is the share of the other's time.
    """
    form = "{:<18}  {:<29}  {:>12}  {:>9}  {:>9}  {:>6}  {:>6}  {}"
    yield form.format("what", "against", "shape", "median", "other", "ratio", "goal", "").rstrip()
    for line in comparisons:
        ratio = "-" if math.isnan(line.ratio) else f"{line.ratio:.3f}"
        goal = "-" if line.goal is None else f"{line.goal:.3f}"
        verdict = ""
        if line.goal is not None and not math.isnan(line.ratio):
            verdict = "reached" if line.ratio <= line.goal else "missed"
        yield form.format(
            line.what,
            line.against,
            f"{line.dim} x {line.rank}",
            _duration(line.seconds),
            _duration(line.other_seconds),
            ratio,
            goal,
            verdict,
        ).rstrip()
