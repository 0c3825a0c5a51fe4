"""Arrays as they come, what becomes of them, and what a call leaves behind."""

import warnings

import numpy as np
import pytest

from perpend import Basis

EPS = np.finfo(float).eps
DIM = 6
RNG = np.random.default_rng(20261201)
# Sixteenths: float32 and float64 hold them alike.
ROWS = RNG.integers(-64, 64, (4, DIM)) / 16
WHOLE = RNG.integers(-64, 64, (4, DIM)).astype(float)


def filled(rows=ROWS, **arguments):
    basis = Basis(DIM, **arguments)
    assert basis.add_rows(rows)[0].all()
    return basis


def state(basis):
    return basis.rank, basis.vectors.tobytes(), basis.triangular.tobytes()


def unaligned(array):
    """The same entries one byte off."""
    buffer = np.zeros(array.nbytes + 1, np.uint8)
    view = buffer[1:].view(array.dtype).reshape(array.shape)
    view[...] = array
    assert not view.flags.aligned
    return view


def read_only(array):
    array = array.copy()
    array.flags.writeable = False
    return array


class Sheet:
    """Something that is no array but knows how to become one, as data frames do."""

    def __init__(self, array):
        self.array = array

    def __array__(self, dtype=None, copy=None):
        return self.array if dtype is None else self.array.astype(dtype)


VECTOR_FORMS = {
    "strided": lambda v: np.repeat(v, 3)[::3],
    "reversed": lambda v: v[::-1].copy()[::-1],
    "a column of a matrix": lambda v: np.column_stack([v, v + 1])[:, 0],
    "big-endian": lambda v: v.astype(">f8"),
    "read-only": read_only,
    "unaligned": unaligned,
    "long double": lambda v: v.astype(np.longdouble),
    "float32": lambda v: v.astype(np.float32),
    "float16": lambda v: v.astype(np.float16),
    "a list": lambda v: v.tolist(),
    "a tuple": lambda v: tuple(v.tolist()),
    "a list of scalars": list,
    "anything with __array__": Sheet,
    "a masked array with nothing masked": np.ma.masked_array,
}
ROWS_FORMS = {
    "strided": lambda a: np.repeat(np.repeat(a, 2, axis=0), 3, axis=1)[::2, ::3],
    "reversed": lambda a: a[::-1, ::-1].copy()[::-1, ::-1],
    "transposed": lambda a: a.T.copy().T,
    "Fortran": np.asfortranarray,
    "big-endian": lambda a: a.astype(">f8"),
    "read-only": read_only,
    "unaligned": unaligned,
    "float32": lambda a: a.astype(np.float32),
    "lists": lambda a: a.tolist(),
    "a list of rows": list,
    "anything with __array__": Sheet,
    "a masked array with nothing masked": np.ma.masked_array,
}


@pytest.mark.parametrize("form", VECTOR_FORMS.values(), ids=VECTOR_FORMS)
def test_a_vector_in_any_form_gives_the_same_to_the_bit(form):
    expected, basis = filled(), filled()
    vector = np.arange(DIM) / 8 - 0.25
    given = form(vector)
    assert basis.residual_norm(given) == expected.residual_norm(vector)
    for got, wanted in zip(basis.split(given), expected.split(vector), strict=True):
        np.testing.assert_array_equal(got, wanted)
    np.testing.assert_array_equal(basis.solve(given)[0], expected.solve(vector)[0])
    step, wanted = basis.add(given), expected.add(vector)
    assert (step.accepted, step.residual_norm, step.loss) == (True, wanted.residual_norm, wanted.loss)
    assert state(basis) == state(expected)


@pytest.mark.parametrize("form", ROWS_FORMS.values(), ids=ROWS_FORMS)
def test_rows_in_any_form_give_the_same_to_the_bit(form):
    basis = Basis(DIM)
    assert basis.add_rows(form(ROWS))[0].all()
    assert state(basis) == state(filled())
    for got, wanted in zip(basis.split_rows(form(ROWS * 2)), filled().split_rows(ROWS * 2), strict=True):
        np.testing.assert_array_equal(got, wanted)


