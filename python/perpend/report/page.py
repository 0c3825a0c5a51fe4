"""Set a run's figures, tables and drawings into one page that needs nothing else."""

import math
import re
from collections.abc import Mapping
from dataclasses import dataclass, field
from html import escape
from importlib.resources import files
from pathlib import Path

from perpend._core import __version__
from perpend.narrator import counted, drift_text, named, placed, share
from perpend.refusal import InputError
from perpend.report.charts import (
    Run,
    alarm_charts,
    drift_chart,
    energies_chart,
    heading,
    logbook_chart,
    readings_chart,
)
from perpend.report.history import History
from perpend.tally import Alarm, Moment, Tally

NOTHING_FROM_OUTSIDE = "default-src 'none'; style-src 'unsafe-inline'; img-src data:"
LISTED = 1000
NEW_LINE = "\n"
SHARE = re.compile(r" (\d+) %")

CAUTIONS = """\
perpend advises; it is no protective system. Trips, interlocks and safety functions stay with the equipment made and
certified for them, and local codes and licensed practice come first."""

READING_IT = """\
A row is judged before it is learned. SPE is the squared part of a row that the learned directions do not explain, in
squared spreads of each channel; T2 is how far the row lies along them. A suspect is a channel whose correction alone
would take away much of the excess: where to look first, not a cause. Where several channels move together, or the
trouble is none of them, the first suspect need not be at fault."""


@dataclass(slots=True)
class About:
    """What a report is about.

    Attributes
    ----------
    title : str
        Such as the name of the file.
    channels : list of str
        Their names.
    learned : str
        What the watch settled on.
    time_label : str
        What the clock counts.
    dated : bool
        Whether the clock is in seconds since 1970.
    settings : mapping
        Settings as they are to be shown.
    constant : list of str
        Channels that did not move while settling.
    """

    title: str
    channels: list[str]
    learned: str
    time_label: str = "row"
    dated: bool = False
    settings: Mapping[str, object] = field(default_factory=dict)
    constant: list[str] = field(default_factory=list)


def write_report(name: str, about: About, tally: Tally, history: History) -> None:
    """Write the page.

    Parameters
    ----------
    name : str
        File to write.
    about : About
        Title and settings.
    tally : Tally
        What was counted.
    history : History
        What is drawn.

    Raises
    ------
    InputError
        Where the file cannot be written.
    """
    text = make_page(about, tally, history)
    try:
        Path(name).write_text(text, encoding="utf-8")
    except OSError as error:
        raise InputError(f"--report: cannot be written: {error.strerror or error}", name) from None


def make_page(about: About, tally: Tally, history: History) -> str:
    """Make the page's HTML."""
    style = files("perpend.report").joinpath("style.css").read_text(encoding="utf-8")
    run = Run.of(history, tally, about.time_label, dated=about.dated)
    body = [
        f"<header><h1>{escape(about.title)}</h1><p>{escape(_verdict(tally))}</p></header>",
        "<main>",
        _section("At a glance", _glance(about, tally)),
        _section("SPE and T2 over time", readings_chart(run)),
        _section("Alarms", _table(tally) + _alarms(about, tally, history, run), kind="found"),
        _section("What was learned", logbook_chart(run) + _constant(about)),
        _section("Drift and energies", _drift(tally) + drift_chart(run) + energies_chart(run)),
        _section("Settings", _settings(about)),
        _section("Cautions", f"<p>{CAUTIONS}</p><p>{READING_IT}</p>", kind="cautions"),
        "</main>",
    ]
    return "\n".join(
        [
            "<!DOCTYPE html>",
            '<html lang="en"><head><meta charset="utf-8">',
            '<meta name="viewport" content="width=device-width, initial-scale=1">',
            f'<meta http-equiv="Content-Security-Policy" content="{NOTHING_FROM_OUTSIDE}">',
            f"<title>perpend: {escape(about.title)}</title>",
            '<link rel="icon" href="data:,">',
            f"<style>\n{style}</style></head><body>",
            *body,
            "</body></html>\n",
        ]
    )


def _section(title: str, content: str, kind: str = "") -> str:
    attribute = f' class="{kind}"' if kind else ""
    return f"<section{attribute}><h2>{escape(title)}</h2>\n{content}\n</section>"


