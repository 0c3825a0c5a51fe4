"""A window of vectors that slides for a long time: run with `-m slow`, some ten seconds a case."""

from collections import deque

import numpy as np
import pytest

from perpend import Basis

EPS = np.finfo(float).eps


@pytest.mark.slow
@pytest.mark.parametrize(("dim", "width", "spread"), [(64, 16, 1.0), (64, 16, 1e-7), (40, 40, 1.0)])
def test_a_million_adds_and_drops_leave_basis_and_factor_at_rounding(dim, width, spread):
    rng = np.random.default_rng(3)
    # With a small spread the vectors all but coincide: condition 1e7 and more.
    pool = rng.standard_normal(dim) * (spread < 1) + spread * rng.standard_normal((1009, dim))
    basis, window = Basis(dim, width), deque()
    for cycle in range(1_000_000):
        if len(window) == width:
            basis.drop(0)
            window.popleft()
        vector = pool[cycle % len(pool)]
        if basis.add(vector).accepted:
            window.append(vector)
    assert basis.orthogonality_error() <= 10 * EPS * np.sqrt(width)
    vectors = np.array(window).T
    error = np.abs(vectors - basis.vectors.T @ basis.triangular).max()
    # Each column lives through at most `width` drops, one rotation of an entry each.
    assert error <= 8 * EPS * width * np.abs(vectors).max()
