"""A basis and its rows in the hands of more than one thread."""

import threading

import numpy as np
import pytest

from perpend import Basis, Tracker


def test_rows_that_another_thread_spoils_meanwhile_put_no_nan_into_the_basis():
    rows = np.random.default_rng(4).standard_normal((600, 3000))
    basis = Basis(3000, 600)
    spoil = threading.Timer(0.05, lambda: rows.fill(np.nan))
    spoil.start()
    try:
        basis.add_rows(rows)
    except ValueError:
        pass
    finally:
        spoil.join()
    assert np.isfinite(basis.vectors).all()
    assert np.isfinite(basis.triangular).all()
    assert basis.orthogonality_error() <= 10 * np.finfo(float).eps * np.sqrt(max(basis.rank, 1))


def test_many_threads_leave_the_result_of_some_order():
    basis, tracker = Basis(40, 30), Tracker(40, 3, memory=50)
    errors = []

    def hammer(seed):
        rng = np.random.default_rng(seed)
        try:
            for _ in range(100):
                basis.add(rng.standard_normal(40))
                basis.residual_norm(rng.standard_normal(40))
                if basis.rank == 30:
                    basis.drop(0)
                tracker.update(rng.standard_normal(40))
                tracker.angles(tracker.copy())
        except Exception as error:
            errors.append(error)

    threads = [threading.Thread(target=hammer, args=(seed,)) for seed in range(8)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join(60)
    assert not errors
    assert tracker.samples == 800
    assert basis.orthogonality_error() <= 10 * np.finfo(float).eps * np.sqrt(30)


def test_an_error_far_down_the_rows_names_the_row_among_all():
    rows = np.random.default_rng(6).standard_normal((6000, 200))
    rows[5000, 7] = 1e200
    with pytest.raises(ValueError, match="row 5000"):
        Tracker(200, 3).update_rows(rows)


def test_a_weight_beyond_all_numbers_is_refused_and_leaves_the_tracker_usable():
    tracker = Tracker(4, 2)
    tracker.update([0.5, 1.5, -2.0, 0.25], 1e308)
    with pytest.raises(ValueError, match="total weight"):
        tracker.update([0.5, 1.0, -2.0, 0.5], 1e308)
    assert tracker.samples == 1
    assert np.isfinite(tracker.total_weight)
