"""The basis against plain NumPy, whatever hypothesis thinks of."""

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.stateful import RuleBasedStateMachine, initialize, invariant, precondition, rule

from perpend import Basis

EPS = np.finfo(float).eps
seeds = st.integers(0, 2**32 - 1)


def batch(columns):
    """QR with a positive diagonal: rows of Q, and R."""
    q, r = np.linalg.qr(columns.T)
    signs = np.where(np.diag(r) < 0, -1.0, 1.0)
    return (q * signs).T, r * signs[:, None]


# One by one or at once, against batch QR


@st.composite
def well_conditioned(draw):
    """Vectors of scales up to 2^40 apart, of a condition within 100 when scaled to one length."""
    dim = draw(st.integers(1, 40))
    count = draw(st.integers(0, dim))
    rng = np.random.default_rng(draw(seeds))
    left = np.linalg.qr(rng.standard_normal((dim, count)))[0]
    right = np.linalg.qr(rng.standard_normal((count, count)))[0]
    columns = (left * np.geomspace(1, 0.01, count)) @ right
    scales = 2.0 ** np.array(draw(st.lists(st.integers(-20, 20), min_size=count, max_size=count)))
    return (columns * scales).T.reshape(count, dim)


@given(columns=well_conditioned(), by_rows=st.booleans())
def test_it_equals_batch_qr_on_well_conditioned_vectors(columns, by_rows):
    count, dim = columns.shape
    basis = Basis(dim)
    if by_rows:
        assert basis.add_rows(columns)[0].all()
    else:
        assert all(basis.add(column).accepted for column in columns)
    if count == 0:
        assert basis.vectors.shape == (0, dim)
        return
    q, r = batch(columns)
    lengths = np.linalg.norm(columns, axis=1)
    slack = 8 * EPS * np.sqrt(dim) * np.linalg.cond(r / lengths)
    np.testing.assert_allclose(basis.vectors, q, rtol=0, atol=slack)
    np.testing.assert_allclose(basis.triangular / lengths, r / lengths, rtol=0, atol=slack)


@given(columns=well_conditioned(), dtype=st.sampled_from(["float64", "float32"]))
def test_rows_at_once_are_decided_as_rows_one_by_one(columns, dtype):
    count, dim = columns.shape
    # Every row twice: the second time it is dependent.
    rows = np.repeat(columns, 2, axis=0)
    alone, together = Basis(dim, dtype=dtype), Basis(dim, dtype=dtype)
    steps = [alone.add(row) for row in rows]
    accepted, norms = together.add_rows(rows)
    np.testing.assert_array_equal(accepted, [step.accepted for step in steps])
    np.testing.assert_array_equal(accepted, np.arange(2 * count) % 2 == 0)
    lengths = np.linalg.norm(rows, axis=1)
    slack = 8 * np.finfo(dtype).eps * np.sqrt(dim) * 100 * lengths
    assert (np.abs(norms - [step.residual_norm for step in steps]) <= slack).all()


@given(columns=well_conditioned(), power=st.integers(-900, 900))
def test_scaling_by_a_power_of_two_changes_no_decision_and_no_direction(columns, power):
    one, other = Basis(columns.shape[1]), Basis(columns.shape[1])
    for column in columns:
        assert one.add(column).accepted
        assert other.add(np.ldexp(column, power)).accepted
    # Entries that become subnormal lose digits; away from there every bit is the same up to the order of sums.
    slack = 8 * EPS * np.sqrt(columns.shape[1]) * 100
    np.testing.assert_allclose(other.vectors, one.vectors, rtol=0, atol=slack)


# Any sequence of calls


