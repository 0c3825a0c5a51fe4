"""The basis against published and exactly computed figures: factors, regressions, angles.

The figures are in ``published/``, each file with its source.
"""

import json
from fractions import Fraction
from math import comb, log10, pi, sqrt
from pathlib import Path

import numpy as np
import pytest
from scipy.linalg import hadamard

from perpend import Basis

EPS = np.finfo(float).eps
PUBLISHED = Path(__file__).parent / "published"


def read(name):
    return json.loads((PUBLISHED / name).read_text(encoding="utf-8"))


FACTORS = read("qr_factors.json")["factors"]
REGRESSIONS = read("strd_linear.json")["sets"]
ANGLES = read("principal_angles.json")


# Exact factors


def hilbert(order, scale=1):
    return [[Fraction(scale, i + j + 1) for i in range(order)] for j in range(order)]


def pascal(order):
    return [[Fraction(comb(i + j, i)) for i in range(order)] for j in range(order)]


def vandermonde(rows, columns):
    return [[Fraction(i, 16) ** j for i in range(rows)] for j in range(columns)]


def lauchli(columns, power):
    return [[Fraction(1)] + [Fraction(2) ** power * (i == j) for i in range(columns)] for j in range(columns)]


# Name, columns, name of the factors, what R is to be multiplied by.
MATRICES = [
    ("hilbert_4", hilbert(4), "hilbert_4", 1),
    ("hilbert_8", hilbert(8), "hilbert_8", 1),
    ("hilbert_12", hilbert(12), "hilbert_12", 1),
    # Times the least common multiple of the denominators: integers, which binary64 holds exactly.
    ("hilbert_8_scaled", hilbert(8, 360_360), "hilbert_8", 360_360),
    ("hilbert_12_scaled", hilbert(12, 5_354_228_880), "hilbert_12", 5_354_228_880),
    ("pascal_8", pascal(8), "pascal_8", 1),
    ("pascal_12", pascal(12), "pascal_12", 1),
    ("pascal_15", pascal(15), "pascal_15", 1),
    ("vandermonde_16x8", vandermonde(16, 8), "vandermonde_16x8", 1),
    ("vandermonde_16x12", vandermonde(16, 12), "vandermonde_16x12", 1),
    ("lauchli_3", lauchli(3, -30), "lauchli_3_eps2m30", 1),
    ("lauchli_6", lauchli(6, -30), "lauchli_6_eps2m30", 1),
    ("lauchli_10", lauchli(10, -27), "lauchli_10_eps2m27", 1),
]
each_matrix = pytest.mark.parametrize(
    ("columns", "factors", "scale"), [case[1:] for case in MATRICES], ids=[case[0] for case in MATRICES]
)


def exact_factors(name, scale):
    """Rows of Q and the triangle of R, each rounded once."""
    q = np.array([[float(entry) for entry in column] for column in FACTORS[name]["q"]])
    r = np.zeros((len(q), len(q)))
    for index, row in enumerate(FACTORS[name]["r"]):
        r[index, index:] = [float(entry) * scale for entry in row]
    return q, r


def rounded(columns):
    """Columns as binary64, and whether that is exact."""
    floats = np.array([[float(entry) for entry in column] for column in columns])
    exact = all(
        Fraction(f) == e for fs, es in zip(floats.tolist(), columns, strict=True) for f, e in zip(fs, es, strict=True)
    )
    return floats, exact


def leading_conditions(r):
    """Condition number of the first j columns, each scaled to unit length, for every j."""
    unit = r / np.linalg.norm(r, axis=0)
    return np.array([np.linalg.cond(unit[:j, :j]) for j in range(1, len(r) + 1)])


def classical_gram_schmidt(columns):
    """Project once, subtract, normalise: the negative control."""
    q = np.zeros((0, columns.shape[1]))
    for column in columns:
        w = column - q.T @ (q @ column)
        q = np.vstack([q, w / np.linalg.norm(w)])
    return q


def loss(q):
    return np.linalg.norm(np.eye(len(q)) - q @ q.T, 2)


@each_matrix
@pytest.mark.parametrize("by_rows", [False, True], ids=["add", "add_rows"])
def test_factors_are_the_exact_ones_as_far_as_the_condition_lets_them(columns, factors, scale, by_rows):
    floats, exact = rounded(columns)
    basis = Basis(floats.shape[1], tolerance=0.0)
    if by_rows:
        assert basis.add_rows(floats)[0].all()
    else:
        assert all(basis.add(column).accepted for column in floats)
    q, r = exact_factors(factors, scale)
    # Column j is known to the rounding of the arithmetic, eps times the condition of the columns up to it; where
    # storing the matrix rounds it, that rounding comes on top.
    c = 1 if exact else 2
    slack = c * EPS * np.sqrt(len(q)) * leading_conditions(r)
    error_q = np.linalg.norm(basis.vectors - q, axis=1)
    error_r = np.linalg.norm(basis.triangular - r, axis=0) / np.linalg.norm(r, axis=0)
    assert (error_q <= slack).all(), error_q / slack
    assert (error_r <= slack).all(), error_r / slack


@each_matrix
@pytest.mark.parametrize("by_rows", [False, True], ids=["add", "add_rows"])
@pytest.mark.parametrize("tolerance", [None, 0.0])
def test_published_matrices_give_a_basis_orthonormal_to_ten_eps_root_rank(columns, factors, scale, by_rows, tolerance):
    floats, _ = rounded(columns)
    basis = Basis(floats.shape[1], tolerance=tolerance)
    if by_rows:
        basis.add_rows(floats)
    else:
        for column in floats:
            basis.add(column)
    bound = 10 * EPS * sqrt(basis.rank)
    assert basis.orthogonality_error() <= bound
    assert loss(basis.vectors) <= bound


