"""Plots of readings, suspects and energies, for a notebook or a report; needs the extra ``plot``.

Each function gives a figure of matplotlib, drawn without its global state, or draws into the (sub)figure it is handed.
"""

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
from matplotlib.figure import Figure, SubFigure
from matplotlib.ticker import MaxNLocator
from numpy.typing import ArrayLike, NDArray

from perpend.dressing import (
    GRID,
    INK,
    LIMIT,
    TRACE,
    brief,
    dress,
    flagged,
    label_time,
    log_scale,
    mark_alarms,
    place,
    plain,
)
from perpend.envelope import Band, band

__all__ = ["energies", "readings", "suspects", "trace"]

BUCKETS = 900

# The quiet part of a log scale: a statistic far below its limit is drawn no lower than this share of it.
FLOOR = 1e-2


def readings(
    found: Mapping[str, ArrayLike],
    *,
    time: ArrayLike | None = None,
    time_label: str = "row",
    dated: bool = False,
    figure: Figure | SubFigure | None = None,
) -> Figure | SubFigure:
    """SPE and T2 over time against their limits, alarms marked.

    The scale is logarithmic, so that the quiet rows and the peaks both show. Long series are drawn as the band between
    the lowest and highest value of each run of rows.

    Parameters
    ----------
    found : mapping
        What `Watch.replay` gives, or any mapping with `spe`, `spe_limit`, `t2`, `t2_limit` and `alarm`.
    time : array_like, optional
        Where each row stands; its number if not given.
    time_label : str
        What `time` counts.
    dated : bool
        Whether `time` is in seconds since 1970.
    figure : Figure or SubFigure, optional
        To draw into.

    Returns
    -------
    Figure or SubFigure
        Two axes, SPE above T2.

    Examples
    --------
    >>> import numpy as np
    >>> import perpend
    >>> from perpend import plot
    >>> rng = np.random.default_rng(8)
    >>> flow = rng.uniform(30, 90, (900, 1))
    >>> rows = flow * [1.0, 0.4, 2.5, 0.1] + rng.normal(0, [1, 0.4, 3, 0.1], (900, 4))
    >>> rows[700:, 2] += 25
    >>> watch = perpend.Watch(4, ["flow", "power", "pressure", "noise"], settle=400)
    >>> figure = plot.readings(watch.replay(rows))
    >>> [axes.get_ylabel() for axes in figure.axes]
    ['SPE', 'T2']

    In a notebook the figure shows itself; ``figure.savefig("readings.png")`` keeps it.
    """
    bands = {}
    for name in ("spe", "spe_limit", "t2", "t2_limit"):
        values = np.asarray(found[name], dtype=np.float64)
        where = place(time, len(values), dated=dated)
        bands[name] = band(values, where, BUCKETS)
    sheet = figure if figure is not None else Figure(figsize=(10, 4.5), layout="constrained")
    draw_readings(sheet, bands, flagged(where, found["alarm"]), time_label, dated=dated)
    return sheet


def suspects(found: Sequence[tuple[str, float]], *, figure: Figure | SubFigure | None = None) -> Figure | SubFigure:
    """Suspects of a reading or an alarm as bars, the most suspect on top.

    Parameters
    ----------
    found : sequence of (name, share)
        What `Reading.suspects` gives.
    figure : Figure or SubFigure, optional
        To draw into.

    Returns
    -------
    Figure or SubFigure
        With one axes.

    Examples
    --------
    >>> from perpend import plot
    >>> figure = plot.suspects([("gearbox_temp", 0.81), ("oil_temp", 0.12)])
    >>> [label.get_text() for label in figure.axes[0].get_yticklabels()]
    ['gearbox_temp', 'oil_temp']
    """
    sheet = figure if figure is not None else Figure(figsize=(5, 0.8 + 0.35 * max(len(found), 1)), layout="constrained")
    axes = sheet.subplots()
    shares = [100 * share for _, share in found]
    places = np.arange(len(found))[::-1]
    axes.barh(places, shares, height=0.6, color=TRACE, edgecolor=TRACE)
    axes.set_yticks(places, [brief(name) for name, _ in found])
    # A lone bar is no thicker than one of several.
    axes.set_ylim(-0.6, max(len(found), 1) - 0.4)
    axes.set_xlim(0, 118)
    axes.set_xticks([0, 50, 100])
    for height, share in zip(places, shares, strict=True):
        axes.text(share + 1.5, height, f"{share:.0f} %", va="center", color=INK)
    if not found:
        axes.text(2, 0, "none stands out", va="center", color=INK)
    dress(axes, grid="x")
    axes.set_xlabel("share of the excess, %")
    return sheet


def energies(
    values: ArrayLike, *, rank: int | None = None, figure: Figure | SubFigure | None = None
) -> Figure | SubFigure:
    """Energies of the principal axes, descending, on a logarithmic scale.

    Parameters
    ----------
    values : array_like, shape (axes,)
        Such as `Watch.energies` or `Tracker.energies`.
    rank : int, optional
        Axes in use; the others are drawn hollow.
    figure : Figure or SubFigure, optional
        To draw into.

    Returns
    -------
    Figure or SubFigure
        With one axes.

    Examples
    --------
    >>> import numpy as np
    >>> import perpend
    >>> from perpend import plot
    >>> rng = np.random.default_rng(9)
    >>> watch = perpend.Watch(6)
    >>> watch.settle_on(rng.standard_normal((300, 2)) @ rng.uniform(1, 3, (2, 6)) + rng.normal(0, 0.1, (300, 6)))
    >>> figure = plot.energies(watch.energies)
    >>> figure.axes[0].get_yscale()
    'log'
    """
    sheet = figure if figure is not None else Figure(figsize=(5, 3), layout="constrained")
    axes = sheet.subplots()
    heights = np.asarray(values, dtype=np.float64)
    numbers = np.arange(1, len(heights) + 1)
    used = numbers <= (len(heights) if rank is None else rank)
    axes.plot(numbers, heights, color=GRID, linewidth=1)
    axes.plot(numbers[used], heights[used], "o", color=TRACE, label="in use")
    if not used.all():
        axes.plot(numbers[~used], heights[~used], "o", color=TRACE, markerfacecolor="none", label="beyond the rank")
        axes.legend(loc="upper right", frameon=False, labelcolor=INK)
    axes.xaxis.set_major_locator(MaxNLocator(integer=True))
    if (heights > 0).any():
        log_scale(axes)
    axes.set_xlabel("axis")
    axes.set_ylabel("energy")
    dress(axes, grid="y")
    axes.margins(x=0.05)
    return sheet


