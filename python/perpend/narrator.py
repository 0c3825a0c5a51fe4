"""Tell a run in plain lines: alarms as they come, a summary at the end."""

import math
import textwrap
from collections.abc import Callable, Sequence

from perpend._core import Reading
from perpend.intake import Row
from perpend.tally import Alarm, Moment, Tally, largest_excess
from perpend.voice import Voice

CAUTION = "perpend advises; it is no protective system. Suspects are not causes."
LABEL = 10
WIDTH = 80
FEW = 5
LISTED = 20


class Narrator:
    """Prints a line when an alarm goes on or off; each is out before the next row is read.

    Parameters
    ----------
    out : Voice
        Where to.
    tally : Tally
        Has taken a row before the narrator does.
    clear : callable
        Called before each line: takes away what stands in its way on a terminal.
    """

    def __init__(self, out: Voice, tally: Tally, clear: Callable[[], None] = lambda: None) -> None:
        self._out = out
        self._clear = clear
        self._tally = tally
        self._on = False
        self._stuck: set[str] = set()
        self._vanished: set[str] = set()

    def take(self, row: Row, reading: Reading) -> None:
        """Say what changed with this row, if anything did."""
        where = placed(Moment.of(row))
        for known, names, what in (
            (self._stuck, reading.stuck, "no movement for longer than usual"),
            (self._vanished, reading.vanished, "no value for longer than usual"),
        ):
            added = new_in(known, names)
            if added:
                self._say(wrapped(f"{where}  ", f"{what}: {few(added)}"))
        if reading.alarm == self._on:
            return
        self._on = reading.alarm
        if reading.alarm:
            excess = largest_excess(reading)
            self._say(wrapped(f"{where}  ALARM  ", str(excess or "")).rstrip())
            self._say(wrapped("    suspects: ", named(reading.suspects(3), reading)))
        else:
            self._say(f"{where}  alarm off after {lasted(self._tally.alarms[-1])}")

    def _say(self, line: str) -> None:
        self._clear()
        self._out.write(line + "\n")
        self._out.flush()


def summary(tally: Tally, channels: int, learned: str) -> list[str]:
    """Write the end of a run.

    Parameters
    ----------
    tally : Tally
        What was counted.
    channels : int
        Channels a row.
    learned : str
        What the watch settled on.

    Returns
    -------
    list of str
        Lines, at most 80 wide for names of usual length.
    """
    lines = [
        line("rows", f"{tally.rows:,} of {channels} channels; settled on {learned}"),
        line("gaps", _gaps(tally)),
        line("healthy", f"{share(tally.healthy, tally.judged)} of {counted(tally.judged, 'judged row')}"),
    ]
    if tally.still:
        longest = sorted(tally.stopped, key=lambda name: -tally.stopped[name])
        more = f" and {len(longest) - LISTED} more" if len(longest) > LISTED else ""
        text = (
            f"{counted(tally.still, 'row')} with a channel that had stopped moving: {', '.join(longest[:LISTED])}{more}"
        )
        lines.append(wrapped(f"{'still':<{LABEL}}", text))
    if tally.adopted:
        lines.append(line("adopted", f"{counted(tally.adopted, 'row')} learned beyond a limit, after the hold"))
    lines.append(line("alarms", f"{len(tally.alarms)}" if tally.alarms else "none"))
    if len(tally.alarms) > LISTED:
        lines[-1] += f"; the {LISTED} highest above their limit:"
    for number in _highest(tally.alarms):
        lines += _alarm(number, tally.alarms[number - 1])
    lines += [line("drift", drift_text(tally.last)), "", CAUTION]
    return lines


def line(label: str, text: str) -> str:
    """Set a label before a text."""
    return f"{label:<{LABEL}}{text}"


def wrapped(label: str, text: str) -> str:
    """Set a label before a text and fold it at 80 columns, under itself."""
    return textwrap.fill(label + text, WIDTH, subsequent_indent=" " * len(label), break_on_hyphens=False)


def placed(moment: Moment) -> str:
    """Write where a row stands."""
    return f"row {moment.number}  {moment.text}".rstrip()


def counted(count: int, noun: str) -> str:
    """Write a count with its noun."""
    return f"{count:,} {noun}" + ("" if count == 1 else "s")


def lasted(alarm: Alarm) -> str:
    """Write how long an alarm was on, and whether it went off because the watch gave in to what it saw."""
    adopted = f", {alarm.adopted:,} of them adopted as the new state" if alarm.adopted else ""
    return counted(alarm.rows, "row") + adopted


def few(names: Sequence[str]) -> str:
    """Write some of many names."""
    more = len(names) - FEW
    return ", ".join(names[:FEW]) + (f" and {more} more" if more > 0 else "")


def new_in(known: set[str], names: Sequence[str]) -> list[str]:
    """Return the names that were not known, and know exactly these from now on."""
    added = [name for name in names if name not in known]
    known.clear()
    known.update(names)
    return added


def share(part: int, whole: int) -> str:
    """Write a share in percent; a dash where there is nothing to share."""
    return f"{100 * part / whole:.2f} %" if whole else "-"


def named(suspects: Sequence[tuple[str, float]], reading: Reading | None = None) -> str:
    """Write suspects with their shares, and what else is known of them."""
    stuck = set() if reading is None else set(reading.stuck)
    vanished = set() if reading is None else set(reading.vanished)
    texts = []
    for name, part in suspects:
        remark = " (stuck)" if name in stuck else " (vanished)" if name in vanished else ""
        texts.append(f"{name}{remark} {100 * part:.0f} %")
    return ", ".join(texts) or "none stands out"


def drift_text(reading: Reading | None) -> str:
    """Write how far the model has moved from the accepted baseline."""
    if reading is None:
        return "-"
    texts = []
    if reading.drift is None:
        texts.append("no angle, the axes are too close in energy for one to mean anything")
    else:
        texts.append(f"{math.degrees(reading.drift):.1f} degrees from the baseline")
    if reading.captured is not None:
        texts.append(f"{100 * reading.captured:.1f} % of the baseline still captured")
    if reading.mean_shift is not None:
        texts.append(f"mean moved {reading.mean_shift:.2g} spreads")
    return f"\n{'':<{LABEL}}".join(texts)


def _gaps(tally: Tally) -> str:
    if not tally.gaps:
        return "none"
    text = f"{counted(tally.gaps, 'cell')} in {counted(tally.rows_with_gaps, 'row')}"
    return text + (f"; {tally.unjudged:,} of them not judged" if tally.unjudged else "")


def _highest(alarms: Sequence[Alarm]) -> list[int]:
    """Return the numbers of the alarms to list, in the order of time."""
    ranked = sorted(range(len(alarms)), key=lambda each: -alarms[each].height)
    return sorted(each + 1 for each in ranked[:LISTED])


def _alarm(number: int, alarm: Alarm) -> list[str]:
    until = "still on" if alarm.end is None else f"to {placed(alarm.end)}"
    lines = [f"{number:>4}  {placed(alarm.start)} {until}", f"      on for {lasted(alarm)}"]
    if alarm.peak is not None and alarm.peak_at is not None:
        lines.append(wrapped("      peak ", f"{alarm.peak} at row {alarm.peak_at.number}"))
    lines.append(wrapped("      suspects: ", named(alarm.suspects())))
    return lines
