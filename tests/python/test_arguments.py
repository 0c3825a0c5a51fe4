"""Arguments that cannot be worked with are answered in plain words: which one, what was expected, what was got."""

import numpy as np
import pytest

from perpend import Basis, Tracker, Watch

COUNT = "expected a whole number, 0 or more, got "
DTYPE = "expected float64 or float32, got "


@pytest.mark.parametrize(
    ("call", "error", "named", "said"),
    [
        (lambda: Basis(-1), ValueError, "dim", COUNT + "-1"),
        (lambda: Basis("wide"), TypeError, "dim", COUNT + "'wide'"),
        (lambda: Basis(5, 2**70), ValueError, "capacity", COUNT + str(2**70)),
        (lambda: Basis(5, tolerance="low"), TypeError, "tolerance", "expected a number, or a pair .* got 'low'"),
        (lambda: Basis(5, tolerance=(1e-3,)), TypeError, "tolerance", "expected a number, or a pair"),
        (lambda: Basis(5, dtype=None), TypeError, "dtype", DTYPE + "None"),
        (lambda: Tracker(5, 2, dtype="int32"), TypeError, "dtype", DTYPE + "int32"),
        (lambda: Tracker(5, 2, guard=1.5), TypeError, "guard", COUNT + "1.5"),
        (lambda: Watch(3, hold=-1), ValueError, "hold", COUNT + "-1"),
        (lambda: Watch(3, limits="loose"), ValueError, "limits", 'expected one of "moments", "empirical"'),
        (lambda: Watch(3, memory="long"), TypeError, "memory", "number"),
        (lambda: Watch(2).tick([0.25, 7.5]).suspects(-1), ValueError, "n", COUNT + "-1"),
        (lambda: Tracker(5, 2).merge(Tracker(5, 2, memory=40)), ValueError, "memory", "expected none, got 40"),
    ],
)
def test_a_refusal_names_the_argument_and_says_expected_and_got(call, error, named, said):
    with pytest.raises(error, match=said) as refused:
        call()
    assert named in " ".join([str(refused.value), *getattr(refused.value, "__notes__", [])])


@pytest.mark.parametrize("dtype", ["float32", "f4", np.float32, np.dtype("=f4")])
def test_a_dtype_is_what_numpy_takes_for_one(dtype):
    assert Basis(5, dtype=dtype).vectors.dtype == np.float32
    assert Tracker(5, 2, dtype=dtype).axes.dtype == np.float32