@pytest.mark.parametrize("dtype", [np.int8, np.int64, np.uint16, ">i4", bool])
def test_whole_numbers_and_truth_values_are_numbers(dtype):
    rows = np.abs(WHOLE).astype(dtype)
    basis, expected = Basis(DIM), Basis(DIM)
    np.testing.assert_array_equal(basis.add_rows(rows)[0], expected.add_rows(rows.astype(float))[0])
    assert basis.residual_norm(rows[0]) == expected.residual_norm(rows[0].astype(float))
    assert state(basis) == state(expected)


NOT_NUMBERS = {
    "objects": np.array([1.0] * DIM, dtype=object),
    "complex": np.ones(DIM, complex),
    "text": np.array(["1"] * DIM),
    "bytes": np.array([b"1"] * DIM),
    "dates": np.zeros(DIM, "datetime64[s]"),
    "records": np.zeros(DIM, [("a", float)]),
    "None": None,
    "a list with None": [1.0] * (DIM - 1) + [None],
}


def calls(basis, vector):
    """Every call that takes a vector, and those that take rows, with it as their last row."""
    rows = [ROWS[0] + 1, vector]
    single = [basis.add, basis.split, basis.residual_norm, basis.solve]
    return [*((call, vector) for call in single), *((call, rows) for call in (basis.add_rows, basis.split_rows))]


@pytest.mark.parametrize("vector", NOT_NUMBERS.values(), ids=NOT_NUMBERS)
def test_what_is_no_real_number_is_refused_as_a_type_and_changes_nothing(vector):
    basis = filled()
    before = state(basis)
    for call in (basis.add, basis.split, basis.residual_norm, basis.solve):
        with pytest.raises(TypeError, match="expected real numbers, got an array of"):
            call(vector)
    for call in (basis.add_rows, basis.split_rows):
        with pytest.raises(TypeError, match="expected real numbers, got an array of"):
            call(np.array([vector, vector]))
    assert state(basis) == before


@pytest.mark.parametrize("value", [np.nan, np.inf, -np.inf])
def test_an_entry_that_is_not_finite_is_refused_with_its_place_and_changes_nothing(value):
    basis = filled()
    before = state(basis)
    vector = np.ones(DIM)
    vector[4] = value
    for call, argument in calls(basis, vector):
        with pytest.raises(ValueError, match=r"got .* at index 4") as caught:
            call(argument)
        assert ("row 1: " in str(caught.value)) == isinstance(argument, list)
    assert state(basis) == before


@pytest.mark.parametrize("dtype", [float, np.float32, int, ">f8"])
def test_a_masked_entry_is_missing_and_a_basis_refuses_it_with_its_place(dtype):
    basis = filled()
    before = state(basis)
    vector = np.ma.masked_array(np.ones(DIM, dtype), mask=np.arange(DIM) == 3)
    for call in (basis.add, basis.split, basis.residual_norm, basis.solve):
        with pytest.raises(ValueError, match="NaN at index 3"):
            call(vector)
    rows = np.ma.masked_array(np.ones((2, DIM), dtype), mask=[[False] * DIM, [True] * DIM])
    for call in (basis.add_rows, basis.split_rows):
        with pytest.raises(ValueError, match=r"row 1: .*NaN at index 0"):
            call(rows)
    assert state(basis) == before


def test_a_norm_beyond_the_largest_number_is_refused_and_changes_nothing():
    basis = filled()
    before = state(basis)
    for call, argument in calls(basis, np.full(DIM, 1e308)):
        with pytest.raises(ValueError, match="exceeds the largest float64"):
            call(argument)
    assert state(basis) == before


@pytest.mark.parametrize("vector", [np.ones(DIM - 1), np.ones(DIM + 1), [], np.ones((1, DIM)), np.ones((DIM, 1)), 1.0])
def test_a_vector_of_another_shape_is_refused_and_changes_nothing(vector):
    basis = filled()
    before = state(basis)
    for call in (basis.add, basis.split, basis.residual_norm, basis.solve):
        with pytest.raises(ValueError, match=r"vector: expected (6 entries|one dimension), got \d"):
            call(vector)
    assert state(basis) == before


@pytest.mark.parametrize(
    "rows", [np.ones((2, DIM - 1)), np.ones((DIM, 2)), np.ones(DIM), np.ones((2, 2, DIM)), np.ones((0, DIM + 1)), 1.0]
)
def test_rows_of_another_shape_are_refused_and_change_nothing(rows):
    basis = filled()
    before = state(basis)
    for call in (basis.add_rows, basis.split_rows):
        with pytest.raises(ValueError, match=r"rows: expected (6 columns|two dimensions), got \d"):
            call(rows)
    assert state(basis) == before


