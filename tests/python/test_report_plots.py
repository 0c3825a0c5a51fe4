"""``perpend.plot``: figures of the usual library that compose, and reduced series that keep every extreme."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays

from perpend.envelope import envelope, spans
from perpend.report.reduced import Reduced

plot = pytest.importorskip("perpend.plot", reason="the extra plot is not installed", exc_type=ImportError)

FOUND = {
    "spe": np.geomspace(1, 500, 400),
    "spe_limit": np.full(400, 20.0),
    "t2": np.linspace(1, 9, 400),
    "t2_limit": np.full(400, 12.0),
    "alarm": np.arange(400) > 300,
}


@given(arrays(float, st.integers(1, 300), elements=st.floats(-1e6, 1e6) | st.just(np.nan)), st.integers(1, 60))
def test_a_reduced_series_keeps_the_extremes_of_every_run(series, buckets):
    start, lowest, highest = envelope(series, buckets)
    assert len(start) == min(buckets, len(series))
    for run, low, high in zip(np.split(series, start[1:]), lowest, highest, strict=True):
        known = run[~np.isnan(run)]
        assert (np.isnan(low) and np.isnan(high)) if len(known) == 0 else (low, high) == (known.min(), known.max())


@given(arrays(float, st.tuples(st.integers(1, 3_000), st.just(2)), elements=st.floats(-9, 9) | st.just(np.nan)))
@settings(max_examples=30, deadline=None)
def test_a_run_kept_reduced_loses_no_extreme_and_takes_no_more_room(rows):
    kept = Reduced(2, 8)
    for count, row in enumerate(rows.tolist(), start=1):
        kept.take(row)
        if count % 701 == 0:
            kept.runs()
    lowest, highest = kept.runs()
    assert min(4, len(rows)) <= len(lowest) <= 8
    length = 1
    while length * 8 <= len(rows):
        length *= 2
    start = np.arange(0, len(rows), length)
    assert np.array_equal(lowest, np.fmin.reduceat(rows, start), equal_nan=True)
    assert np.array_equal(highest, np.fmax.reduceat(rows, start), equal_nan=True)


@given(st.lists(st.booleans(), max_size=60))
def test_spans_cover_exactly_the_flagged_rows(flags):
    covered = np.zeros(len(flags), dtype=bool)
    for start, end in spans(flags):
        assert start < end
        assert not covered[start:end].any()
        covered[start:end] = True
    assert covered.tolist() == flags


def test_readings_are_drawn_against_limits_on_a_scale_that_shows_quiet_and_peak():
    figure = plot.readings(FOUND)
    upper, lower = figure.axes
    assert upper.get_yscale() == lower.get_yscale() == "log"
    assert upper.get_ylim()[0] < 1
    assert upper.get_ylim()[1] > 500
    assert [text.get_text() for text in upper.texts] == ["limit", "1"]


def test_long_series_are_drawn_in_bounded_size():
    long = {name: np.resize(values, 500_000) for name, values in FOUND.items()} | {"alarm": np.zeros(500_000)}
    figure = plot.readings(long)
    points = sum(len(path.vertices) for axes in figure.axes for each in axes.collections for path in each.get_paths())
    assert 0 < points < 10_000


def test_dates_numbers_and_names_with_dollars_are_drawn():
    import io

    time = 1.7723448e9 + 300 * np.arange(400)
    for figure in (
        plot.readings(FOUND, time=time, dated=True),
        plot.suspects([("cost $ of $", 0.7), ("flow", 0.2)]),
        plot.suspects([]),
        plot.energies([9.0, 3.0, 0.1], rank=2),
        plot.trace(FOUND["t2"], "T2 $", expected=FOUND["t2"] + 1, alarm=FOUND["alarm"], time=time, dated=True),
    ):
        out = io.BytesIO()
        figure.savefig(out, format="png")
        assert out.tell() > 2000


def test_plots_compose_into_one_figure():
    from matplotlib.figure import Figure

    sheet = Figure(figsize=(10, 6), layout="constrained")
    left, right = sheet.subfigures(1, 2)
    assert plot.readings(FOUND, figure=left) is left
    assert plot.suspects([("flow", 0.5)], figure=right) is right
    assert len(sheet.axes) == 3
