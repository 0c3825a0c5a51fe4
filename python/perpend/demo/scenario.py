"""Twenty-eight invented days of the plant, with five troubles; the same seed gives the same days."""

from dataclasses import dataclass
from datetime import datetime, timedelta

import numpy as np

from perpend.demo.plant import MINUTES_A_ROW, NAMES, ROWS_A_DAY, ROWS_AN_HOUR, Series, Wear, drive, respond

SEED = 7
DAYS = 28
START = datetime(2026, 3, 2)


@dataclass(slots=True, frozen=True)
class Trouble:
    """One trouble, as it truly was.

    Attributes
    ----------
    name, what : str
        Short and long, for a person to read.
    start, end : int
        First row with it and first row without it, from 0.
    shows_in : tuple of str
        Channels that truly show it most; empty where no channel is at fault.
    alarming : bool
        Whether a watch should raise an alarm over it.
    """

    name: str
    what: str
    start: int
    end: int
    shows_in: tuple[str, ...] = ()
    alarming: bool = True


@dataclass(slots=True, frozen=True)
class Scenario:
    """Rows and the truth about them."""

    rows: Series
    troubles: tuple[Trouble, ...]

    def troubled(self, row: int) -> bool:
        """Tell whether something is wrong at a row, counted from 0."""
        return any(each.alarming and each.start <= row < each.end for each in self.troubles)


def moment_of(row: int) -> datetime:
    """Return the time of a row, counted from 0."""
    return START + timedelta(minutes=MINUTES_A_ROW * row)


def _row(day: float, hour: float = 0.0) -> int:
    return round(day * ROWS_A_DAY + hour * ROWS_AN_HOUR)


FOULING = Trouble(
    "condenser fouling",
    "the condenser fouls, slowly; after four days its tubes are brushed",
    _row(12, 6),
    _row(16, 6),
    ("condenser_approach", "discharge_pressure"),
)
STUCK = Trouble(
    "stuck probe",
    "the probe of ice_water_return sticks; after a day it is replaced",
    _row(18, 9),
    _row(19, 9),
    ("ice_water_return",),
)
LOST = Trouble("lost hour", "the data link is down for an hour", _row(20, 14), _row(20, 15), alarming=False)
BEARING = Trouble(
    "bearing wear",
    "a bearing of the compressor wears; after three days it is replaced",
    _row(22, 8),
    _row(25, 6),
    ("bearing_vibration", "bearing_temp"),
)
RESTART = Trouble(
    "standstill",
    "the compressor stands for its new bearing, and is started again",
    _row(25, 6),
    _row(25, 10),
    ("compressor_current", "suction_pressure", "discharge_pressure"),
)
TROUBLES = (FOULING, STUCK, LOST, BEARING, RESTART)


def make_scenario(seed: int = SEED) -> Scenario:
    """Make the rows.

    Parameters
    ----------
    seed : int
        Of the random numbers: weather, production and sensors; the troubles stay where they are.
    """
    random = np.random.default_rng(seed)
    total = DAYS * ROWS_A_DAY
    wear = Wear(fouling=np.zeros(total), bearing=np.zeros(total), running=np.ones(total))
    wear.fouling[FOULING.start : FOULING.end] = np.linspace(0, 0.7, FOULING.end - FOULING.start)
    age = np.linspace(0, 1, BEARING.end - BEARING.start)
    wear.bearing[BEARING.start : BEARING.end] = np.expm1(4 * age) / np.expm1(4)
    wear.running[RESTART.start : RESTART.end - ROWS_AN_HOUR] = 0
    wear.running[RESTART.end - ROWS_AN_HOUR : RESTART.end] = np.linspace(0.2, 1, ROWS_AN_HOUR)
    rows = respond(drive(total, random), wear, random)
    probe = NAMES.index("ice_water_return")
    rows[STUCK.start : STUCK.end, probe] = rows[STUCK.start, probe]
    rows[LOST.start : LOST.end] = np.nan
    return Scenario(rows, TROUBLES)
