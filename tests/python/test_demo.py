"""The demo: an invented plant that behaves like one, told from start to finish."""

import subprocess
import sys
from itertools import pairwise

import numpy as np
import pytest

from perpend.cli import main
from perpend.demo.plant import CHANNELS, NAMES, ROWS_A_DAY, ROWS_AN_HOUR
from perpend.demo.scenario import BEARING, FOULING, LOST, RESTART, STUCK, TROUBLES, make_scenario

PERPEND = [sys.executable, "-m", "perpend"]


@pytest.fixture(scope="module")
def rows() -> np.ndarray:
    """Rows of the scenario as the demo tells it."""
    return make_scenario().rows


def column(rows: np.ndarray, name: str) -> np.ndarray:
    return rows[:, NAMES.index(name)]


def test_the_same_seed_gives_the_same_days_and_another_seed_others(rows):
    assert np.array_equal(rows, make_scenario().rows, equal_nan=True)
    assert not np.array_equal(rows, make_scenario(8).rows, equal_nan=True)


def test_channels_stay_within_what_such_a_plant_can_show(rows):
    sound = rows[: FOULING.start]
    assert np.isfinite(sound).all()
    for name, unit, noise in CHANNELS:
        values = column(sound, name)
        assert np.std(values) > 2 * noise, name
        if unit == "%":
            assert values.min() > -5 * noise
            assert values.max() < 100 + 5 * noise
    assert (column(sound, "discharge_pressure") > column(sound, "suction_pressure") + 2).all()
    assert (column(sound, "ice_water_return") > column(sound, "ice_water_supply") + 1).all()
    assert (column(sound, "cooling_water_in") > column(sound, "wet_bulb")).all()


def test_load_and_weather_explain_nearly_everything_in_healthy_rows(rows):
    sound = rows[: FOULING.start]
    scaled = (sound - sound.mean(0)) / sound.std(0)
    energies = np.linalg.svd(scaled, compute_uv=False) ** 2
    assert energies[:5].sum() / energies.sum() > 0.95


def test_each_trouble_is_in_the_rows_as_told(rows):
    approach, week = column(rows, "condenser_approach"), 7 * ROWS_A_DAY
    last = slice(FOULING.end - ROWS_A_DAY, FOULING.end)
    assert approach[last].mean() > 1.3 * approach[last.start - week : last.stop - week].mean()
    assert np.ptp(column(rows, "ice_water_return")[STUCK.start : STUCK.end]) == 0
    assert np.isnan(rows[LOST.start : LOST.end]).all()
    assert np.isnan(rows).sum() == ROWS_AN_HOUR * len(NAMES)
    vibration = column(rows, "bearing_vibration")
    worn = vibration[BEARING.end - ROWS_AN_HOUR : BEARING.end].mean()
    assert worn > 1.5 * np.nanmax(vibration[: BEARING.start])
    assert column(rows, "compressor_current")[RESTART.start : RESTART.start + ROWS_AN_HOUR].mean() < 5


def test_troubles_do_not_overlap_and_come_after_the_settling():
    for earlier, later in pairwise(TROUBLES):
        assert earlier.end <= later.start


def test_the_demo_tells_every_trouble_beside_its_finding_in_80_columns():
    found = subprocess.run([*PERPEND, "demo"], capture_output=True, text=True, timeout=60)
    assert found.returncode == 3
    assert found.stderr == ""
    assert all(len(line) <= 80 for line in found.stdout.splitlines())
    assert found.stdout.isascii()
    told = found.stdout.partition("TRUTH BESIDE FINDING")[2]
    for trouble in TROUBLES:
        assert trouble.what in told
    assert told.count("    began ") == told.count("    found ") == len(TROUBLES)
    assert "false alarm" in told
    assert "no protective system" in told


def test_weather_that_settling_had_not_seen_is_said_to_be_that(capsys):
    assert main(["demo"]) == 3
    told = capsys.readouterr().out
    stray = told[told.index("between troubles") :]
    assert ("suspects dry_bulb" in stray) == ("had shown of it" in stray)


def test_rows_written_by_the_demo_are_rows_to_watch(tmp_path, monkeypatch, capsys):
    monkeypatch.chdir(tmp_path)
    assert main(["demo", "--rows", "plant.csv"]) == 0
    assert "perpend watch plant.csv --settle 1152" in capsys.readouterr().out
    assert main(["watch", "plant.csv", "--settle", "1152"]) == 3
    printed = capsys.readouterr()
    assert "8,064 of 24 channels" in printed.out
    assert "288 cells in 12 rows; 12 of them not judged" in printed.out
    assert "'time' is taken as the clock" in printed.err


def test_rows_that_cannot_be_written_get_one_line(tmp_path, monkeypatch, capsys):
    monkeypatch.chdir(tmp_path)
    assert main(["demo", "--rows", "no/folder/plant.csv"]) == 2
    assert capsys.readouterr().err.startswith("perpend demo: no/folder/plant.csv: --rows: cannot be written")
