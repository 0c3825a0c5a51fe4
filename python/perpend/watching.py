"""The command ``perpend watch``: from a file or standard input to readings, alarms and a summary."""

import sys
from collections.abc import Sequence
from contextlib import ExitStack, closing
from dataclasses import dataclass, field
from itertools import chain
from pathlib import Path
from typing import Any

import numpy as np

from perpend._core import Watch
from perpend.intake import Layout, Table, arrange, open_table
from perpend.intake.delimited import SEPARATORS, Dialect
from perpend.intake.layout import NO_CLOCK
from perpend.keeping import Keeper, asked_to_end, resume
from perpend.loop import Observer, judge
from perpend.narrator import Narrator, counted, summary
from perpend.progress import Progress
from perpend.record import ReadingsFile, format_of
from perpend.refusal import InputError
from perpend.report.history import History
from perpend.report.readiness import need_plots
from perpend.tally import Tally
from perpend.voice import Voice, plain

NO_ALARM, ALARM_RAISED, INTERRUPTED = 0, 3, 130
SETTLE = 500


@dataclass(slots=True)
class WatchRequest:
    """What the user asked for.

    Attributes
    ----------
    source : str
        File, or ``-``.
    learn : str or None
        File to settle on.
    time : str or None
        Clock column.
    ignored : sequence of str
        Columns left out.
    dialect : Dialect
        How the text is written.
    readings : str or None
        File for every reading.
    report : str or None
        File for the report.
    state : str or None
        File to resume from, and to keep current.
    settings : dict
        Arguments of `Watch` as far as they were given.
    """

    source: str
    learn: str | None = None
    time: str | None = None
    ignored: Sequence[str] = ()
    dialect: Dialect = field(default_factory=Dialect)
    readings: str | None = None
    report: str | None = None
    state: str | None = None
    settings: dict[str, Any] = field(default_factory=dict)


def run_watch(request: WatchRequest) -> int:
    """Watch until the rows end.

    Returns
    -------
    int
        Exit code: 0 no alarm, 3 an alarm was raised, 130 interrupted.

    Raises
    ------
    InputError
        Where input or settings cannot be worked with.
    """
    if request.readings is not None:
        format_of(request.readings)
    _keep_input(request)
    if request.report is not None:
        need_plots(request.report)
    learned, like, ignored = None, None, list(request.ignored)
    resuming = request.state is not None and Path(request.state).exists()
    if request.learn is not None and not resuming:
        learned, like, ignored = _learn(request)
    with open_table(request.source, request.dialect) as table:
        layout = arrange(table, time=request.time, ignored=ignored, like=like)
        _say(_guesses(table) + layout.said)
        watch = (
            resume(request.state, _plain_names(layout.channels), request.settings)
            if request.state is not None
            else None
        )
        if watch is not None:
            _say([f"{request.state}: resumed after row {watch.ticks:,}, with all that was learned until then"])
            return _run(request, table, layout, watch, f"an earlier run, kept in {request.state}", resumed=True)
        watch = _make_watch(layout.channels, request, table)
        settled_on = f"the first {request.settings.get('settle', SETTLE):,} rows"
        if learned is not None:
            settled_on = f"{request.learn} ({counted(len(learned), 'row')})"
            try:
                watch.settle_on(learned)
            except ValueError as error:
                raise InputError(str(error), str(request.learn)) from None
        return _run(request, table, layout, watch, settled_on)


def _run(
    request: WatchRequest, table: Table, layout: Layout, watch: Watch, settled_on: str, *, resumed: bool = False
) -> int:
    rows = table.rows(layout.channels, layout.clock)
    first = next(rows, None)
    if first is None:
        raise InputError("a header and no rows", table.label)
    tally, voice = Tally(), Voice()
    progress = Progress(table.opened)
    observers: list[Observer] = [tally, Narrator(voice, tally, progress.clear), progress]
    history = None
    if request.report is not None:
        history = History(watch)
        observers.append(history)
    keeper = None
    if request.state is not None:
        keeper = Keeper(watch, request.state)
        # At once: a folder that cannot be written is found now, not after hours.
        keeper.save()
        observers.append(keeper)
    interrupted = False
    with ExitStack() as stack:
        if keeper is not None:
            stack.enter_context(asked_to_end())
        if request.readings is not None:
            live = table.opened.size is None
            observers.append(stack.enter_context(closing(ReadingsFile(request.readings, live=live, follows=resumed))))
        stack.enter_context(closing(progress))
        try:
            judge(watch, chain([first], rows), observers)
        except KeyboardInterrupt:
            interrupted = True
        finally:
            if keeper is not None:
                keeper.save()
    if watch.phase == "settling" and not interrupted and keeper is None:
        raise InputError(_unsettled(tally.rows, request.settings.get("settle", SETTLE)), table.label)
    voice.write("".join(f"{line}\n" for line in summary(tally, len(layout.channels), settled_on)))
    voice.flush()
    if history is not None:
        _report(request, layout, watch, settled_on, tally, history)
    if interrupted:
        _say([f"interrupted after row {tally.rows}"])
        return INTERRUPTED
    return ALARM_RAISED if tally.alarms else NO_ALARM


