"""Plots of readings, suspects and energies, for a notebook or a report; needs the extra ``plot``.

Each function gives a figure of matplotlib, drawn without its global state, or draws into the (sub)figure it is handed.
"""

import importlib
from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from perpend.envelope import Series, envelope, spans

try:
    dates: Any = importlib.import_module("matplotlib.dates")  # untyped
    from matplotlib.figure import Figure, SubFigure
    from matplotlib.ticker import FuncFormatter, LogLocator, NullFormatter
except ImportError as error:
    raise ImportError("plots need matplotlib: pip install 'perpend[plot]'") from error

__all__ = ["energies", "readings", "suspects", "trace"]

INK = "#1d2b2a"
GRID = "#cdd9d3"
TRACE = "#14606b"
LIMIT = "#8a5a00"
ALARM = "#b3261e"
BUCKETS = 900

# The quiet part of a log scale: a statistic far below its limit is drawn no lower than this share of it.
FLOOR = 1e-2

# Room that an alarm's number takes above the axes.
LABEL_INCHES = 0.55
TWO_DECADES = 100


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
    """
    sheet = figure if figure is not None else Figure(figsize=(10, 4.5), layout="constrained")
    upper, lower = sheet.subplots(2, 1, sharex=True)
    for axes, name, label in ((upper, "spe", "SPE"), (lower, "t2", "T2")):
        values = np.asarray(found[name], dtype=np.float64)
        where = place(time, len(values), dated=dated)
        _against_limit(axes, where, values, np.asarray(found[f"{name}_limit"], dtype=np.float64), label)
        mark_alarms(axes, where, found["alarm"], numbered=axes is upper)
    upper.tick_params(labelbottom=False)
    label_time(lower, time_label, dated=dated)
    return sheet


def suspects(found: Sequence[tuple[str, float]], *, figure: Figure | SubFigure | None = None) -> Figure | SubFigure:
    """Suspects of a reading or an alarm as bars, the most suspect on top.

    Parameters
    ----------
    found : sequence of (name, share)
        What `Reading.suspects` gives.
    figure : Figure or SubFigure, optional
        To draw into.
    """
    sheet = figure if figure is not None else Figure(figsize=(5, 0.6 + 0.35 * max(len(found), 1)), layout="constrained")
    axes = sheet.subplots()
    names = [plain(name) for name, _ in found]
    shares = [100 * share for _, share in found]
    places = np.arange(len(names))[::-1]
    axes.barh(places, shares, height=0.6, color=TRACE, edgecolor=TRACE)
    axes.set_yticks(places, names)
    axes.set_xlim(0, 118)
    axes.set_xticks([0, 50, 100])
    for place_, share in zip(places, shares, strict=True):
        axes.text(share + 1.5, place_, f"{share:.0f} %", va="center", color=INK)
    dress(axes, grid="x")
    axes.set_xlabel("share of the excess that its own correction takes away, %")
    return sheet


def energies(
    values: ArrayLike, *, rank: int | None = None, figure: Figure | SubFigure | None = None
) -> Figure | SubFigure:
    """Energies of the principal axes, descending, on a logarithmic scale.

    Parameters
    ----------
    values : array_like, shape (axes,)
        Such as `Tracker.energies`.
    rank : int, optional
        Axes in use; the others are drawn hollow.
    figure : Figure or SubFigure, optional
        To draw into.
    """
    sheet = figure if figure is not None else Figure(figsize=(5, 3), layout="constrained")
    axes = sheet.subplots()
    heights = np.asarray(values, dtype=np.float64)
    numbers = np.arange(1, len(heights) + 1)
    used = numbers <= (len(heights) if rank is None else rank)
    axes.plot(numbers, heights, color=GRID, linewidth=1)
    axes.plot(numbers[used], heights[used], "o", color=TRACE)
    axes.plot(numbers[~used], heights[~used], "o", color=TRACE, markerfacecolor="none")
    log_scale(axes)
    axes.set_xlabel("axis")
    axes.set_ylabel("energy")
    dress(axes, grid="y")
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
        The model's own values, drawn dashed.
    alarm : array_like of bool, optional
        Rows on which the alarm was on.
    time, time_label, dated
        As for `readings`.
    figure : Figure or SubFigure, optional
        To draw into.
    """
    sheet = figure if figure is not None else Figure(figsize=(10, 2), layout="constrained")
    axes = sheet.subplots()
    series = np.asarray(values, dtype=np.float64)
    where = place(time, len(series), dated=dated)
    axes.plot(where, series, color=TRACE, linewidth=1.2, label="measured")
    if expected is not None:
        axes.plot(
            where, np.asarray(expected, dtype=np.float64), color=LIMIT, linewidth=1.2, dashes=(4, 2), label="expected"
        )
        axes.legend(loc="best", frameon=False, labelcolor=INK, ncols=2)
    if alarm is not None:
        mark_alarms(axes, where, alarm, numbered=False)
    axes.set_ylabel(plain(label))
    label_time(axes, time_label, dated=dated)
    dress(axes, grid="y")
    return sheet


