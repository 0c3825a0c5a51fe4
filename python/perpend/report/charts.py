"""The drawings of a report, each from the history of a run."""

from collections.abc import Sequence
from dataclasses import dataclass
from functools import partial
from html import escape
from typing import Any

import numpy as np
from matplotlib.figure import Figure

from perpend import plot
from perpend.dressing import INK, TRACE, dress, flagged, label_time, log_scale, mark_alarms, place, width
from perpend.envelope import Band
from perpend.report.drawing import drawing
from perpend.report.history import ENERGIES, Episode, History
from perpend.tally import Alarm, Tally

TRACES = 3
SHOWN = 5
LEAST_SHARE = 0.02
# Of the time axis, left free at either end.
MARGIN = 0.004
# What a word takes, with room about it.
SETTLING_INCHES = 1.1

# The log of a run: a lane each, so that the place says it and not the colour alone.
LANES = {
    "settling": "settling",
    "learned": "learned",
    "held": "held back",
    "adopted": "adopted",
    "gaps": "gaps",
}

DRIFT = {
    "drift": ("angle from the baseline, degrees", 180 / np.pi),
    "captured": ("baseline still captured, %", 100.0),
    "mean_shift": ("mean moved, spreads", 1.0),
}


@dataclass(slots=True)
class Run:
    """A run as all of its drawings need it: reduced, its alarms, its clock."""

    bands: dict[str, Band]
    alarms: list[tuple[float, float]]
    rows: int
    lanes: dict[str, int]
    time_label: str
    dated: bool

    @classmethod
    def of(cls, history: History, tally: Tally, time_label: str, *, dated: bool) -> "Run":
        """Take what was kept, and set it on the time axis."""
        kept = history.bands()
        where = place(kept["time"].lowest, len(kept["time"].lowest), dated=dated)
        bands = {name: Band(where, each.lowest, each.highest) for name, each in kept.items()}
        last = float(kept["time"].highest[-1]) if len(where) else 0.0
        ends = [(each.start.value, last if each.end is None else each.end.value) for each in tally.alarms]
        alarms = place(np.array(ends).reshape(-1, 2), 0, dated=dated).tolist()
        return cls(bands, alarms, len(history), history.lanes, time_label, dated)

    def set_time(self, axes: Any) -> None:
        """Say what the time axis counts, and let it show the whole run: so one drawing is read under another."""
        where = self.bands["time"].where
        if len(where) > 1:
            margin = MARGIN * (where[-1] - where[0])
            axes.set_xlim(where[0] - margin, where[-1] + margin)
        label_time(axes, self.time_label, dated=self.dated)

    def mark_settling(self, axes: Any) -> None:
        """Write into the empty time before the first row was judged why it is empty."""
        where, settling = self.bands["time"].where, self.bands["settling"]
        for left, right in flagged(where, settling.lowest > 0):
            if width(axes) * (right - left) > SETTLING_INCHES * (where[-1] - where[0]):
                middle = (left + right) / 2
                axes.text(middle, 0.5, "settling", transform=axes.get_xaxis_transform(), ha="center", color=INK)


def readings_chart(run: Run) -> str:
    """Draw SPE and T2 over time against their limits."""
    alt = (
        f"SPE and T2 of {run.rows:,} rows over time, on a logarithmic scale, each against its limit (dashed)."
        " The hatched spans are alarms, numbered as in the table."
    )

    def draw(figure: Figure) -> None:
        plot.draw_readings(figure, run.bands, run.alarms, run.time_label, dated=run.dated)
        for axes in figure.get_axes():
            run.set_time(axes)
            run.mark_settling(axes)

    return drawing(draw, "readings", alt, height=4.6)


def logbook_chart(run: Run) -> str:
    """Draw what was learned, held back and adopted, and where values were missing."""
    counts = ", ".join(f"{label} {run.lanes[name]:,}" for name, label in LANES.items())
    alt = f"What became of each row, a lane for each; rows: {counts}."

    def draw(figure: Figure) -> None:
        axes = figure.subplots()
        for height, name in enumerate(reversed(LANES)):
            lane = run.bands[name]
            bars = [(left, right - left) for left, right in flagged(lane.where, lane.highest > 0)]
            # The edge keeps the shortest visible.
            axes.broken_barh(bars, (height - 0.28, 0.56), color=TRACE, linewidth=0.8)
        axes.set_yticks(range(len(LANES)), list(reversed(LANES.values())))
        axes.set_ylim(-0.6, len(LANES) - 0.4)
        run.set_time(axes)
        dress(axes, grid="y")

    return drawing(draw, "logbook", alt, height=2.1)


