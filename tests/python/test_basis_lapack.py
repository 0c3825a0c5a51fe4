"""LAPACK's own test ratios for an orthogonal factorization, over LAPACK's own matrix types and sizes.

Ratios, types, sizes and scales are those of LAPACK's test programs dqrt01, dlatb4 and dchkqr (and dchkge for the zero
columns). LAPACK passes a ratio below 30; here the bound is 1 from 32 entries a vector on, and 4 under it, where the
rounding of a single entry weighs more. The sizes hold 0 as well: no columns is an empty basis; no rows is refused.

The suite runs once on every kernel path; this file tests the path in use.
"""

import numpy as np
import pytest

from perpend import Basis

SIZES = [0, 1, 2, 3, 5, 10, 50]
SEEDS = [1988, 1989, 1990]
# Unit roundoff, the EPS of dqrt01.
UNIT = {"float64": 2.0**-53, "float32": 2.0**-24}


def bound(dim):
    return 1.0 if dim >= 32 else 4.0


# Matrix types


def orthogonal(rng, order):
    """A random orthogonal matrix."""
    q, r = np.linalg.qr(rng.standard_normal((order, order)))
    return q * np.where(np.diag(r) < 0, -1.0, 1.0)


def conditioned(rng, rows, columns, condition):
    """Random singular vectors, singular values in geometric order from 1 down to 1/condition (mode 3 of dlatms)."""
    count = min(rows, columns)
    if count == 0:
        return np.zeros((rows, columns))
    values = condition ** (-np.arange(count) / max(count - 1, 1))
    return (orthogonal(rng, rows)[:, :count] * values) @ orthogonal(rng, columns)[:count]


def diagonal(rng, rows, columns, _dtype):
    a = np.zeros((rows, columns))
    count = min(rows, columns)
    a[np.arange(count), np.arange(count)] = 2.0 ** -rng.permutation(np.linspace(0, 1, count))
    return a


def upper(rng, rows, columns, _dtype):
    return np.linalg.qr(conditioned(rng, rows, columns, 2.0), mode="complete")[1] if columns else np.zeros((rows, 0))


def lower(rng, rows, columns, dtype):
    return upper(rng, columns, rows, dtype).T if columns else np.zeros((rows, 0))


def well(rng, rows, columns, _dtype):
    return conditioned(rng, rows, columns, 2.0)


def badly(rng, rows, columns, dtype):
    return conditioned(rng, rows, columns, np.sqrt(0.1 / np.finfo(dtype).eps))


def worst(rng, rows, columns, dtype):
    return conditioned(rng, rows, columns, 0.1 / np.finfo(dtype).eps)


def near_underflow(rng, rows, columns, dtype):
    # dlatb4: a quarter of the safe minimum over eps.
    return 0.25 * float(np.finfo(dtype).tiny) / float(np.finfo(dtype).eps) * badly(rng, rows, columns, dtype)


def near_overflow(rng, rows, columns, dtype):
    return badly(rng, rows, columns, dtype) / (0.25 * float(np.finfo(dtype).tiny) / float(np.finfo(dtype).eps))


def first_column_zero(rng, rows, columns, _dtype):
    a = well(rng, rows, columns, _dtype)
    a[:, :1] = 0.0
    return a


def last_column_zero(rng, rows, columns, _dtype):
    a = well(rng, rows, columns, _dtype)
    a[:, -1:] = 0.0
    return a


def last_half_zero(rng, rows, columns, _dtype):
    a = well(rng, rows, columns, _dtype)
    a[:, columns // 2 :] = 0.0
    return a


def all_zero(_rng, rows, columns, _dtype):
    return np.zeros((rows, columns))


TYPES = [
    diagonal,
    upper,
    lower,
    well,
    badly,
    worst,
    near_underflow,
    near_overflow,
    first_column_zero,
    last_column_zero,
    last_half_zero,
    all_zero,
]


# Ratios


def factor(a, dtype, by_rows):
    """Q by rows, and the coefficients of every column: A = Q^T C.

    With a tolerance of zero only what is exactly dependent, or all rounding noise, is left out of Q, as a batch
    factorization would have it; such a column's coefficients are those of its split.
    """
    basis = Basis(len(a), dtype=dtype, tolerance=0.0)
    accepted = basis.add_rows(a.T)[0] if by_rows else np.array([basis.add(column).accepted for column in a.T], bool)
    coefficients = np.zeros((basis.rank, a.shape[1]))
    coefficients[:, accepted] = basis.triangular
    for index in np.flatnonzero(~accepted):
        coefficients[:, index] = basis.split(a[:, index])[0]
    return basis.vectors.astype(float), coefficients


def norm_1(a):
    """Largest absolute column sum; 0 of nothing."""
    return np.abs(a).sum(axis=0).max(initial=0.0)


def ratios(a, dtype, by_rows):
    dim = len(a)
    q, coefficients = factor(a, dtype, by_rows)
    orthogonality = norm_1(np.eye(len(q)) - q @ q.T) / (dim * UNIT[dtype])
    size = norm_1(a)
    # LAPACK's guard: of a zero matrix the residual must be zero.
    residual = norm_1(a - q.T @ coefficients)
    reconstruction = residual / size / (dim * UNIT[dtype]) if size > 0 else residual
    return orthogonality, reconstruction


@pytest.mark.parametrize("by_rows", [False, True], ids=["add", "add_rows"])
@pytest.mark.parametrize("dtype", ["float64", "float32"])
@pytest.mark.parametrize("kind", TYPES, ids=lambda kind: kind.__name__)
def test_both_ratios_stay_below_one_for_long_vectors_and_four_for_short_ones(kind, dtype, by_rows):
    for seed in SEEDS:
        rng = np.random.default_rng(seed)
        for rows in SIZES[1:]:
            for columns in SIZES:
                a = kind(rng, rows, columns, dtype).astype(dtype).astype(float)
                orthogonality, reconstruction = ratios(a, dtype, by_rows)
                case = f"{rows} by {columns}, seed {seed}"
                assert orthogonality < bound(rows), case
                assert reconstruction < bound(rows), case


@pytest.mark.parametrize("dtype", ["float64", "float32"])
@pytest.mark.parametrize("kind", [badly, worst], ids=lambda kind: kind.__name__)
def test_the_ratio_finds_plain_gram_schmidt_out(kind, dtype):
    """The control: without re-orthogonalization, in the same type, the ratio is beyond LAPACK's own threshold."""
    a = kind(np.random.default_rng(SEEDS[0]), 50, 50, dtype).astype(dtype)
    q = np.zeros((0, 50), dtype)
    for column in a.T:
        w = column - q.T @ (q @ column)
        q = np.vstack([q, w / np.linalg.norm(w)])
    q = q.astype(float)
    assert norm_1(np.eye(50) - q @ q.T) / (50 * UNIT[dtype]) > 30.0


def test_vectors_of_no_entries_are_refused():
    with pytest.raises(ValueError, match="dim: expected at least 1, got 0"):
        Basis(0)