def _verdict(tally: Tally) -> str:
    if not tally.alarms:
        return f"No alarm in {counted(tally.judged, 'judged row')}."
    still = " The last is still on." if tally.current is not None else ""
    alarms = counted(len(tally.alarms), "alarm")
    return f"{alarms} in {counted(tally.judged, 'judged row')}; the first at {placed(tally.alarms[0].start)}.{still}"


def _glance(about: About, tally: Tally) -> str:
    return _pairs(
        {
            "rows": f"{tally.rows:,}",
            "channels": len(about.channels),
            "settled on": about.learned,
            "healthy": f"{share(tally.healthy, tally.judged)} of judged rows",
            "gaps": f"{counted(tally.gaps, 'cell')} in {counted(tally.rows_with_gaps, 'row')}",
            "not judged": counted(tally.unjudged, "row"),
            "adopted": counted(tally.adopted, "row"),
            "drift": _drift_parts(tally)[0],
        }
    )


def _table(tally: Tally) -> str:
    if not tally.alarms:
        return "<p>None.</p>"
    rows = [_row(number, alarm) for number, alarm in enumerate(tally.alarms[:LISTED], start=1)]
    more = len(tally.alarms) - LISTED
    note = f"<p>{more:,} more are not listed.</p>" if more > 0 else ""
    heads = "".join(f"<th>{head}</th>" for head in ("no.", "from", "to", "rows on", "peak", "suspects"))
    return f'<table id="alarms"><thead><tr>{heads}</tr></thead><tbody>{"".join(rows)}</tbody></table>{note}'


def _row(number: int, alarm: Alarm) -> str:
    peak = "-" if alarm.peak is None or math.isnan(alarm.peak.ratio) else alarm.peak.brief
    cells = {
        "no.": str(number),
        "from": _where(alarm.start),
        "to": "still on" if alarm.end is None else _where(alarm.end),
        "rows on": f"{alarm.rows:,}",
        "peak": peak,
        "suspects": named(alarm.suspects()),
    }
    return (
        "<tr>"
        + "".join(f'<td data-label="{label}">{_kept_together(text)}</td>' for label, text in cells.items())
        + "</tr>"
    )


def _kept_together(text: str) -> str:
    """Keep a name with its share and a date with its time."""
    lines = [SHARE.sub("\u00a0\\1\u00a0%", line) for line in text.split(NEW_LINE)]
    return "<br>".join([escape(lines[0]), *(f"<span>{escape(line)}</span>" for line in lines[1:])])


def _where(moment: Moment) -> str:
    return f"row {moment.number:,}" + (f"{NEW_LINE}{moment.text}" if moment.text else "")


def _alarms(about: About, tally: Tally, history: History, run: Run) -> str:
    parts = []
    if len(history.episodes) < len(tally.alarms):
        parts.append(f"<p>Drawn below: the {len(history.episodes)} alarms that went highest above their limit.</p>")
    for episode in history.episodes:
        alarm = tally.alarms[episode.number - 1]
        parts.append(f"<h3>{heading(alarm, episode.number)}</h3>")
        parts.append(alarm_charts(alarm, episode, about.channels, run))
    return "\n".join(parts)


def _drift(tally: Tally) -> str:
    return f"<p>At the end: {escape('; '.join(_drift_parts(tally)))}.</p>"


def _drift_parts(tally: Tally) -> list[str]:
    return [part.strip() for part in drift_text(tally.last).split(NEW_LINE)]


def _constant(about: About) -> str:
    if not about.constant:
        return ""
    names = escape(", ".join(about.constant))
    return f"<p>Constant while settling, and not judged until they move: {names}.</p>"


def _settings(about: About) -> str:
    return _pairs({**about.settings, "perpend": __version__}, kind="settings")


def _pairs(pairs: Mapping[str, object], kind: str = "") -> str:
    attribute = f' class="{kind}"' if kind else ""
    items = "".join(f"<div><dt>{escape(key)}</dt><dd>{escape(str(value))}</dd></div>" for key, value in pairs.items())
    return f"<dl{attribute}>{items}</dl>"
