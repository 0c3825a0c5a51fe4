"""Tell the demo: what truly happened, what the watch said and when, and whom it suspected."""

import csv
from collections.abc import Iterator
from datetime import UTC
from pathlib import Path

from perpend._core import Reading, Watch
from perpend.demo.plant import MINUTES_A_ROW, NAMES, ROWS_A_DAY
from perpend.demo.scenario import DAYS, SEED, Scenario, make_scenario, moment_of
from perpend.demo.verdict import compared, false_alarms, span, stamp
from perpend.intake import Instant, Row
from perpend.loop import judge
from perpend.narrator import counted, named, new_in
from perpend.refusal import InputError
from perpend.report.history import History
from perpend.report.readiness import need_plots
from perpend.tally import Tally

SETTLE = 4 * ROWS_A_DAY
MEMORY = 14 * ROWS_A_DAY
NO_ALARM, ALARM_RAISED = 0, 3

OPENING = f"""\
perpend demo: the ice-water chiller plant of a dairy, invented

{DAYS} days, a row every {MINUTES_A_ROW} minutes, {len(NAMES)} channels: pressures, temperatures, flows,
powers, valves, a bearing. All of them move with load and weather, all the time.
Nothing here was measured, and no maker's machine is meant.

The watch settles on the first {SETTLE // ROWS_A_DAY} days. From then on it judges each row, then
learns it if it looks healthy. It is told nothing of the troubles. The crew,
when an alarm is raised, freezes the learning until the alarm is over and what
was wrong is put right."""

CLOSING = """\
This is one run of many, and others are less kind: perpend demo --seed N.
These rows: perpend demo --rows FILE. Your own rows: perpend watch FILE."""

CAUTIONS = """\
perpend advises; it is no protective system. Trips, interlocks and safety
functions stay with the equipment made and certified for them, and local codes
and licensed practice come first. A suspect is where to look first, not a cause."""


def run_demo(seed: int | None = None, report: str | None = None) -> int:
    """Watch the scenario, print truth beside finding, and write a report if a file is named for it.

    Returns
    -------
    int
        3: an alarm was raised; 0 if none was.
    """
    if report is not None:
        need_plots(report)
    scenario = make_scenario(SEED if seed is None else seed)
    watch = Watch(len(NAMES), NAMES, settle=SETTLE, memory=MEMORY)
    tally, history = Tally(), History(watch)
    print(OPENING)
    print("\nAS IT HAPPENED\n")
    judge(watch, _rows(scenario), [tally, history, Chronicle(scenario, tally), Crew(scenario, watch)])
    print("\nTRUTH BESIDE FINDING\n")
    for trouble in scenario.troubles:
        print("\n".join(compared(trouble, tally.alarms)))
    print("\n".join(false_alarms(scenario, tally)))
    print(f"\n{CAUTIONS}")
    print(f"\n{CLOSING}")
    if report is not None:
        _write(report, watch, tally, history)
    return ALARM_RAISED if tally.alarms else NO_ALARM


def write_rows(name: str, seed: int | None = None) -> int:
    """Write the scenario's rows as CSV, a time and the channels; lost cells are empty.

    Raises
    ------
    InputError
        Where the file cannot be written.
    """
    scenario = make_scenario(SEED if seed is None else seed)
    try:
        with Path(name).open("w", encoding="utf-8", newline="") as out:
            table = csv.writer(out, lineterminator="\n")
            table.writerow(["time", *NAMES])
            for index, row in enumerate(scenario.rows.tolist()):
                cells = ["" if value != value else f"{value:.4f}" for value in row]
                table.writerow([moment_of(index).isoformat(" ", "minutes"), *cells])
    except OSError as error:
        raise InputError(f"--rows: cannot be written: {error.strerror or error}", name) from None
    print(f"{name}: {counted(len(scenario.rows), 'row')} of {len(NAMES)} channels; the truth about them:")
    for trouble in scenario.troubles:
        print(f"  row {trouble.start + 1:>4} to {trouble.end:>4}  {trouble.what}")
    print(f"Watch them: perpend watch {name} --settle {SETTLE}")
    return NO_ALARM


def _write(name: str, watch: Watch, tally: Tally, history: History) -> None:
    from perpend.report.page import About, write_report

    about = About(
        title="Ice-water chiller plant of a dairy, invented",
        channels=watch.names,
        learned=f"the first {SETTLE:,} rows",
        dated=True,
        settings={"settle": f"{SETTLE:,}", "memory": f"{MEMORY:,}", "rank": watch.rank},
        constant=watch.constant,
    )
    write_report(name, about, tally, history)
    print(f"The report: {name}")


class Crew:
    """Does what a crew would: no learning from the first row of an alarm until all is well again."""

    def __init__(self, scenario: Scenario, watch: Watch) -> None:
        self._scenario = scenario
        self._watch = watch

    def take(self, row: Row, reading: Reading) -> None:
        """Freeze or resume the learning."""
        if reading.alarm:
            self._watch.freeze()
        elif self._watch.frozen and not self._scenario.troubled(row.number - 1):
            self._watch.resume()


class Chronicle:
    """Prints what happens in the order of time, what is true and what the watch says of it."""

    def __init__(self, scenario: Scenario, tally: Tally) -> None:
        self._scenario = scenario
        self._tally = tally
        self._on = False
        self._phase = "settling"
        self._stuck: set[str] = set()

    def take(self, row: Row, reading: Reading) -> None:
        """Print what changed with this row."""
        index = row.number - 1
        for trouble in self._scenario.troubles:
            if index == trouble.start:
                self._say(index, "truth", f"{trouble.name} begins")
            elif index == trouble.end:
                self._say(index, "truth", f"{trouble.name} over")
        if self._phase == "settling" and reading.phase != "settling":
            self._say(index, "watch", f"settled on {counted(index, 'row')}, {reading.rank} axes of {len(NAMES)}")
        self._phase = reading.phase
        for name in new_in(self._stuck, reading.stuck):
            self._say(index, "watch", f"{name} has not moved for longer than usual")
        if reading.alarm != self._on:
            self._on = reading.alarm
            alarm = self._tally.alarms[-1]
            if reading.alarm:
                self._say(index, "watch", f"ALARM, first suspect {named(alarm.first[:1], reading)}")
            else:
                self._say(index, "watch", f"alarm off after {span(alarm.rows)}")

    def _say(self, index: int, who: str, what: str) -> None:
        print(f"  {stamp(moment_of(index))}  {who}  {what}", flush=True)


def _rows(scenario: Scenario) -> Iterator[Row]:
    for index, values in enumerate(scenario.rows):
        moment = moment_of(index)
        yield Row(index + 1, f"row {index + 1}", values, Instant(moment.replace(tzinfo=UTC).timestamp(), stamp(moment)))
