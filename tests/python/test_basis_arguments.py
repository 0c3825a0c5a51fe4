"""What a basis is made with: stored type, tolerance, sizes; copies; a capacity and a sliding window."""

import copy

import numpy as np
import pytest

from perpend import Basis

EPS = np.finfo(float).eps
DIM = 6
RNG = np.random.default_rng(20261202)
ROWS = RNG.integers(-64, 64, (4, DIM)) / 16


def filled(**arguments):
    basis = Basis(DIM, **arguments)
    assert basis.add_rows(ROWS)[0].all()
    return basis


def state(basis):
    return basis.rank, basis.vectors.tobytes(), basis.triangular.tobytes()


@pytest.mark.parametrize("copied", [copy.copy, copy.deepcopy, Basis.copy], ids=["copy", "deepcopy", "method"])
@pytest.mark.parametrize("dtype", ["float64", "float32"])
def test_a_copy_is_equal_and_goes_its_own_way(copied, dtype):
    basis = filled(capacity=5, dtype=dtype, tolerance=0.25)
    other = copied(basis)
    assert state(other) == state(basis)
    assert other.capacity == 5
    before = state(basis)
    other.drop(0)
    other.add(np.arange(DIM) ** 2)
    assert state(basis) == before
    basis.drop(0)
    basis.add(np.arange(DIM) ** 2)
    assert state(other) == state(basis)
    # The tolerance went along: a quarter of a vector is still nothing new.
    nearly = basis.vectors[0] + 0.2 * basis.split(np.arange(DIM) ** 3)[1]
    assert basis.add(nearly).reason == other.add(nearly).reason


# Arguments


@pytest.mark.parametrize("dtype", ["float32", np.float32, np.dtype("float32"), "float64", float, np.dtype(">f8")])
def test_the_stored_type_can_be_named_as_numpy_names_it(dtype):
    basis = filled(dtype=dtype)
    expected = np.dtype(dtype).newbyteorder("=")
    assert basis.vectors.dtype == expected
    assert basis.triangular.dtype == np.float64
    assert basis.orthogonality_error() <= 10 * np.finfo(expected).eps * 2


@pytest.mark.parametrize("dtype", ["float16", "int64", int, complex, object, "longdouble", "steam"])
def test_another_type_is_refused(dtype):
    with pytest.raises(TypeError):
        Basis(DIM, dtype=dtype)


@pytest.mark.parametrize("tolerance", [-1e-9, np.nan, np.inf, (-1e-9, 0.0), (0.0, -1.0), (0.0, np.nan)])
def test_a_tolerance_that_is_no_size_is_refused_by_name(tolerance):
    with pytest.raises(ValueError, match="tolerance: expected a finite number, 0 or more, got"):
        Basis(DIM, tolerance=tolerance)


@pytest.mark.parametrize("tolerance", ["tight", [], (1e-9,), (1e-9, 1e-9, 1e-9), 1j])
def test_a_tolerance_that_is_no_number_is_refused_as_a_type(tolerance):
    with pytest.raises(TypeError):
        Basis(DIM, tolerance=tolerance)


@pytest.mark.parametrize(
    ("dim", "capacity", "message"),
    [(0, None, "dim: expected at least 1, got 0"), (3, 4, "capacity: expected at most dim = 3"), (-1, None, "got -1")],
)
def test_sizes_out_of_range_are_refused_by_name(dim, capacity, message):
    with pytest.raises(ValueError, match=message):
        Basis(dim, capacity)


@pytest.mark.parametrize("dim", [2.5, "3", None])
def test_a_size_that_is_no_whole_number_is_refused_as_a_type(dim):
    with pytest.raises(TypeError):
        Basis(dim)


@pytest.mark.parametrize("dtype", ["float64", "float32"])
def test_the_default_tolerance_is_dim_times_eps_of_the_vector(dtype):
    eps = float(np.finfo(dtype).eps)
    vector = np.zeros(DIM)
    vector[0] = 3.0
    for share, accepted in [(0.5, False), (2.0, True)]:
        basis = Basis(DIM, dtype=dtype)
        basis.add([1.0] + [0.0] * (DIM - 1))
        vector[1] = 3.0 * share * DIM * eps
        step = basis.add(vector)
        assert step.accepted is accepted
        assert step.threshold == pytest.approx(3.0 * DIM * eps, rel=4 * EPS)
        assert step.residual_norm == pytest.approx(vector[1], rel=4 * EPS)
        assert step.reason == (None if accepted else "dependent")


def test_a_pair_of_tolerances_is_relative_and_absolute():
    axes = np.eye(DIM)
    relative, both = Basis(DIM, tolerance=1e-3), Basis(DIM, tolerance=(1e-3, 0.5))
    for basis in (relative, both):
        assert basis.add(axes[0]).accepted
    assert relative.add(0.4 * axes[1]).accepted
    assert both.add(0.4 * axes[1]).reason == "dependent"
    assert both.add(1e4 * axes[0] + 5 * axes[1]).reason == "dependent"
    assert both.add(0.6 * axes[1]).accepted


# Capacity


def test_a_full_basis_says_so_measures_on_and_has_room_again_after_a_drop():
    basis = Basis(DIM, 2)
    assert (basis.capacity, basis.dim, len(basis)) == (2, DIM, 0)
    basis.add_rows(ROWS[:2])
    before = state(basis)
    step = basis.add(ROWS[2])
    assert (step.accepted, step.reason, step.rank) == (False, "full", 2)
    assert step.residual_norm == pytest.approx(basis.residual_norm(ROWS[2]), rel=4 * EPS)
    assert basis.add(ROWS[0]).reason == "dependent"
    assert basis.add(np.zeros(DIM)).reason == "zero"
    assert not basis.add_rows(ROWS)[0].any()
    assert state(basis) == before
    basis.drop(0)
    assert basis.add(ROWS[2]).accepted


def test_without_a_capacity_it_grows_to_its_dimension_and_no_further():
    basis = Basis(40)
    rows = RNG.standard_normal((50, 40))
    accepted, _ = basis.add_rows(rows)
    assert accepted[:40].all()
    assert not accepted[40:].any()
    assert (basis.rank, basis.capacity) == (40, 40)
    assert basis.orthogonality_error() <= 10 * EPS * np.sqrt(40)


def test_a_capacity_of_none_at_all_holds_nothing():
    assert Basis(DIM, 0).add(ROWS[0]).reason == "full"


def test_a_sliding_window_holds_the_last_vectors():
    width, dim = 5, 12
    rows = RNG.standard_normal((200, dim))
    basis = Basis(dim, width)
    for index, row in enumerate(rows):
        if basis.rank == width:
            basis.drop(0)
        assert basis.add(row).accepted
        window = rows[max(0, index + 1 - width) : index + 1]
        cycles = index + 1
        np.testing.assert_allclose(
            basis.triangular.T @ basis.vectors, window, rtol=0, atol=2 * EPS * (cycles + width) * np.abs(window).max()
        )
        assert basis.orthogonality_error() <= 10 * EPS * np.sqrt(basis.rank)