def test_a_single_number_is_no_vector_even_where_one_entry_is_asked_for():
    with pytest.raises(ValueError, match="expected one dimension, got 0"):
        Basis(1).add(5.0)


def test_no_rows_are_no_error_and_change_nothing():
    basis = filled()
    before = state(basis)
    accepted, norms = basis.add_rows(np.zeros((0, DIM)))
    assert accepted.shape == norms.shape == (0,)
    coefficients, residuals = basis.split_rows(np.zeros((0, DIM)))
    assert coefficients.shape == (0, 4)
    assert residuals.shape == (0, DIM)
    assert state(basis) == before


def test_a_bad_row_among_good_ones_adds_none_of_them():
    basis = Basis(DIM)
    rows = np.vstack([ROWS, ROWS[:1]])
    rows[4, 5] = np.nan
    with pytest.raises(ValueError, match=r"row 4: .*index 5"):
        basis.add_rows(rows)
    assert basis.rank == 0


def test_after_errors_the_basis_goes_on_as_if_they_had_never_been():
    basis, untouched = filled(), filled()
    for bad in ([1.0], ["a"] * DIM, [np.nan] * DIM, [1e308] * DIM):
        with pytest.raises((ValueError, TypeError)):
            basis.add(bad)
        with pytest.raises((ValueError, TypeError)):
            basis.solve(bad)
    with pytest.raises(ValueError, match="index: expected below the rank, 4, got 4"):
        basis.drop(4)
    for one in (basis, untouched):
        one.drop(1)
        one.add(np.arange(DIM) + 0.5)
    assert state(basis) == state(untouched)


# Ownership


def test_inputs_are_neither_modified_nor_kept():
    vector, rows = np.arange(DIM) / 8 - 0.25, ROWS.copy()
    basis = Basis(DIM)
    basis.add_rows(rows)
    split = basis.split(vector)
    step = basis.add(vector)
    np.testing.assert_array_equal(rows, ROWS)
    np.testing.assert_array_equal(vector, np.arange(DIM) / 8 - 0.25)
    before, kept = state(basis), [part.copy() for part in split]
    coefficients = step.coefficients.copy()
    vector[:], rows[:] = 7.0, 7.0
    assert state(basis) == before
    np.testing.assert_array_equal(split[0], kept[0])
    np.testing.assert_array_equal(split[1], kept[1])
    np.testing.assert_array_equal(step.coefficients, coefficients)


def test_what_is_returned_is_a_copy():
    basis = filled()
    before = state(basis)
    step = basis.add(ROWS[0])
    for array in (
        basis.vectors,
        basis.triangular,
        *basis.split(ROWS[1] + 1),
        *basis.split_rows(ROWS),
        step.coefficients,
    ):
        if array.flags.writeable:
            array[...] = 3.0
    assert state(basis) == before
    np.testing.assert_array_equal(step.coefficients, filled().add(ROWS[0]).coefficients)


def test_results_of_a_call_do_not_change_with_the_next():
    basis = filled()
    coefficients, residual = basis.split(np.ones(DIM))
    vectors, triangular = basis.vectors, basis.triangular
    step = basis.add(np.arange(DIM) ** 2)
    kept = [array.copy() for array in (coefficients, residual, vectors, triangular, step.coefficients)]
    basis.drop(0)
    basis.split(np.arange(DIM))
    for array, copied in zip((coefficients, residual, vectors, triangular, step.coefficients), kept, strict=True):
        np.testing.assert_array_equal(array, copied)


@pytest.mark.parametrize("name", ["vectors", "triangular", "rank", "dim", "capacity"])
def test_attributes_are_read_only(name):
    basis = filled()
    with pytest.raises(AttributeError):
        setattr(basis, name, getattr(basis, name))


def test_no_call_warns():
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        basis = filled()
        basis.solve(np.full(DIM, 1e300))
        basis.add(np.full(DIM, 1e-310))
        with pytest.raises(ValueError, match="weights"):
            basis.solve(np.full(DIM, 1e300))
