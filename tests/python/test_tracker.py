"""The tracker against batch decompositions by a general library."""

import copy

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.linalg import subspace_angles

from perpend import Tracker

EPS = np.finfo(float).eps


def stream(count, channels, seed=0):
    """Rows of three directions that turn slowly, on noise, far from zero."""
    rng = np.random.default_rng(seed)
    first, last = rng.standard_normal((2, 3, channels))
    turn = np.linspace(0, 0.5, count)[:, None, None]
    scores = rng.standard_normal((count, 1, 3)) * [5, 3, 2]
    return 20 + (scores @ (first + turn * last))[:, 0] + 0.1 * rng.standard_normal((count, channels))


def batch(rows, memory=None):
    """Weighted mean, energies and axes."""
    weights = (1 - 1 / memory) ** np.arange(len(rows))[::-1] if memory else np.ones(len(rows))
    weights /= weights.sum()
    mean = weights @ rows
    _, values, axes = np.linalg.svd(np.sqrt(weights)[:, None] * (rows - mean), full_matrices=False)
    return mean, values**2, axes


@pytest.mark.parametrize("memory", [None, 15.0, 400.0])
def test_with_nothing_given_up_it_equals_the_batch_answer_of_the_weighted_rows(memory):
    rows = stream(300, 9)
    tracker = Tracker(9, 3, memory=memory, guard=6)
    for row in rows:
        assert tracker.update(row)
    mean, energies, axes = batch(rows, memory)
    slack = 64 * EPS * np.sqrt(len(rows)) * 9
    np.testing.assert_allclose(tracker.mean, mean, rtol=slack)
    np.testing.assert_allclose(tracker.energies, energies[:3], rtol=0, atol=slack * energies[0])
    assert subspace_angles(tracker.axes.T, axes[:3].T).max() <= slack * energies[0] / (energies[2] - energies[3])
    np.testing.assert_allclose(tracker.noise_energy, energies[3:].sum(), rtol=1e3 * EPS * energies[0] / energies[-1])


def test_rows_at_once_equal_rows_one_by_one():
    rows = stream(200, 7)
    alone, together = Tracker(7, 2, memory=50), Tracker(7, 2, memory=50)
    for row in rows:
        alone.update(row)
    together.update_rows(rows)
    np.testing.assert_allclose(together.energies, alone.energies, rtol=1e3 * EPS)
    assert together.samples == alone.samples == 200


@given(seed=st.integers(0, 2**32 - 1), power=st.integers(-30, 30))
def test_scaling_by_a_power_of_two_scales_the_energies_and_changes_nothing_else(seed, power):
    rows = stream(40, 6, seed)
    plain, scaled = Tracker(6, 2, guard=2, memory=20), Tracker(6, 2, guard=2, memory=20)
    for row in rows:
        plain.update(row)
        scaled.update(np.ldexp(row, power))
    np.testing.assert_array_equal(scaled.energies, np.ldexp(plain.energies, 2 * power))
    np.testing.assert_array_equal(scaled.axes, plain.axes)


@given(seed=st.integers(0, 2**32 - 1))
def test_turning_the_channels_turns_the_axes(seed):
    rows = stream(60, 6, seed)
    turn = np.linalg.qr(np.random.default_rng(seed + 1).standard_normal((6, 6)))[0]
    plain, turned = Tracker(6, 2), Tracker(6, 2)
    plain.update_rows(rows)
    turned.update_rows(rows @ turn)
    np.testing.assert_allclose(turned.energies, plain.energies, rtol=1e4 * EPS)
    assert subspace_angles((plain.axes @ turn).T, turned.axes.T).max() <= 1e4 * EPS / plain.gap


@pytest.mark.parametrize("in_blocks", [False, True])
@given(seed=st.integers(0, 2**32 - 1), order=st.permutations(range(7)))
def test_changing_the_order_of_the_channels_changes_that_of_the_entries_and_nothing_else(in_blocks, seed, order):
    rows = stream(90, 7, seed)
    plain, changed = Tracker(7, 2, guard=2, memory=60), Tracker(7, 2, guard=2, memory=60)
    for tracker, its_rows in ((plain, rows), (changed, rows[:, order])):
        if in_blocks:
            tracker.update_rows(its_rows)
        else:
            for row in its_rows:
                tracker.update(row)
    np.testing.assert_allclose(changed.energies, plain.energies, rtol=1e4 * EPS)
    np.testing.assert_allclose(changed.mean, plain.mean[order], rtol=64 * EPS)
    assert subspace_angles(plain.axes[:, order].T, changed.axes.T).max() <= 1e5 * EPS / plain.gap


