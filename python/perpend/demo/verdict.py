"""Set truth beside finding, as it is: how late, whom it suspected, and the alarms that nobody needed."""

from datetime import datetime

from perpend.demo.plant import MINUTES_A_ROW, ROWS_AN_HOUR
from perpend.demo.scenario import Scenario, Trouble, moment_of
from perpend.narrator import counted, named, share, wrapped
from perpend.tally import Alarm, Tally

# An alarm that begins this soon after a repair still belongs to the trouble: the metal is still cooling.
AFTERMATH = 3 * ROWS_AN_HOUR
MARGIN = "    "
WEATHER = ("wet_bulb", "dry_bulb")


def compared(trouble: Trouble, alarms: list[Alarm]) -> list[str]:
    """Write a trouble and what the watch made of it.

    Parameters
    ----------
    trouble : Trouble
        The truth.
    alarms : list of Alarm
        All of the run.

    Returns
    -------
    list of str
        Lines of at most 80 characters.
    """
    began = stamp(moment_of(trouble.start))
    lines = [f"{trouble.what}", f"{MARGIN}began    {began}, over after {span(trouble.end - trouble.start)}"]
    alarm = first_alarm(trouble, alarms)
    on_already = any(_was_on(each, trouble.start + 1) for each in alarms)
    if alarm is None:
        lines.append(f"{MARGIN}found    {_silence(trouble, on_already=on_already)}")
        return [*lines, ""]
    late = span(alarm.start.number - 1 - trouble.start)
    opening = f", {alarm.opening.brief}" if alarm.opening is not None else ""
    lines.append(f"{MARGIN}found    after {late}{opening}")
    lines.append(wrapped(f"{MARGIN}suspects ", named(alarm.first)))
    if not trouble.alarming:
        lines.append(f"{MARGIN}verdict  a false alarm")
    elif trouble.shows_in:
        lines.append(f"{MARGIN}verdict  {_verdict(trouble, alarm)}")
    return [*lines, ""]


def first_alarm(trouble: Trouble, alarms: list[Alarm]) -> Alarm | None:
    """Return the first alarm that was raised in a trouble's time or just after."""
    return next((each for each in alarms if belongs(each, trouble)), None)


def belongs(alarm: Alarm, trouble: Trouble) -> bool:
    """Tell whether an alarm was raised in a trouble's time or just after."""
    return trouble.start <= alarm.start.number - 1 < trouble.end + AFTERMATH


def false_alarms(scenario: Scenario, tally: Tally) -> list[str]:
    """Write how often the watch cried for nothing, before the first trouble and after it."""
    first = scenario.troubles[0].start
    stray = [each for each in tally.alarms if not any(belongs(each, trouble) for trouble in scenario.troubles)]
    early = [each for each in stray if each.start.number <= first]
    judged = first - tally.settling
    lines = [
        f"before any trouble   {counted(len(early), 'false alarm')} in {counted(judged, 'judged row')}"
        f" ({share(sum(each.rows for each in early), judged)} of the rows)",
        f"between troubles     {counted(len(stray) - len(early), 'alarm')} without a trouble of its own",
    ]
    for each in stray:
        lines.append(wrapped(f"{MARGIN}{each.start.text}  ", f"{span(each.rows)}, suspects {named(each.first)}"))
    if any(name in WEATHER for each in stray for name, _ in each.first[:1]):
        lines.append(f"{MARGIN}The weather went beyond what the days of settling had shown of it.")
    return lines


def stamp(moment: datetime) -> str:
    """Write a moment of the scenario."""
    return moment.strftime("%a %d %b %H:%M")


def span(rows: int) -> str:
    """Write a time given in rows."""
    minutes = rows * MINUTES_A_ROW
    days, hours, minutes = minutes // 1440, minutes // 60 % 24, minutes % 60
    texts = [f"{days} d" if days else "", f"{hours} h" if hours else "", f"{minutes} min" if minutes else ""]
    return " ".join(text for text in texts if text) or "0 min"


def _was_on(alarm: Alarm, number: int) -> bool:
    return alarm.start.number < number and (alarm.end is None or alarm.end.number > number)


def _silence(trouble: Trouble, *, on_already: bool) -> str:
    if on_already:
        return "an alarm was on already, and none of its own followed"
    return "nothing: missed" if trouble.alarming else "no alarm, rightly"


def _verdict(trouble: Trouble, alarm: Alarm) -> str:
    names = [name for name, _ in alarm.first]
    if names and names[0] in trouble.shows_in:
        return "the first suspect is right"
    if any(name in trouble.shows_in for name in names):
        return "the right channel is among the suspects, not first"
    return f"the right channel ({trouble.shows_in[0]}) is not among the suspects"