@pytest.mark.parametrize(
    "name",
    ["hilbert_8", "hilbert_12", "hilbert_12_scaled", "pascal_12", "pascal_15", "lauchli_3", "lauchli_6", "lauchli_10"],
)
def test_plain_classical_gram_schmidt_loses_everything_on_them(name):
    """The control: without re-orthogonalization two of the vectors are nowhere near a right angle."""
    columns = next(case[1] for case in MATRICES if case[0] == name)
    q = classical_gram_schmidt(rounded(columns)[0])
    worst = np.abs(q @ q.T - np.eye(len(q))).max()
    assert worst > 0.4


# Regressions

# Digits that the certified values are printed to.
CERTIFIED = 15.0


def design(case):
    """The columns of the model and the target, in binary64."""
    y = np.array(case["y"], dtype=float)
    x = np.array(case["x"], dtype=float)
    kind, _, degree = case["model"].partition(" ")
    if kind == "polynomial":
        return [x[0] ** power for power in range(int(degree) + 1)], y
    return [*([np.ones_like(y)] if kind == "linear" else []), *x], y


def digits(estimates, exact):
    """Least number of digits, by the relative error, over the estimates; counted to 17."""
    errors = [abs((Fraction(float(b)) - Fraction(e)) / Fraction(e)) for b, e in zip(estimates, exact, strict=True)]
    return min(17.0 if error == 0 else min(17.0, -log10(error)) for error in errors)


@pytest.fixture(scope="module")
def table():
    """Digits a data set: those of the basis one by one and by rows, of a batch solver, gate and ceiling."""
    lines = {}
    for name, case in REGRESSIONS.items():
        columns, y = design(case)
        basis = Basis(len(y), len(columns))
        assert all(basis.add(column).accepted for column in columns)
        by_rows = Basis(len(y), len(columns))
        assert by_rows.add_rows(columns)[0].all()
        batch = np.linalg.lstsq(np.column_stack(columns), y, rcond=None)[0]
        exact = case["estimates"]
        lines[name] = {
            "add": digits(basis.solve(y)[0], exact),
            "add_rows": digits(by_rows.solve(y)[0], exact),
            "lstsq": digits(batch, exact),
            "gate": min(case["cgs2"] - 1, case["ceiling"], CERTIFIED),
            "ceiling": case["ceiling"],
        }
    return lines


def test_the_table_of_digits_holds_every_set(table):
    print(f"\n{'NIST StRD':>10} {'add':>6} {'add_rows':>8} {'lstsq':>6} {'gate':>6} {'ceiling':>7}")
    for name, line in table.items():
        numbers = "{add:6.2f} {add_rows:8.2f} {lstsq:6.2f} {gate:6.2f}".format(**line)
        print(f"{name:>10} {numbers} {'exact' if line['ceiling'] == 99 else format(line['ceiling'], '.2f'):>7}")
    assert list(table) == list(REGRESSIONS)
    assert len(table) == 11


@pytest.mark.parametrize("way", ["add", "add_rows"])
@pytest.mark.parametrize("name", REGRESSIONS)
def test_regressions_reach_the_digits_of_gram_schmidt_twice_less_one(table, name, way):
    assert table[name][way] >= table[name]["gate"]


@pytest.mark.parametrize("way", ["add", "add_rows"])
@pytest.mark.parametrize("name", REGRESSIONS)
def test_regressions_reach_the_digits_of_the_batch_solver_less_a_half(table, name, way):
    assert table[name][way] >= min(14.0, table[name]["lstsq"]) - 0.5


# Principal angles


def spanned(columns):
    columns = np.atleast_2d(columns)
    basis = Basis(columns.shape[1])
    assert basis.add_rows(columns)[0].all()
    return basis


@pytest.mark.parametrize("case", ANGLES["angles"])
def test_angles_are_the_published_ones(case):
    columns = np.array(ANGLES["columns"])
    one, other = (columns[[int(index) for index in side]] for side in case.split("|"))
    expected = [float(angle) for angle in ANGLES["angles"][case]]
    # The columns' condition: how far rounding turns their spans.
    slack = 4 * EPS * np.sqrt(4) * max(np.linalg.cond(one), np.linalg.cond(other))
    np.testing.assert_allclose(spanned(one).angles(spanned(other)), expected, rtol=0, atol=slack)
    np.testing.assert_allclose(spanned(other).angles(spanned(one)), expected, rtol=0, atol=slack)


@pytest.mark.parametrize("theta", [1e-2, 1e-5, 1e-8, 1e-10, 1e-14])
def test_tiny_angles_keep_their_digits_where_the_arccosine_of_the_cosine_loses_them(theta):
    flat = spanned([[1.0, 0, 0, 0], [0, 1.0, 0, 0]])
    tilted = spanned([[np.cos(theta), 0, np.sin(theta), 0], [0, 1.0, 0, 0]])
    angles = flat.angles(tilted)
    assert angles[0] <= 4 * EPS
    assert abs(angles[1] - theta) <= 4 * EPS * theta
    if theta <= 1e-8:
        assert np.arccos(np.cos(theta)) == 0.0


def test_right_angles_and_none_stand_beside_each_other():
    axes = np.eye(5)
    np.testing.assert_allclose(spanned(axes[[0, 1, 2]]).angles(spanned(axes[[0, 1, 4]])), [0, 0, pi / 2], atol=4 * EPS)
    signs = hadamard(8).astype(float)
    np.testing.assert_allclose(spanned(signs[:3]).angles(spanned(signs[3:])), [pi / 2] * 3, atol=4 * EPS)