@given(
    seed=st.integers(0, 2**32 - 1),
    shape=st.sampled_from([(12, 3, 4), (14, 1, 1)]),
    pieces=st.lists(st.integers(1, 80), min_size=1, max_size=5),
)
def test_rows_cut_into_any_pieces_keep_the_exact_energies_within_the_certificate(seed, shape, pieces):
    channels, rank, guard = shape
    rows = stream(160, channels, seed)
    tracker = Tracker(channels, rank, guard=guard, memory=90)
    edges = np.cumsum(pieces)
    for piece in np.split(rows, edges[edges < 160]):
        tracker.update_rows(piece)
    upper, _ = tracker.certificate()
    _, energies, _ = batch(rows, 90)
    slack = 1e3 * EPS * energies[0]
    assert np.all(tracker.energies <= energies[:rank] + slack)
    assert np.all(energies[:rank] <= upper + slack)
    total = tracker.energies.sum() + tracker.noise_energy
    np.testing.assert_allclose(total, energies.sum(), rtol=1e3 * EPS)


@given(seed=st.integers(0, 2**32 - 1), guard=st.integers(0, 6), memory=st.floats(5, 200))
def test_the_exact_weighted_energies_lie_within_the_certificate(seed, guard, memory):
    rows = stream(150, 12, seed)
    tracker = Tracker(12, 3, guard=guard, memory=memory)
    tracker.update_rows(rows)
    upper, angle = tracker.certificate()
    _, energies, axes = batch(rows, memory)
    slack = 1e3 * EPS * energies[0]
    assert np.all(tracker.energies <= energies[:3] + slack)
    assert np.all(energies[:3] <= upper + slack)
    if angle is not None:
        assert subspace_angles(tracker.axes.T, axes[:3].T).max() <= angle + 1e4 * EPS


def test_more_directions_than_reported_bring_the_subspace_nearer_the_exact_one():
    rows = stream(2000, 30, 5)
    _, _, axes = batch(rows, 100)
    worst = {}
    for guard in (0, 3, 8):
        tracker = Tracker(30, 3, guard=guard, memory=100)
        tracker.update_rows(rows)
        worst[guard] = subspace_angles(tracker.axes.T, axes[:3].T).max()
    assert worst[8] < worst[3] < worst[0]
    assert worst[8] <= worst[0] / 10


def test_gaps_take_the_value_that_the_model_gives_them():
    rows = stream(400, 8)
    tracker = Tracker(8, 3)
    tracker.update_rows(rows[:-1])
    row = rows[-1].copy()
    row[2] = np.nan
    value = tracker.reconstruct(row)
    assert abs(value[2] - rows[-1, 2]) < 1.0
    coefficients, residual = tracker.split(row)
    seen = np.arange(8) != 2
    fitted = np.linalg.lstsq(tracker.axes[:, seen].T, (row - tracker.mean)[seen], rcond=None)[0]
    np.testing.assert_allclose(coefficients, fitted, rtol=1e4 * EPS)
    assert residual[2] == 0
    expected = np.linalg.norm(residual) * np.sqrt(8 / 7)
    np.testing.assert_allclose(tracker.residual_norm(row), expected, rtol=8 * EPS)


def test_a_row_with_too_few_channels_is_counted_and_skipped():
    tracker = Tracker(5, 3)
    tracker.update_rows(stream(20, 5))
    assert not tracker.update([np.nan, np.nan, np.nan, 18.2, 23.9])
    assert tracker.skipped == 1
    assert tracker.samples == 20


def test_a_channel_that_arrives_late_starts_without_a_jump():
    rows = stream(200, 6) + 1e9
    rows[:100, 4] = np.nan
    tracker = Tracker(6, 2, memory=50)
    tracker.update_rows(rows)
    assert tracker.energies.max() < 1e4
    assert abs(tracker.mean[4] - rows[-50:, 4].mean()) < 20


def test_an_offset_of_a_thousand_million_costs_the_unit_signal_no_more_than_its_own_digits():
    rows = stream(500, 6)
    plain, lifted = Tracker(6, 2), Tracker(6, 2)
    plain.update_rows(rows)
    lifted.update_rows(rows + 1e9)
    # A value of 1e9 carries 1e9 eps of rounding, 2e-7, against a noise of 0.1.
    np.testing.assert_allclose(lifted.energies, plain.energies, rtol=1e-7)


