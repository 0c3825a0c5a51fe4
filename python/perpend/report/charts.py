"""The drawings of a report, each from the history of a run."""

from functools import partial
from html import escape
from typing import Any

import numpy as np
from matplotlib.figure import Figure
from numpy.typing import NDArray

from perpend import plot
from perpend.envelope import envelope, spans
from perpend.report.drawing import drawing
from perpend.report.history import Episode, History
from perpend.tally import Alarm

TRACES = 3
SHOWN = 5
LEAST_SHARE = 0.02

# The log of a run: a lane each, so that the place says it and not the colour alone.
LANES = (
    ("settling", "settling"),
    ("learned", "learned"),
    ("held", "held back"),
    ("adopted", "adopted"),
    ("gaps", "gaps"),
)


def readings_chart(history: History, time_label: str, *, dated: bool) -> str:
    """Draw SPE and T2 over time against their limits."""
    alt = (
        f"SPE and T2 of {len(history):,} rows over time, on a logarithmic scale, each against its limit (dashed)."
        " The hatched spans are alarms, numbered as in the table."
    )

    def draw(figure: Figure) -> None:
        plot.readings(history.figures(), time=history.time, time_label=time_label, dated=dated, figure=figure)

    return drawing(draw, "readings", alt, height=4.6)


def logbook_chart(history: History, time_label: str, *, dated: bool) -> str:
    """Draw what was learned, held back and adopted, and where values were missing."""
    weight = history.figures()["weight"]
    settling, adopting = history.in_phase("settling"), history.in_phase("adopting")
    lanes = {
        "settling": settling,
        "learned": ~settling & ~adopting & (weight > 0),
        "held": ~settling & ~(weight > 0),
        "adopted": adopting,
        "gaps": history.missing > 0,
    }
    counts = ", ".join(f"{label} {int(lanes[name].sum()):,}" for name, label in LANES)
    alt = f"What became of each row, a lane for each; rows: {counts}."

    def draw(figure: Figure) -> None:
        axes = figure.subplots()
        where = plot.place(history.time, len(history), dated=dated)
        for height, (name, _) in enumerate(reversed(LANES)):
            for start, end in _few(lanes[name]):
                left, right = where[start], where[min(end, len(where) - 1)]
                axes.fill_between([left, right], height - 0.28, height + 0.28, color=plot.TRACE, linewidth=0.8)
        axes.set_yticks(range(len(LANES)), [label for _, label in reversed(LANES)])
        axes.set_ylim(-0.6, len(LANES) - 0.4)
        plot.label_time(axes, time_label, dated=dated)
        plot.dress(axes, grid="y")

    return drawing(draw, "logbook", alt, height=2.1)


def drift_chart(history: History, time_label: str, *, dated: bool) -> str:
    """Draw how far the model has moved from the accepted baseline."""
    found = history.figures()
    panels = [
        (np.degrees(found["drift"]), "angle, degrees"),
        (100 * found["captured"], "captured, %"),
        (found["mean_shift"], "mean, spreads"),
    ]
    shown = [(series, label) for series, label in panels if np.isfinite(series).any()]
    if not shown:
        return "<p>None of its figures means anything here.</p>"
    alt = (
        "Movement from the accepted baseline: the angle of the model, left out where the axes are too close in energy"
        " for it to mean anything; the share of the baseline that the model still captures; and how far the mean has"
        " moved, in spreads of its own healthy movement."
    )

    def draw(figure: Figure) -> None:
        sheets = figure.subplots(len(shown), 1, sharex=True, squeeze=False)[:, 0]
        where = plot.place(history.time, len(history), dated=dated)
        for axes, (series, label) in zip(sheets, shown, strict=True):
            start, low, high = envelope(series, plot.BUCKETS)
            axes.fill_between(where[start], low, high, color=plot.TRACE, linewidth=1.1)
            axes.set_ylabel(label)
            axes.tick_params(labelbottom=axes is sheets[-1])
            plot.dress(axes, grid="y")
        plot.label_time(sheets[-1], time_label, dated=dated)

    return drawing(draw, "drift", alt, height=0.5 + 1.5 * len(shown))


def alarm_charts(alarm: Alarm, episode: Episode, names: list[str], time_label: str, *, dated: bool) -> str:
    """Draw the suspects of one alarm as bars, and their own traces around its start."""
    found = [(name, share) for name, share in alarm.suspects(SHOWN) if share >= LEAST_SHARE]
    bars = ", ".join(f"{name} {100 * share:.0f} %" for name, share in found)

    def draw_suspects(figure: Figure) -> None:
        plot.suspects(found, figure=figure)

    parts = [
        drawing(
            draw_suspects,
            f"suspects-{episode.number}",
            f"Suspects of alarm {episode.number}: {bars or 'none stands out'}.",
            height=0.9 + 0.32 * max(len(found), 1),
            wide=8.0,
        )
    ]
    shown = [name for name, _ in found[:TRACES]]
    if shown:
        alt = (
            f"{', '.join(shown)} around the start of alarm {episode.number}; below each, how far it lay from what the"
            " other channels say of it, in its own spreads. Hatched while the alarm was on."
        )
        draw = partial(_traces, episode=episode, names=names, shown=shown, time_label=time_label, dated=dated)
        parts.append(drawing(draw, f"trace-{episode.number}", alt, height=0.4 + 1.9 * len(shown)))
    return "\n".join(parts)


def heading(alarm: Alarm, number: int) -> str:
    """Write the heading of an alarm's section."""
    return f"Alarm {number}: {escape(', '.join(name for name, _ in alarm.suspects(TRACES)) or 'no suspect')}"


def _traces(
    figure: Figure, episode: Episode, names: list[str], shown: list[str], time_label: str, *, dated: bool
) -> None:
    values = np.array(episode.values)
    off = np.sqrt(np.array(episode.contributions))
    where = plot.place(np.array(episode.time), len(values), dated=dated)
    sheets = figure.subplots(2 * len(shown), 1, sharex=True, height_ratios=[3, 2] * len(shown), squeeze=False)
    for order, name in enumerate(shown):
        channel = names.index(name)
        pairs = ((sheets[2 * order, 0], values, name), (sheets[2 * order + 1, 0], off, "off by"))
        for axes, series, label in pairs:
            axes.plot(where, series[:, channel], color=plot.TRACE, linewidth=1.2)
            plot.mark_alarms(axes, where, episode.alarm, numbered=False)
            axes.set_ylabel(plot.plain(label), rotation=0, ha="right", va="center")
            plot.dress(axes, grid="y")
    plot.label_time(sheets[-1, 0], time_label, dated=dated)


def _few(flags: NDArray[Any]) -> list[tuple[int, int]]:
    """Find runs of rows, joined where there are more of them than could be told apart."""
    if len(spans(flags)) <= plot.BUCKETS:
        return spans(flags)
    start, _, highest = envelope(flags.astype(np.float64), plot.BUCKETS)
    ends = [*start[1:].tolist(), len(flags)]
    return [(int(start[first]), ends[last - 1]) for first, last in spans(highest > 0)]
