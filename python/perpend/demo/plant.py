"""An invented ice-water chiller plant of a dairy, as its channels would show it.

Nothing here was measured and no maker's machine is meant. An ammonia screw compressor cools ice water for the
pasteurisers; a cooling tower takes the heat away. Load and weather drive everything: they give the heat to be
moved, the heat and the temperatures give the pressures, the pressures give current, oil and bearings.
The ammonia pressure follows Clausius and Clapeyron from 4.29 bar at 0 deg C.
"""

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

Series = NDArray[np.float64]

MINUTES_A_ROW = 5
ROWS_AN_HOUR = 60 // MINUTES_A_ROW
ROWS_A_DAY = 24 * ROWS_AN_HOUR

# Name, unit, and the standard deviation of what the sensor itself adds.
CHANNELS = (
    ("wet_bulb", "deg C", 0.10),
    ("dry_bulb", "deg C", 0.10),
    ("tower_fan_speed", "%", 0.5),
    ("cooling_water_in", "deg C", 0.06),
    ("cooling_water_out", "deg C", 0.06),
    ("cooling_water_flow", "m3/h", 0.8),
    ("cooling_pump_power", "kW", 0.08),
    ("discharge_pressure", "bar", 0.03),
    ("discharge_temp", "deg C", 0.35),
    ("condenser_approach", "K", 0.08),
    ("suction_pressure", "bar", 0.012),
    ("suction_superheat", "K", 0.15),
    ("slide_position", "%", 0.5),
    ("compressor_current", "A", 1.2),
    ("oil_temp", "deg C", 0.15),
    ("oil_pressure", "bar", 0.02),
    ("bearing_temp", "deg C", 0.15),
    ("bearing_vibration", "mm/s", 0.05),
    ("expansion_valve", "%", 0.5),
    ("ice_water_supply", "deg C", 0.03),
    ("ice_water_return", "deg C", 0.05),
    ("ice_water_flow", "m3/h", 0.8),
    ("ice_water_pump_power", "kW", 0.10),
    ("pasteuriser_valve", "%", 0.5),
)
NAMES = tuple(name for name, _, _ in CHANNELS)
UNITS = {name: unit for name, unit, _ in CHANNELS}

WATER = 1.163  # kWh to warm a cubic metre by one kelvin


@dataclass(slots=True)
class Wear:
    """What is wrong with the machine, one value a row.

    Attributes
    ----------
    fouling : ndarray
        By how much the condenser's approach has grown, as a share of the clean one.
    bearing : ndarray
        State of the bearing: 0 sound, 1 due.
    running : ndarray
        1 while the compressor runs, 0 while it stands.
    """

    fouling: Series
    bearing: Series
    running: Series


@dataclass(slots=True)
class Drivers:
    """What moves the plant: weather, the production's demand for cold, and controllers that hunt; one value a row."""

    wet_bulb: Series
    dry_bulb: Series
    valve: Series
    return_lift: Series
    supply_hunting: Series
    fan_hunting: Series
    superheat_hunting: Series


def drive(rows: int, random: np.random.Generator) -> Drivers:
    """Make weather and production.

    Parameters
    ----------
    rows : int
        Rows to make.
    random : Generator
        Seeded.
    """
    day = np.arange(rows) / ROWS_A_DAY
    warmth = 9.0 + 0.06 * day + _wander(rows, random, days=3.0, size=2.0) + _wander(rows, random, days=0.3, size=0.4)
    sun = np.sin(2 * np.pi * (day - 0.4))
    wet_bulb = warmth + 2.2 * sun + _wander(rows, random, days=0.01, size=0.3)
    dry_bulb = wet_bulb + 3.0 + 1.3 * sun + _wander(rows, random, days=0.5, size=0.6)
    hour = 24 * (day % 1)
    shift = _ramp(hour, 4.5, 6.5) - _ramp(hour, 20.5, 22.5)
    pace = 1 + _wander(rows, random, days=0.15, size=0.06) + _wander(rows, random, days=0.01, size=0.06)
    valve = 22 + 46 * shift * pace
    return_lift = 3.6 + 1.3 * shift + _wander(rows, random, days=0.02, size=0.25)
    return Drivers(
        wet_bulb,
        dry_bulb,
        valve,
        return_lift,
        supply_hunting=_wander(rows, random, days=0.01, size=0.12),
        fan_hunting=_wander(rows, random, days=0.01, size=4.0),
        superheat_hunting=_wander(rows, random, days=0.01, size=0.6),
    )


