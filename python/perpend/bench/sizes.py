"""Streaming and batch over a range of sizes."""

from collections.abc import Iterator, Sequence

import numpy as np

from perpend.bench.contests import streams
from perpend.bench.turns import Comparison, one_thread

#: Vectors of a stream, and entries a vector: from what fits the nearest cache to what fits none.
RANK = 32
SIZES = (250, 1_000, 4_000, 16_000, 64_000)


def across_sizes(sizes: Sequence[int] = SIZES, *, rank: int = RANK, check: bool = False) -> Iterator[Comparison]:
    """Compare whole streams with one batch factorization, from the shortest vectors to the longest.

    Parameters
    ----------
    sizes : sequence of int
        Entries a vector, each at least `rank`.
    rank : int
        Vectors.
    check : bool
        Assert every answer, and time nothing.

    Yields
    ------
    Comparison
        Two a size: vector by vector, and all rows in one call.

    Raises
    ------
    AssertionError
        Where streaming and batch disagree.
    """
    rng = np.random.default_rng(20261202)
    with one_thread():
        for dim in sizes:
            for contest in streams(rng.standard_normal((rank, dim))):
                yield contest.timed(check)
