"""Which columns of a table are channels and which one is the clock."""

import difflib
from collections.abc import Sequence
from dataclasses import dataclass, field

from perpend.intake.clock import Clock, guess_clock
from perpend.intake.table import Table
from perpend.refusal import InputError, listed, shown

FEWEST_CHANNELS = 2
NO_CLOCK = "none"


@dataclass(slots=True)
class Layout:
    """Channels and clock of a table.

    Attributes
    ----------
    channels : list of str
        In the order in which the watch takes them.
    clock : Clock or None
        The column that tells the time.
    said : list of str
        What was decided for the user, to be said aloud.
    """

    channels: list[str]
    clock: Clock | None
    said: list[str] = field(default_factory=list)


def arrange(
    table: Table,
    *,
    time: str | None = None,
    ignored: Sequence[str] = (),
    like: Sequence[str] | None = None,
) -> Layout:
    """Decide what each column is.

    Parameters
    ----------
    table : Table
        Whose columns.
    time : str or None
        Name of the clock column; guessed where it is None; `NO_CLOCK` where there is none.
    ignored : sequence of str
        Columns to leave out.
    like : sequence of str, optional
        Channels that were learned: they are matched by name, whatever the order here.

    Raises
    ------
    InputError
        Where a named column does not exist, a learned channel is missing, or fewer than two channels remain.
    """
    said: list[str] = []
    for name in ignored:
        _find(name, table, "--ignore")
    rest = tuple(name for name in table.columns if name not in ignored)
    if time is None:
        clock = _guess(table, [name for name in rest if like is None or name not in like], said)
    elif time in table.columns:
        clock = time
    elif time == NO_CLOCK:
        clock = ""
    else:
        _find(time, table, "--time")
    channels = [name for name in rest if name != clock]
    if like is not None:
        channels = _matched(channels, like, table, said)
    if len(channels) < FEWEST_CHANNELS:
        got = listed(channels) or "none"
        raise InputError(f"expected at least {FEWEST_CHANNELS} channels, got {got}", table.label)
    return Layout(channels, Clock(clock) if clock else None, said)


def _guess(table: Table, columns: list[str], said: list[str]) -> str:
    cells = dict(zip(table.columns, table.first_cells() or (), strict=False))
    found = guess_clock(columns, cells)
    if found is None:
        return ""
    said.append(f"{table.label}: column {shown(found)} is taken as the clock (--time COLUMN or --time {NO_CLOCK})")
    return found


def _find(name: str, table: Table, option: str) -> None:
    if name not in table.columns:
        near = difflib.get_close_matches(name, table.columns, n=1)
        advice = f"did you mean {shown(near[0])}?" if near else f"there are {listed(list(table.columns))}"
        raise InputError(f"{option}: there is no column {shown(name)}; {advice}", table.label)


def _matched(channels: list[str], like: Sequence[str], table: Table, said: list[str]) -> list[str]:
    absent = [name for name in like if name not in channels]
    if absent:
        raise InputError(f"missing, though in the file given to --learn: {listed(absent)}", table.label)
    extra = [name for name in channels if name not in like]
    if extra:
        said.append(f"{table.label}: not in the file given to --learn and left out: {listed(extra)}")
    return list(like)