def respond(drivers: Drivers, wear: Wear, random: np.random.Generator) -> Series:
    """Work out every channel.

    Parameters
    ----------
    drivers : Drivers
        Weather and production.
    wear : Wear
        What is wrong.
    random : Generator
        For the sensors' own noise.

    Returns
    -------
    ndarray, shape (rows, channels)
        In the order and the units of `CHANNELS`.
    """
    on = wear.running
    true: dict[str, Series] = {"wet_bulb": drivers.wet_bulb, "dry_bulb": drivers.dry_bulb}
    flow = 60 + 1.15 * drivers.valve
    supply = 1.0 + 0.004 * (drivers.valve - 45) + drivers.supply_hunting
    supply = supply + _lag(6.0 * (1 - on), hours=2)
    back = supply + drivers.return_lift
    cold = WATER * flow * drivers.return_lift * _lag(on, hours=0.3)

    evaporating = supply - 2.2 - 0.0045 * cold - 0.35 * drivers.superheat_hunting
    slide = np.clip(18 + 0.098 * cold, 0, 100) * on
    approach_share = 1 + wear.fouling
    fan = np.clip(30 + 0.05 * cold + 2.1 * (drivers.wet_bulb - 9) + drivers.fan_hunting, 15, 100) * (0.3 + 0.7 * on)
    rejected = 1.21 * cold
    water_in = drivers.wet_bulb + 3.2 + 0.0078 * rejected - 0.035 * (fan - 60)
    water_flow = (112 + 0.35 * fan) * (0.4 + 0.6 * on)
    water_out = water_in + rejected / (WATER * water_flow)
    approach = (1.6 + 0.0052 * rejected) * approach_share * on
    condensing = water_out + approach
    lift = condensing - evaporating
    power = (cold * lift / (273.15 + evaporating) / 0.62 + 22) * on
    suction = _ammonia_bar(evaporating) * on + _ammonia_bar(back) * (1 - on)
    discharge = _ammonia_bar(condensing) * on + _ammonia_bar(water_out) * (1 - on)
    oil = _lag((44 + 0.32 * lift + 0.035 * power) * on + 24 * (1 - on), hours=0.8)

    true["tower_fan_speed"] = fan
    true["cooling_water_in"] = water_in
    true["cooling_water_out"] = water_out
    true["cooling_water_flow"] = water_flow
    true["cooling_pump_power"] = 9 * (water_flow / 130) ** 2
    true["discharge_pressure"] = discharge
    true["discharge_temp"] = _lag(
        (52 + 0.85 * lift + 0.05 * slide + 1.2 * drivers.superheat_hunting) * on + 24 * (1 - on), hours=0.3
    )
    true["condenser_approach"] = approach
    true["suction_pressure"] = suction
    true["suction_superheat"] = (4.6 + 0.010 * slide + drivers.superheat_hunting) * on
    true["slide_position"] = slide
    true["compressor_current"] = 1.78 * power + 0.4 * wear.bearing
    true["oil_temp"] = oil + 0.8 * wear.bearing
    true["oil_pressure"] = (discharge - suction) * 0.55 * on - 0.02 * (oil - 55) * on
    true["bearing_temp"] = oil + (6 + 0.030 * slide) * on + 5.5 * _lag(wear.bearing, hours=1)
    true["bearing_vibration"] = (0.9 + 0.008 * slide + 1.9 * wear.bearing) * on
    true["expansion_valve"] = (10 + 0.10 * cold - 0.25 * (lift - 26) - 2.5 * drivers.superheat_hunting) * on
    true["ice_water_supply"] = supply
    true["ice_water_return"] = back
    true["ice_water_flow"] = flow
    true["ice_water_pump_power"] = 7 * (flow / 100) ** 2
    true["pasteuriser_valve"] = drivers.valve

    clean = np.column_stack([true[name] for name in NAMES])
    return clean + random.standard_normal(clean.shape) * [noise for _, _, noise in CHANNELS]


def _ammonia_bar(celsius: Series) -> Series:
    bar: Series = 4.29 * np.exp(2757.0 * (1 / 273.15 - 1 / (273.15 + celsius)))
    return bar


def _ramp(hour: Series, start: float, end: float) -> Series:
    """Rise smoothly from 0 to 1 between two hours of the day."""
    part = np.clip((hour - start) / (end - start), 0, 1)
    ramp: Series = part * part * (3 - 2 * part)
    return ramp


def _wander(rows: int, random: np.random.Generator, *, days: float, size: float) -> Series:
    """Wander about zero with a given standard deviation, remembering for a given time."""
    keep = float(np.exp(-1 / (days * ROWS_A_DAY)))
    steps = random.standard_normal(rows) * np.sqrt(1 - keep * keep)
    steps[0] = random.standard_normal()
    return size * _recur(steps, keep)


def _lag(series: Series, *, hours: float) -> Series:
    """Follow a series with the slowness of metal."""
    keep = float(np.exp(-1 / (hours * ROWS_AN_HOUR)))
    steps = (1 - keep) * series
    steps[0] = series[0]
    return _recur(steps, keep)


def _recur(steps: Series, keep: float) -> Series:
    values: list[Any] = []
    value = 0.0
    for step in steps.tolist():
        value = keep * value + step
        values.append(value)
    return np.asarray(values)