def _plain_names(channels: Sequence[str]) -> list[str]:
    """Names as the watch has them, and so all that is said and drawn of it; line ends in them made plain as well."""
    return [plain(name).replace("\n", "\\n") for name in channels]


def _unsettled(rows: int, settle: int) -> str:
    """Say why nothing was judged."""
    if rows < settle:
        return (
            f"{counted(rows, 'row')}, fewer than the {settle} to settle on: nothing was judged"
            "; give --learn FILE or a smaller --settle"
        )
    return (
        f"{counted(rows, 'row')}, and no {settle} of them to settle on: nothing was judged; two channels or more must"
        " move, and 20 rows have values in more channels than the rank"
    )


def _report(
    request: WatchRequest, layout: Layout, watch: Watch, settled_on: str, tally: Tally, history: History
) -> None:
    from perpend.report.page import About, write_report

    clock = layout.clock
    about = About(
        title="standard input" if request.source == "-" else Path(request.source).name,
        channels=watch.names,
        learned=settled_on if request.learn is None else settled_on.replace(request.learn, Path(request.learn).name),
        time_label="row" if clock is None else clock.column,
        dated=clock is not None and clock.dated,
        settings={name.replace("_", " "): value for name, value in request.settings.items()} | {"rank": watch.rank},
        constant=watch.constant,
    )
    write_report(str(request.report), about, tally, history)


def _learn(request: WatchRequest) -> tuple[np.ndarray[Any, np.dtype[np.float64]], list[str], list[str]]:
    """Read the file to settle on: its rows, its channels, and what is left to ignore in the other file."""
    with open_table(str(request.learn), request.dialect) as table:
        here = [name for name in request.ignored if name in table.columns]
        time = request.time if request.time is None or request.time in table.columns else NO_CLOCK
        layout = arrange(table, time=time, ignored=here)
        _say(_guesses(table) + layout.said)
        rows = [row.values for row in table.rows(layout.channels, layout.clock)]
        if not rows:
            raise InputError("a header and no rows", table.label)
        elsewhere = [name for name in request.ignored if name not in table.columns]
        return np.asarray(rows, dtype=np.float64), layout.channels, elsewhere


def _make_watch(channels: list[str], request: WatchRequest, table: Table) -> Watch:
    rank = request.settings.get("rank")
    if rank is not None and rank >= len(channels):
        raise InputError(f"--rank: expected 1 to {len(channels) - 1} for {len(channels)} channels, got {rank}")
    try:
        return Watch(len(channels), _plain_names(channels), **request.settings)
    except (ValueError, MemoryError) as error:
        raise InputError(f"{error}; perpend watch --help says more") from None


def _keep_input(request: WatchRequest) -> None:
    written = (("--readings", request.readings), ("--report", request.report), ("--state", request.state))
    for option, target in written:
        for name in (request.source, request.learn):
            if target is None or name in (None, "-"):
                continue
            if Path(target).exists() and Path(name).exists() and Path(target).samefile(name):
                raise InputError(f"{option}: this would overwrite the input; give another name", target)
    outputs = (("readings", request.readings), ("report", request.report), ("state", request.state))
    for place, (_, name) in enumerate(outputs):
        for other, later in outputs[place + 1 :]:
            if name is not None and later is not None and _same(name, later):
                raise InputError(f"--{other}: this would overwrite the {outputs[place][0]}; give another name", later)


def _same(one: str, other: str) -> bool:
    return Path(one).resolve() == Path(other).resolve()


def _guesses(table: Table) -> list[str]:
    separator = table.guessed_separator
    return [] if separator is None else [f"{table.label}: cells are taken as separated by {SEPARATORS[separator]}s"]


def _say(lines: Sequence[str]) -> None:
    for line in lines:
        print(f"perpend watch: {plain(line)}", file=sys.stderr)
