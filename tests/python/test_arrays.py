"""Arrays as they come, at every call that takes any: the same answer to the bit, nothing written, nothing kept."""

import numpy as np
import pandas
import polars
import pytest
from test_basis_arrays import NOT_NUMBERS, ROWS_FORMS, VECTOR_FORMS

from perpend import Basis, Tracker, Watch

CHANNELS = 6
RNG = np.random.default_rng(20261204)
# Thirty-seconds: float32 and float64, and even float16, hold them alike.
HISTORY = RNG.integers(-64, 64, (60, CHANNELS)) / 32
ROWS = RNG.integers(-64, 64, (7, CHANNELS)) / 32


def basis():
    basis = Basis(CHANNELS)
    basis.add_rows(HISTORY[:3])
    return basis


def tracker():
    tracker = Tracker(CHANNELS, 2, memory=50)
    tracker.update_rows(HISTORY)
    return tracker


def watch():
    watch = Watch(CHANNELS, settle=40)
    watch.settle_on(HISTORY)
    return watch


def told(answer):
    """An answer as something that compares to the bit."""
    if isinstance(answer, np.ndarray):
        return answer.dtype, answer.shape, answer.tobytes()
    if isinstance(answer, tuple):
        return tuple(told(part) for part in answer)
    if isinstance(answer, dict):
        return {name: told(part) for name, part in answer.items()}
    if hasattr(answer, "contributions"):
        numbers = np.array([answer.spe, answer.spe_limit, answer.t2, answer.t2_limit, answer.spe_smooth, answer.weight])
        return numbers.tobytes(), answer.missing, told(answer.contributions())
    if hasattr(answer, "residual_norm"):
        return answer.accepted, answer.residual_norm, answer.loss, told(answer.coefficients)
    return repr(answer)


VECTOR_CALLS = {
    "Basis.add": (basis, Basis.add),
    "Basis.split": (basis, Basis.split),
    "Basis.residual_norm": (basis, Basis.residual_norm),
    "Basis.solve": (basis, Basis.solve),
    "Tracker.update": (tracker, Tracker.update),
    "Tracker.split": (tracker, Tracker.split),
    "Tracker.residual_norm": (tracker, Tracker.residual_norm),
    "Tracker.reconstruct": (tracker, Tracker.reconstruct),
    "Watch.tick": (watch, Watch.tick),
}
ROWS_CALLS = {
    "Basis.add_rows": (basis, Basis.add_rows),
    "Basis.split_rows": (basis, Basis.split_rows),
    "Tracker.update_rows": (tracker, Tracker.update_rows),
    "Watch.replay": (watch, Watch.replay),
    "Watch.settle_on": (watch, Watch.settle_on),
}

vector_calls = pytest.mark.parametrize(("make", "call"), VECTOR_CALLS.values(), ids=VECTOR_CALLS)
rows_calls = pytest.mark.parametrize(
    ("make", "call", "rows"),
    # Settling takes more rows than the others are shown.
    [(*made, HISTORY if name == "Watch.settle_on" else ROWS) for name, made in ROWS_CALLS.items()],
    ids=ROWS_CALLS,
)
vector_forms = pytest.mark.parametrize(
    "form", [*VECTOR_FORMS.values(), pandas.Series, polars.Series], ids=[*VECTOR_FORMS, "pandas", "polars"]
)
rows_forms = pytest.mark.parametrize(
    "form", [*ROWS_FORMS.values(), pandas.DataFrame, polars.DataFrame], ids=[*ROWS_FORMS, "pandas", "polars"]
)


@vector_forms
@vector_calls
def test_a_row_in_any_form_gives_the_same_to_the_bit(make, call, form):
    owner, expected = make(), make()
    assert told(call(owner, form(ROWS[0]))) == told(call(expected, ROWS[0]))
    assert owner.to_bytes() == expected.to_bytes()


@rows_forms
@rows_calls
def test_rows_in_any_form_give_the_same_to_the_bit(make, call, rows, form):
    owner, expected = make(), make()
    assert told(call(owner, form(rows))) == told(call(expected, rows))
    assert owner.to_bytes() == expected.to_bytes()


