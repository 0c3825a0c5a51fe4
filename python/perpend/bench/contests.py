"""The contests: each answer asserted, then the two ways timed."""

import math
from collections.abc import Callable, Iterable, Iterator
from typing import Any

import numpy as np
from numpy.typing import NDArray

from perpend._core import Basis, kernel_path
from perpend.bench.turns import Comparison, Contest, one_thread, optional

Matrix = NDArray[np.float64]

#: Shapes (entries a vector, vectors) that take a few seconds in all.
SHORT = ((16, 4), (1000, 64), (10_000, 64))

#: Shortest streams that say something about batch work: under it a call costs more than its arithmetic.
_STREAM = 1000
#: Rounding allowed to two contenders' answers, in units of eps times the square root of the entries of a vector;
#: the vectors compared are random, of a condition below 100.
_ROUNDING = 500.0
#: Shape to which `compare` cuts down the cases it only checks.
_CHECKED = (200, 16)


def conditions() -> Iterator[str]:
    """Say under which conditions `compare` measures here: kernel path, and what is left out or in doubt.

    Yields
    ------
    str
        One line each.
    """
    yield f"kernel path {kernel_path()}, numpy {np.__version__}; medians of turns taken, one thread each"
    if optional("scipy.linalg") is None:
        yield "scipy is not installed: nothing is compared with its qr_insert"
    if optional("threadpoolctl") is None:
        yield "threadpoolctl is not installed: numpy may use more than one thread; set OMP_NUM_THREADS=1 beforehand"


def _assert_alike(vectors: Matrix, triangular: Matrix, q: Matrix, r: Matrix) -> None:
    """Two factorizations are one up to signs: rows of Q in `vectors`, columns in `q`."""
    signs = np.where(np.diag(r) < 0, -1.0, 1.0)
    slack = _ROUNDING * float(np.finfo(float).eps) * math.sqrt(vectors.shape[1])
    np.testing.assert_allclose(vectors, (q * signs).T, rtol=0, atol=slack)
    np.testing.assert_allclose(triangular, signs[:, None] * r, rtol=0, atol=slack * float(np.abs(r).max()))


def _by_add(vectors: Matrix) -> Basis:
    basis = Basis(vectors.shape[1], len(vectors))
    for vector in vectors:
        basis.add(vector)
    return basis


def _by_rows(vectors: Matrix) -> Basis:
    basis = Basis(vectors.shape[1], len(vectors))
    basis.add_rows(vectors)
    return basis


def _four_calls(q: Matrix, v: Matrix) -> tuple[Matrix, Matrix]:
    """Gram-Schmidt twice, written by hand: coefficients and the new basis vector."""
    h = q @ v
    w = v - h @ q
    s = q @ w
    w -= s @ q
    return h + s, w / np.linalg.norm(w)


def streams(vectors: Matrix) -> Iterator[Contest]:
    """Whole streams against one batch factorization."""
    rank, dim = vectors.shape
    # The order of storage that batch QR works in: it has nothing to transpose.
    columns = np.asfortranarray(vectors.T)
    q, r = np.linalg.qr(columns)
    for what, stream, goal in (("stream by add", _by_add, 0.6), ("stream by add_rows", _by_rows, 0.35)):
        basis = stream(vectors)
        _assert_alike(np.asarray(basis.vectors, float), basis.triangular, q, r)

        def ours(stream: Callable[[Matrix], Basis] = stream) -> object:
            return stream(vectors)

        yield Contest(what, "numpy.linalg.qr", dim, rank, goal, ours, lambda: np.linalg.qr(columns))


def _one_more(vectors: Matrix, v: Matrix) -> Iterator[Contest]:
    """One vector more at full rank, and forgotten again, which costs nothing for the last."""
    rank, dim = vectors.shape
    basis = Basis(dim, rank + 1)
    basis.add_rows(vectors)

    def ours() -> None:
        basis.add(v)
        basis.drop(rank)

    grown = basis.copy()
    assert grown.add(v).accepted
    rows, triangular = np.asarray(grown.vectors, float), grown.triangular
    held, factor = rows[:rank].copy(), triangular[:rank, :rank].copy()

    linalg = optional("scipy.linalg")
    if linalg is not None:
        # Stored by columns, as qr_insert itself returns what it has grown, it has nothing to transpose; by rows is how
        # numpy.linalg.qr returns Q, and what it meets the first time.
        for order, q in (("rows", np.ascontiguousarray(held.T)), ("columns", np.asfortranarray(held.T))):

            def inserted(q: Matrix = q) -> Any:
                return linalg.qr_insert(q, factor, v, rank, which="col")

            _assert_alike(rows, triangular, *inserted())
            yield Contest("one add", f"scipy qr_insert, Q by {order}", dim, rank, 1 / 8, ours, inserted)

    h, unit = _four_calls(held, v)
    slack = _ROUNDING * float(np.finfo(float).eps) * math.sqrt(dim)
    np.testing.assert_allclose(unit, rows[rank], rtol=0, atol=slack)
    np.testing.assert_allclose(h, triangular[:rank, rank], rtol=0, atol=slack * float(np.abs(h).max()))
    yield Contest("one add", "Gram-Schmidt twice in numpy", dim, rank, None, ours, lambda: _four_calls(held, v))


def _smallest(rng: np.random.Generator) -> Contest:
    """Compare what a call costs where there is next to nothing to do."""
    dim, rank = 8, 2
    vectors, v = rng.standard_normal((rank, dim)), rng.standard_normal(dim)
    basis = _by_add(vectors)
    expected = np.linalg.lstsq(vectors.T, v, rcond=None)[1][0]
    np.testing.assert_allclose(basis.residual_norm(v) ** 2, expected, rtol=_ROUNDING * float(np.finfo(float).eps))
    pair = np.array([0.75, -1.25])
    return Contest(
        "residual_norm", "numpy.vdot of 2", dim, rank, 1.0, lambda: basis.residual_norm(v), lambda: np.vdot(pair, pair)
    )


def compare(cases: Iterable[tuple[int, int]] = SHORT, *, check: bool = False) -> Iterator[Comparison]:
    """Compare on every case, the smallest call last.

    Parameters
    ----------
    cases : iterable of (int, int)
        Entries a vector, and how many vectors. Whole streams are compared from 1000 entries on.
    check : bool
        Assert every answer on cases cut down to a small size, and time nothing.

    Yields
    ------
    Comparison
        As soon as it has been made: a couple of seconds each, more where one call takes that long.

    Raises
    ------
    AssertionError
        Where two contenders disagree on an answer.
    """
    rng = np.random.default_rng(20261201)
    with one_thread():
        for dim, rank in cases:
            whole = dim >= _STREAM
            size = (min(dim, _CHECKED[0]), min(rank, _CHECKED[1])) if check else (dim, rank)
            vectors, v = rng.standard_normal(size[::-1]), rng.standard_normal(size[0])
            contests = [*(streams(vectors) if whole else ()), *_one_more(vectors, v)]
            for contest in contests:
                yield contest.timed(check)
        yield _smallest(rng).timed(check)
