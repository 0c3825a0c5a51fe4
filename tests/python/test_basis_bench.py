"""The comparison with batch QR: what it asserts and how it reads; never how fast anything is."""

import math
import sys

import numpy as np
import pytest

from perpend import bench


def test_checking_asserts_every_answer_and_times_nothing():
    compared = list(bench.compare([(16, 4), (1000, 64)], check=True))
    assert {line.against for line in compared} == {
        "numpy.linalg.qr",
        "scipy qr_insert, Q by rows",
        "scipy qr_insert, Q by columns",
        "Gram-Schmidt twice in numpy",
        "numpy.vdot of 2",
    }
    assert all(math.isnan(line.ratio) for line in compared)


def test_a_wrong_answer_stops_it(monkeypatch):
    exact = np.linalg.qr

    def wrong(columns):
        q, r = exact(columns)
        return q, r * (1 + 1e-9)

    monkeypatch.setattr(np.linalg, "qr", wrong)
    with pytest.raises(AssertionError):
        list(bench.compare([(1000, 64)], check=True))


def test_it_goes_without_scipy_and_says_what_is_missing(monkeypatch):
    for name in ("scipy.linalg", "threadpoolctl"):
        monkeypatch.setitem(sys.modules, name, None)
    said = "\n".join(bench.conditions())
    assert "scipy is not installed" in said
    assert "threadpoolctl is not installed" in said
    compared = list(bench.compare([(16, 4)], check=True))
    assert [line.against for line in compared] == ["Gram-Schmidt twice in numpy", "numpy.vdot of 2"]


def test_the_table_says_ratio_goal_and_whether_it_was_reached():
    made = [
        bench.Comparison("one", "other", 100, 8, 3e-6, 6e-6, 0.6),
        bench.Comparison("one", "other", 100, 8, 2.0, 1e-3, 0.6),
        bench.Comparison("one", "other", 100, 8, 5e-8, 1e-7, None),
    ]
    heading, reached, missed, scale = bench.lines(made)
    assert heading.split() == ["what", "against", "shape", "median", "other", "ratio", "goal"]
    assert reached.split()[2:] == ["100", "x", "8", "3", "us", "6", "us", "0.500", "0.600", "reached"]
    assert missed.split()[5:] == ["2", "s", "1", "ms", "2000.000", "0.600", "missed"]
    assert scale.split()[5:] == ["50", "ns", "100", "ns", "0.500", "-"]