@vector_calls
def test_a_row_is_neither_written_to_nor_kept(make, call):
    owner, expected = make(), make()
    row = ROWS[0].copy()
    answer = call(owner, row)
    assert row.tobytes() == ROWS[0].tobytes()
    kept = told(answer)
    row[:] = np.nan
    assert told(answer) == kept == told(call(expected, ROWS[0]))
    assert owner.to_bytes() == expected.to_bytes()


@rows_calls
def test_rows_are_neither_written_to_nor_kept(make, call, rows):
    owner, expected = make(), make()
    given = rows.copy()
    answer = call(owner, given)
    assert given.tobytes() == rows.tobytes()
    kept = told(answer)
    given[:] = np.nan
    assert told(answer) == kept == told(call(expected, rows))
    assert owner.to_bytes() == expected.to_bytes()


@pytest.mark.parametrize("values", NOT_NUMBERS.values(), ids=NOT_NUMBERS)
@vector_calls
def test_a_row_of_no_real_numbers_is_refused_as_a_type_and_changes_nothing(make, call, values):
    owner = make()
    with pytest.raises(TypeError, match="expected real numbers, got an array of"):
        call(owner, values)
    assert owner.to_bytes() == make().to_bytes()


@pytest.mark.parametrize("values", NOT_NUMBERS.values(), ids=NOT_NUMBERS)
@rows_calls
def test_rows_of_no_real_numbers_are_refused_as_a_type_and_change_nothing(make, call, rows, values):
    owner = make()
    with pytest.raises(TypeError, match="expected real numbers, got an array of"):
        call(owner, np.array([values, values]))
    assert owner.to_bytes() == make().to_bytes()


def holed(rows, mark):
    """The rows with a hole in the second channel of the last."""
    if mark == "mask":
        mask = np.zeros(rows.shape, bool)
        mask[..., -1, 1] = True
        return np.ma.masked_array(rows, mask)
    rows = rows.copy()
    rows[..., -1, 1] = np.nan
    if mark == "pandas":
        return pandas.DataFrame(rows)
    # A frame that knows of nothing, beside not a number.
    return polars.DataFrame(rows, nan_to_null=True) if mark == "polars" else rows


@pytest.mark.parametrize("mark", ["mask", "pandas", "polars"])
@rows_calls
def test_a_masked_or_empty_cell_is_a_gap_and_a_basis_refuses_it_with_its_place(make, call, rows, mark):
    owner, expected = make(), make()
    if make is basis:
        with pytest.raises(ValueError, match=r"row 6: .*NaN at index 1"):
            call(owner, holed(rows, mark))
    else:
        assert told(call(owner, holed(rows, mark))) == told(call(expected, holed(rows, "nan")))
    assert owner.to_bytes() == expected.to_bytes()


@vector_calls
def test_a_masked_entry_of_a_row_is_a_gap_and_a_basis_refuses_it_with_its_place(make, call):
    owner, expected = make(), make()
    row = holed(ROWS[:1], "mask")[0]
    if make is basis:
        with pytest.raises(ValueError, match="NaN at index 1"):
            call(owner, row)
    else:
        assert told(call(owner, row)) == told(call(expected, holed(ROWS[:1], "nan")[0]))
    assert owner.to_bytes() == expected.to_bytes()


@pytest.mark.parametrize("value", [np.inf, -np.inf])
@rows_calls
def test_an_infinity_is_refused_with_its_place_and_changes_nothing(make, call, rows, value):
    owner, rows = make(), rows.copy()
    rows[-1, 4] = value
    with pytest.raises(ValueError, match=rf"row {len(rows) - 1}: .*{value} at index 4"):
        call(owner, rows)
    assert owner.to_bytes() == make().to_bytes()


@rows_calls
def test_rows_of_another_shape_are_refused_and_change_nothing(make, call, rows):
    owner = make()
    for other in (rows[:, 1:], rows[0], rows[None]):
        with pytest.raises(ValueError, match=r"expected (6 columns|two dimensions), got \d"):
            call(owner, other)
    assert owner.to_bytes() == make().to_bytes()


@vector_calls
def test_a_row_of_another_shape_is_refused_and_changes_nothing(make, call):
    owner = make()
    for other in (ROWS[0, 1:], ROWS[:1], 1.0):
        with pytest.raises(ValueError, match=r"expected (6 entries|one dimension), got \d"):
            call(owner, other)
    assert owner.to_bytes() == make().to_bytes()
