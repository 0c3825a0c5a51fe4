"""How axes look in every plot: colours, scales, the time axis, the marks of alarms."""

import importlib
from collections.abc import Sequence
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from perpend.envelope import spans

try:
    dates: Any = importlib.import_module("matplotlib.dates")  # untyped
    from matplotlib.ticker import FuncFormatter, LogLocator, NullFormatter
except ImportError as error:
    raise ImportError("plots need matplotlib: pip install 'perpend[plot]'") from error

INK = "#1d2b2a"
GRID = "#cdd9d3"
TRACE = "#14606b"
LIMIT = "#8a5a00"
ALARM = "#b3261e"

# Room that an alarm's number takes above the axes.
LABEL_INCHES = 0.55
TWO_DECADES = 100
# Letters of a name that leave room for what it names, on a narrow page too.
LONGEST = 30

# From years to seconds: what a tick says, and what is said once for all of them.
TICKS = ["%Y", "%b %Y", "%d %b", "%H:%M", "%H:%M", "%H:%M:%S"]
OFFSETS = ["", "", "%Y", "%d %b %Y", "%d %b %Y", "%d %b %Y %H:%M"]


def place(time: ArrayLike | None, rows: int, *, dated: bool) -> NDArray[np.float64]:
    """Return where rows stand on the time axis: their numbers, or the plotting library's days where they are dated."""
    if time is None:
        return np.arange(1, rows + 1, dtype=np.float64)
    where = np.asarray(time, dtype=np.float64)
    if not dated:
        return where
    days: NDArray[np.float64] = dates.date2num((where * 1e6).astype("datetime64[us]"))
    return days


def flagged(where: NDArray[np.float64], flags: ArrayLike) -> list[tuple[float, float]]:
    """Find where each run of flagged rows begins and where the row after it, or the last, stands."""
    return [(float(where[start]), float(where[min(end, len(where) - 1)])) for start, end in spans(flags)]


def mark_alarms(axes: Any, alarms: Sequence[tuple[float, float]], *, extent: float | None = None) -> None:
    """Hatch the time in which an alarm was on, and number the alarms on top.

    Parameters
    ----------
    axes : Axes
        To draw into.
    alarms : sequence of (from, to)
        In the order of time.
    extent : float, optional
        Length of the time axis; no numbers are written if not given.
    """
    for left, right in alarms:
        axes.axvspan(left, right, facecolor=ALARM, alpha=0.13, linewidth=0)
        axes.axvspan(left, right, facecolor="none", edgecolor=ALARM, hatch="////", linewidth=0.8, alpha=0.55)
    if extent is None:
        return
    room = LABEL_INCHES / width(axes) * extent
    for first, last, where in _clusters([left for left, _ in alarms], room):
        axes.annotate(
            str(first) if first == last else f"{first}-{last}",
            (where, 1),
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
        axes.xaxis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:,.12g}"))
        return
    # With fewer than five ticks the locator finds no interval for some spans.
    most: Any = max(5, int(0.8 * width(axes)))
    locator: Any = dates.AutoDateLocator(minticks=2, maxticks=most)
    axes.xaxis.set_major_locator(locator)
    axes.xaxis.set_major_formatter(
        dates.ConciseDateFormatter(locator, formats=TICKS, zero_formats=TICKS, offset_formats=OFFSETS)
    )


def width(axes: Any) -> float:
    """Width in inches of the figure or subfigure that axes are in."""
    return float(axes.figure.bbox.width / axes.figure.dpi)


def _clusters(places: list[float], room: float) -> list[tuple[int, int, float]]:
    """Join alarms whose numbers would be written over each other: first and last number, and where."""
    joined: list[tuple[int, int, float]] = []
    for number, where in enumerate(places, start=1):
        if joined and where - joined[-1][2] < room:
            joined[-1] = (joined[-1][0], number, joined[-1][2])
        else:
            joined.append((number, number, where))
    return joined


def plain(name: str) -> str:
    """Keep a dollar sign in a channel's name from being taken for mathematics."""
    return name.replace("$", r"\$")


def brief(name: str) -> str:
    """Leave out the middle of a name that would take the room of what it names."""
    half = LONGEST // 2
    return plain(name if len(name) <= LONGEST else f"{name[:half]}\N{HORIZONTAL ELLIPSIS}{name[1 - half :]}")


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
    axes.title.set_color(INK)
    axes._left_title.set_color(INK)