def drift_chart(run: Run) -> str:
    """Draw how far the model has moved from the accepted baseline."""
    shown = [name for name in DRIFT if np.isfinite(run.bands[name].highest).any()]
    if not shown:
        return "<p>None of its figures means anything here.</p>"
    alt = (
        "Movement from the accepted baseline: the angle of the model, left out where the axes are too close in energy"
        " for it to mean anything; the share of the baseline that the model still captures; and how far the mean has"
        " moved, in spreads of its own healthy movement. Hatched while an alarm was on."
    )

    def draw(figure: Figure) -> None:
        sheets = figure.subplots(len(shown), 1, sharex=True, squeeze=False)[:, 0]
        for axes, name in zip(sheets, shown, strict=True):
            label, unit = DRIFT[name]
            each = run.bands[name]
            axes.fill_between(each.where, unit * each.lowest, unit * each.highest, color=TRACE, linewidth=1.2)
            axes.set_title(label, loc="left", fontsize="medium")
            axes.tick_params(labelbottom=axes is sheets[-1])
            mark_alarms(axes, run.alarms)
            dress(axes, grid="y")
        run.set_time(sheets[-1])

    return drawing(draw, "drift", alt, height=0.5 + 1.5 * len(shown))


def energies_chart(run: Run) -> str:
    """Draw the energies of the axes over time."""
    shown = [name for name in ENERGIES if np.isfinite(run.bands[name].highest).any()]
    if not shown:
        return ""
    last = ", ".join(f"{_last(run.bands[name]):.3g}" for name in shown)
    alt = (
        f"Energies of the {'first ' if len(shown) == len(ENERGIES) else ''}{len(shown)} axes by which rows are judged,"
        f" in squared spreads, on a logarithmic scale, each numbered at its end; at last {last}."
        " Hatched while an alarm was on."
    )

    def draw(figure: Figure) -> None:
        axes = figure.subplots()
        for name in shown:
            each = run.bands[name]
            axes.fill_between(each.where, each.lowest, each.highest, color=TRACE, linewidth=1.4)
        log_scale(axes)
        mark_alarms(axes, run.alarms)
        run.set_time(axes)
        dress(axes, grid="y")
        _number_ends(axes, [_last(run.bands[name]) for name in shown])

    return drawing(draw, "energies", alt, height=2.8)


def alarm_charts(alarm: Alarm, episode: Episode, names: list[str], run: Run) -> str:
    """Draw the suspects of one alarm as bars, and their own traces around its start."""
    found = [(name, share) for name, share in alarm.suspects(SHOWN) if share >= LEAST_SHARE]
    bars = ", ".join(f"{name}\u00a0{100 * share:.0f}\u00a0%" for name, share in found)
    parts = [
        drawing(
            partial(_suspects, found=found),
            f"suspects-{episode.number}",
            f"Suspects of alarm {episode.number}: {bars or 'none stands out'}.",
            height=0.9 + 0.32 * max(len(found), 1),
            wide=6.8,
        )
    ]
    shown = [name for name, _ in found[:TRACES]]
    if shown:
        alt = (
            f"{', '.join(shown)} around the start of alarm {episode.number}: as measured, and dashed what the"
            " others let expect of it. Hatched while the alarm was on."
        )
        draw = partial(_traces, episode=episode, names=names, shown=shown, run=run)
        parts.append(drawing(draw, f"trace-{episode.number}", alt, height=0.6 + 1.6 * len(shown)))
    return "\n".join(parts)


def heading(alarm: Alarm, number: int) -> str:
    """Write the heading of an alarm's section."""
    return f"Alarm {number}: {escape(', '.join(name for name, _ in alarm.suspects(TRACES)) or 'no suspect')}"


def _suspects(figure: Figure, found: list[tuple[str, float]]) -> None:
    plot.suspects(found, figure=figure)


def _traces(figure: Figure, episode: Episode, names: list[str], shown: list[str], run: Run) -> None:
    values, expected = np.array(episode.values), np.array(episode.expected)
    where = place(np.array(episode.time), len(values), dated=run.dated)
    sheets = figure.subplots(len(shown), 1, sharex=True, squeeze=False)[:, 0]
    for axes, name in zip(sheets, shown, strict=True):
        channel = names.index(name)
        plot.draw_trace(axes, where, values[:, channel], expected[:, channel], name)
        mark_alarms(axes, flagged(where, episode.alarm))
        axes.tick_params(labelbottom=axes is sheets[-1])
    plot.label_lines(sheets[0])
    label_time(sheets[-1], run.time_label, dated=run.dated)


def _last(band: Band) -> float:
    known = band.highest[np.isfinite(band.highest)]
    return float(known[-1])


def _number_ends(axes: Any, heights: Sequence[float]) -> None:
    """Write the numbers of descending lines where they end, none over another."""
    inches = axes.get_window_extent().height / axes.figure.dpi
    gap = 0.17 / max(inches, 0.5)
    places = [float(axes.transAxes.inverted().transform(axes.transData.transform((0, each)))[1]) for each in heights]
    for each in range(1, len(places)):
        places[each] = min(places[each], places[each - 1] - gap)
    for number, height in enumerate(places, start=1):
        axes.text(1.004, height, str(number), transform=axes.transAxes, va="center", color=INK, clip_on=False)