class Sequences(RuleBasedStateMachine):
    """Random calls on a basis beside a list of what it should hold, judged by NumPy after each."""

    # Decisions far above rounding, so that the oracle's arithmetic and the kernel's cannot differ over them.
    TOLERANCE = 1e-4

    @initialize(
        dim=st.integers(1, 12), dtype=st.sampled_from(["float64", "float32"]), limit=st.none() | st.integers(0, 12)
    )
    def begin(self, dim, dtype, limit):
        self.dim = dim
        self.eps = float(np.finfo(dtype).eps)
        self.limit = dim if limit is None else min(limit, dim)
        self.basis = Basis(dim, None if limit is None else self.limit, dtype=dtype, tolerance=self.TOLERANCE)
        self.held = []
        self.cycles = 0

    # The oracle

    def residual(self, vector):
        """What the held vectors leave of it: two plain projections on a batch basis."""
        if not self.held:
            return vector
        q = np.linalg.qr(np.array(self.held).T)[0]
        w = vector - q @ (q.T @ vector)
        return w - q @ (q.T @ w)

    def verdict(self, vector):
        """Reason, or None where it is to be accepted; a case too near the threshold to call gives "unclear"."""
        norm, left = np.linalg.norm(vector), np.linalg.norm(self.residual(vector))
        if norm == 0:
            return "zero"
        if 0.1 * self.TOLERANCE < left / norm < 10 * self.TOLERANCE:
            return "unclear"
        if left <= self.TOLERANCE * norm:
            return "dependent"
        return "full" if len(self.held) == self.limit else None

    def vector(self, seed, kind, power):
        rng = np.random.default_rng(seed)
        fresh = rng.standard_normal(self.dim)
        if kind == "zero":
            return np.zeros(self.dim)
        if kind != "fresh" and self.held:
            combined = rng.standard_normal(len(self.held)) @ np.array(self.held)
            size = np.linalg.norm(combined) / np.linalg.norm(fresh)
            return combined + (1e-2 * size * fresh if kind == "nearly" else 0.0)
        return fresh * 10.0**power

    kinds = st.sampled_from(["fresh", "fresh", "fresh", "dependent", "nearly", "zero"])
    powers = st.integers(-3, 3)

    # The calls

    @rule(seed=seeds, kind=kinds, power=powers)
    def add(self, seed, kind, power):
        vector = self.vector(seed, kind, power)
        verdict = self.verdict(vector)
        if verdict == "unclear":
            return
        left = np.linalg.norm(self.residual(vector))
        step = self.basis.add(vector)
        assert step.reason == verdict
        assert step.rank == len(self.held)
        assert abs(step.residual_norm - left) <= self.slack_of_spans() * np.linalg.norm(vector)
        if step.accepted:
            self.held.append(vector)

    @rule(seed=seeds, kinds=st.lists(kinds, max_size=20), power=powers)
    def add_rows(self, seed, kinds, power):
        rows, verdicts, before = [], [], list(self.held)
        for index, kind in enumerate(kinds):
            vector = self.vector([seed, index], kind, power)
            verdict = self.verdict(vector)
            if verdict == "unclear":
                continue
            rows.append(vector)
            verdicts.append(verdict is None)
            if verdict is None:
                self.held.append(vector)
        assert len(before) + sum(verdicts) == len(self.held)
        accepted, _ = self.basis.add_rows(np.array(rows).reshape(-1, self.dim))
        np.testing.assert_array_equal(accepted, np.array(verdicts, bool))

    @precondition(lambda self: self.held)
    @rule(choice=st.integers(0, 11))
    def drop(self, choice):
        index = choice % len(self.held)
        self.basis.drop(index)
        del self.held[index]
        self.cycles += 1

    @rule(seed=seeds)
    def split(self, seed):
        vector = np.random.default_rng(seed).standard_normal(self.dim)
        q = self.basis.vectors.astype(float)
        coefficients, residual = self.basis.split(vector)
        slack = 4 * self.eps * (len(self.held) + 1) * np.linalg.norm(vector)
        np.testing.assert_allclose(coefficients, q @ vector, rtol=0, atol=slack)
        np.testing.assert_allclose(residual + coefficients @ q, vector, rtol=0, atol=slack)
        assert np.abs(q @ residual).max(initial=0.0) <= slack
        assert abs(self.basis.residual_norm(vector) - np.linalg.norm(residual)) <= slack

    @rule(seed=seeds)
    def solve(self, seed):
        target = np.random.default_rng(seed).standard_normal(self.dim)
        weights, left = self.basis.solve(target)
        if not self.held:
            assert weights.shape == (0,)
            return
        lengths = np.linalg.norm(self.held, axis=1)
        unit = (np.array(self.held) / lengths[:, None]).T
        expected, *_ = np.linalg.lstsq(unit, target, rcond=None)
        # First-order bound of least squares: the condition on the weights, its square on the residual (Bjorck 1996).
        condition = np.linalg.cond(unit)
        over = np.linalg.norm(target - unit @ expected)
        c = 8 * self.rounding()
        np.testing.assert_allclose(
            weights * lengths, expected, rtol=0, atol=c * (condition * np.linalg.norm(expected) + condition**2 * over)
        )
        assert abs(left - over) <= c * condition * np.linalg.norm(target)

    # What holds throughout

    def rounding(self):
        """Rounding a held vector may carry by now, relative to its norm: a share a vector held and a drop."""
        return self.eps * (len(self.held) + self.cycles + 1)

    def slack_of_spans(self):
        """How far rounding may have turned the span of the held vectors."""
        if not self.held:
            return 8 * EPS * np.sqrt(self.dim)
        unit = np.array(self.held) / np.linalg.norm(self.held, axis=1)[:, None]
        return 8 * self.rounding() * np.linalg.cond(unit)

    @invariant()
    def it_is_orthonormal(self):
        q = self.basis.vectors.astype(float)
        bound = 10 * self.eps * np.sqrt(len(self.held))
        assert q.shape == (len(self.held), self.dim)
        assert np.linalg.norm(np.eye(len(q)) - q @ q.T, 2) <= bound if len(q) else True
        assert self.basis.orthogonality_error() <= bound

    @invariant()
    def its_factor_is_triangular_with_a_positive_diagonal(self):
        r = self.basis.triangular
        assert r.shape == (len(self.held), len(self.held))
        assert (np.tril(r, -1) == 0).all()
        assert (np.diag(r) > 0).all()

    @invariant()
    def it_gives_back_what_it_holds(self):
        if self.held:
            held = np.array(self.held)
            error = np.linalg.norm(self.basis.triangular.T @ self.basis.vectors - held, axis=1)
            assert (error <= 4 * self.rounding() * np.linalg.norm(held, axis=1)).all()

    @invariant()
    def its_condition_is_that_of_what_it_holds(self):
        if self.held:
            condition = np.linalg.cond(np.array(self.held))
            assert abs(self.basis.condition() / condition - 1) <= 8 * self.rounding() * condition


TestSequences = Sequences.TestCase
TestSequences.settings = settings(max_examples=150, stateful_step_count=30, deadline=None)