def test_elapsed_ticks_forget_as_that_many_ticks_do():
    rows = stream(60, 5)
    tracker = Tracker(5, 2, memory=30, guard=3)
    for row in rows[:-1]:
        tracker.update(row)
    tracker.update(rows[-1], elapsed=200)
    weights = np.concatenate([(29 / 30) ** (200 + np.arange(59)[::-1]), [1.0]])
    assert tracker.total_weight == pytest.approx(weights.sum(), rel=1e3 * EPS)


def test_a_weight_of_zero_learns_nothing_and_forgets_nothing():
    tracker = Tracker(5, 2, memory=30)
    tracker.update_rows(stream(40, 5))
    before = tracker.energies, tracker.mean, tracker.total_weight
    assert not tracker.update(np.full(5, 1e6), 0.0)
    for old, new in zip(before, (tracker.energies, tracker.mean, tracker.total_weight), strict=True):
        np.testing.assert_array_equal(old, new)


def test_merged_histories_equal_the_history_of_all_rows():
    rows = stream(150, 7)
    whole, first, second = (Tracker(7, 3, guard=4) for _ in range(3))
    whole.update_rows(rows)
    first.update_rows(rows[:60])
    second.update_rows(rows[60:])
    first.merge(second)
    np.testing.assert_allclose(first.energies, whole.energies, rtol=1e3 * EPS)
    np.testing.assert_allclose(first.mean, whole.mean, rtol=1e2 * EPS)
    with pytest.raises(ValueError, match="memory differs"):
        first.merge(Tracker(7, 3, guard=4, memory=10))
    with pytest.raises(ValueError, match="dtype differs"):
        first.merge(Tracker(7, 3, guard=4, dtype="float32"))


@pytest.mark.parametrize(
    ("settings", "message"),
    [
        ({"channels": 4, "rank": 5}, "rank: expected 1 to channels = 4, got 5"),
        ({"channels": 4, "rank": 0}, "rank: expected"),
        ({"channels": 4, "rank": 2, "guard": 3}, "guard: expected at most channels - rank = 2, got 3"),
        ({"channels": 4, "rank": 2, "memory": 1.0}, "memory: expected"),
        ({"channels": 4, "rank": 2, "memory": np.nan}, "memory: expected"),
    ],
)
def test_settings_out_of_range_are_refused_by_name(settings, message):
    with pytest.raises(ValueError, match=message):
        Tracker(**settings)


def test_a_bad_row_is_refused_with_its_place_and_leaves_the_tracker_as_it_was():
    tracker = Tracker(4, 2, memory=20)
    tracker.update_rows(stream(30, 4))
    twin = copy.copy(tracker)
    with pytest.raises(ValueError, match="row: expected 4 entries, got 3"):
        tracker.update([20.4, 18.9, 23.1])
    with pytest.raises(ValueError, match="inf at index 1"):
        tracker.update([0.0, np.inf, 0.0, 0.0])
    rows = stream(5, 4)
    rows[3, 0] = -np.inf
    with pytest.raises(ValueError, match="row 3: row: expected finite entries, got -inf at index 0"):
        tracker.update_rows(rows)
    with pytest.raises(TypeError, match="real numbers"):
        tracker.update(["a", "b", "c", "d"])
    with pytest.raises(ValueError, match="weight: expected"):
        tracker.update([17, 23, 19, 31], -1)
    np.testing.assert_array_equal(tracker.energies, twin.energies)
    assert tracker.samples == twin.samples


def test_share_chooses_how_many_axes_are_reported():
    rows = stream(400, 12)
    tracker = Tracker(12, 8, share=0.95)
    tracker.update_rows(rows)
    _, energies, axes = batch(rows)
    needed = int(np.searchsorted(np.cumsum(energies) / energies.sum(), 0.95)) + 1
    assert tracker.rank == len(tracker.energies) == needed
    assert tracker.axes.shape == (needed, 12)
    assert tracker.split(rows[0])[0].shape == (needed,)
    assert tracker.rank + tracker.guard == 12
    assert subspace_angles(tracker.axes.T, axes[:needed].T).max() < 1e-9
    with pytest.raises(ValueError, match="share"):
        Tracker(12, 8, share=1.5)