def trace(
    values: ArrayLike,
    label: str,
    *,
    expected: ArrayLike | None = None,
    alarm: ArrayLike | None = None,
    time: ArrayLike | None = None,
    time_label: str = "row",
    dated: bool = False,
    figure: Figure | SubFigure | None = None,
) -> Figure | SubFigure:
    """One channel over time, beside what the model expected of it.

    Parameters
    ----------
    values : array_like, shape (rows,)
        The channel.
    label : str
        Its name.
    expected : array_like, shape (rows,), optional
        What was expected of it, such as a column of `Reading.corrected` or `Reading.expected`; drawn dashed.
    alarm : array_like of bool, optional
        Rows on which the alarm was on.
    time, time_label, dated
        As for `readings`.
    figure : Figure or SubFigure, optional
        To draw into.

    Returns
    -------
    Figure or SubFigure
        With one axes.

    Examples
    --------
    >>> import numpy as np
    >>> import perpend
    >>> from perpend import plot
    >>> rng = np.random.default_rng(8)
    >>> flow = rng.uniform(30, 90, (500, 1))
    >>> rows = flow * [1.0, 0.4, 2.5, 0.1] + rng.normal(0, [1, 0.4, 3, 0.1], (500, 4))
    >>> watch = perpend.Watch(4, settle=400)
    >>> readings = [watch.tick(row) for row in rows]
    >>> pressure = [reading.corrected()[2] for reading in readings]
    >>> figure = plot.trace(rows[:, 2], "pressure", expected=pressure, alarm=[each.alarm for each in readings])
    >>> [text.get_text() for text in figure.legends[0].get_texts()]
    ['measured', 'expected']
    """
    sheet = figure if figure is not None else Figure(figsize=(10, 2.2), layout="constrained")
    axes = sheet.subplots()
    series = np.asarray(values, dtype=np.float64)
    where = place(time, len(series), dated=dated)
    draw_trace(axes, where, series, None if expected is None else np.asarray(expected, dtype=np.float64), label)
    if expected is not None:
        label_lines(axes)
    if alarm is not None:
        mark_alarms(axes, flagged(where, alarm))
    label_time(axes, time_label, dated=dated)
    return sheet


def draw_readings(
    sheet: Figure | SubFigure,
    bands: Mapping[str, Band],
    alarms: Sequence[tuple[float, float]],
    time_label: str,
    *,
    dated: bool,
) -> None:
    """Draw what `readings` does, of series that have been reduced."""
    upper, lower = sheet.subplots(2, 1, sharex=True)
    for axes, name, label in ((upper, "spe", "SPE"), (lower, "t2", "T2")):
        _against_limit(axes, bands[name], bands[f"{name}_limit"], label)
        where = bands[name].where
        extent = float(where[-1] - where[0]) if axes is upper and len(where) else None
        mark_alarms(axes, alarms, extent=extent)
    upper.tick_params(labelbottom=False)
    label_time(lower, time_label, dated=dated)


def draw_trace(
    axes: Any,
    where: NDArray[np.float64],
    measured: NDArray[np.float64],
    expected: NDArray[np.float64] | None,
    name: str,
) -> None:
    """Draw one channel, its name above, and dashed what was expected of it."""
    axes.plot(where, measured, color=TRACE, linewidth=1.2, label="measured")
    if expected is not None:
        axes.plot(where, expected, color=LIMIT, linewidth=1.2, dashes=(4, 2), label="expected")
    axes.set_title(brief(name), loc="left", fontsize="medium")
    dress(axes, grid="y")


def label_lines(axes: Any) -> None:
    """Say which line is which, above all axes: nothing can lie under it there."""
    axes.figure.legend(
        *axes.get_legend_handles_labels(), loc="outside upper right", frameon=False, labelcolor=INK, ncols=2
    )


def _against_limit(axes: Any, values: Band, limit: Band, label: str) -> None:
    known = limit.lowest[np.isfinite(limit.lowest) & (limit.lowest > 0)]
    floor = FLOOR * float(known.min()) if len(known) else 0.0
    low, high = (np.where(series < floor, floor, series) for series in (values.lowest, values.highest))
    if np.array_equal(low, high, equal_nan=True):
        axes.plot(values.where, low, color=TRACE, linewidth=0.9)
    else:
        axes.fill_between(values.where, low, high, color=TRACE, linewidth=0.7)
    axes.plot(limit.where, limit.lowest, color=LIMIT, linewidth=1.3, dashes=(5, 2))
    if len(known) and np.isfinite(high).any():
        log_scale(axes)
        # Beside the end of its line, where nothing is drawn.
        end = (1, float(known[-1]))
        axes.annotate(
            "limit",
            end,
            xycoords=("axes fraction", "data"),
            xytext=(3, 0),
            textcoords="offset points",
            va="center",
            color=LIMIT,
            annotation_clip=False,
        )
    axes.set_ylabel(plain(label))
    dress(axes, grid="y")