def place(time: ArrayLike | None, rows: int, *, dated: bool) -> NDArray[Any]:
    """Return where rows stand on the time axis: numbers, or moments where they are dated."""
    if time is None:
        return np.arange(1, rows + 1, dtype=np.float64)
    where = np.asarray(time, dtype=np.float64)
    return (where * 1e6).astype("datetime64[us]") if dated else where


def mark_alarms(axes: Any, where: NDArray[Any], alarm: ArrayLike, *, numbered: bool) -> None:
    """Hatch the time in which an alarm was on, and number the alarms on top."""
    found = spans(alarm)
    for start, end in found:
        left, right = where[start], where[min(end, len(where) - 1)]
        axes.axvspan(left, right, facecolor=ALARM, alpha=0.13, linewidth=0)
        axes.axvspan(left, right, facecolor="none", edgecolor=ALARM, hatch="////", linewidth=0.8, alpha=0.55)
    if not (numbered and found):
        return
    room = LABEL_INCHES / _width(axes) * (where[-1] - where[0])
    for first, last, row in _clusters([where[start] for start, _ in found], room):
        axes.annotate(
            str(first) if first == last else f"{first}-{last}",
            (row, 1),
            xycoords=("data", "axes fraction"),
            xytext=(0, 2),
            textcoords="offset points",
            color=ALARM,
            fontweight="bold",
            annotation_clip=False,
        )


def label_time(axes: Any, label: str, *, dated: bool) -> None:
    """Say what the time axis counts; write dates as briefly as the width asks for."""
    if not dated:
        axes.set_xlabel(plain(label))
        return
    # With fewer than five ticks the locator finds no interval for some spans.
    most: Any = max(5, int(0.8 * _width(axes)))
    locator: Any = dates.AutoDateLocator(minticks=2, maxticks=most)
    axes.xaxis.set_major_locator(locator)
    axes.xaxis.set_major_formatter(dates.ConciseDateFormatter(locator))


def _width(axes: Any) -> float:
    """Width in inches of the figure or subfigure that axes are in."""
    return float(axes.figure.bbox.width / axes.figure.dpi)


def _clusters(places: list[Any], room: Any) -> list[tuple[int, int, Any]]:
    """Join alarms whose numbers would be written over each other: first and last number, and where."""
    joined: list[tuple[int, int, Any]] = []
    for number, place_ in enumerate(places, start=1):
        if joined and place_ - joined[-1][2] < room:
            joined[-1] = (joined[-1][0], number, joined[-1][2])
        else:
            joined.append((number, number, place_))
    return joined


def _against_limit(axes: Any, where: NDArray[Any], values: Series, limit: Series, label: str) -> None:
    known = limit[np.isfinite(limit) & (limit > 0)]
    floor = FLOOR * float(known.min()) if len(known) else 0.0
    drawn = np.where(values < floor, floor, values)
    start, lowest, highest = envelope(drawn, BUCKETS)
    if len(start) < len(values):
        axes.fill_between(where[start], lowest, highest, color=TRACE, linewidth=0.7)
    else:
        axes.plot(where, drawn, color=TRACE, linewidth=0.9)
    start, low, _ = envelope(limit, BUCKETS)
    axes.plot(where[start], low, color=LIMIT, linewidth=1.3, dashes=(5, 2), label="limit")
    if len(known) and np.isfinite(values).any():
        log_scale(axes)
        axes.legend(loc="upper left", frameon=False, labelcolor=INK, handlelength=2.6, borderpad=0.1)
    axes.set_ylabel(label)
    dress(axes, grid="y")


def plain(name: str) -> str:
    """Keep a dollar sign in a channel's name from being taken for mathematics."""
    return name.replace("$", r"\$")


def log_scale(axes: Any) -> None:
    """Make the vertical axis logarithmic, its numbers written out."""
    axes.set_yscale("log")
    low, high = axes.get_ylim()
    steps = (1.0, 2.0, 5.0) if high < TWO_DECADES * low else (1.0,)
    axes.yaxis.set_major_locator(LogLocator(subs=steps))
    axes.yaxis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:,g}"))
    axes.yaxis.set_minor_formatter(NullFormatter())


def dress(axes: Any, *, grid: str) -> None:
    """Give axes the look of the others: ink on two sides, a fine grid."""
    axes.grid(visible=True, axis=grid, color=GRID, linewidth=0.6)
    axes.set_axisbelow(True)
    if grid == "y":
        axes.margins(x=0.004)
    for side, spine in axes.spines.items():
        spine.set_visible(side in ("left", "bottom"))
        spine.set_color(INK)
    axes.tick_params(which="both", colors=INK, labelcolor=INK)
    axes.xaxis.label.set_color(INK)
    axes.yaxis.label.set_color(INK)
