"""The clock column: guessed by name or by a date, read in its usual forms, held to rising order."""

import pytest

from perpend.intake.clock import Clock, guess_clock, read_time
from perpend.refusal import InputError


@pytest.mark.parametrize(
    ("cell", "form", "text"),
    [
        ("2026-03-01 06:05", "date and time", "2026-03-01 06:05"),
        ("2026-03-01T06:05:30", "date and time", "2026-03-01 06:05:30"),
        ("2026-03-01", "date and time", "2026-03-01 00:00"),
        ("2026-03-01T06:05Z", "instant with zone", "2026-03-01 06:05 UTC"),
        ("2026-03-01T06:05+02:00", "instant with zone", "2026-03-01 06:05 +02:00"),
        ("01.03.2026 06:05", "date and time", "2026-03-01 06:05"),
        ("2026/03/01 06:05:10", "date and time", "2026-03-01 06:05:10"),
        ("8.15", "number", "8.15"),
        ("1772344800", "seconds since 1970", "2026-03-01 06:00 UTC"),
        ("1772344800000", "milliseconds since 1970", "2026-03-01 06:00 UTC"),
    ],
)
def test_usual_forms_are_read(cell, form, text):
    found = read_time(cell)
    assert found is not None
    assert (found[0], found[2]) == (form, text)


@pytest.mark.parametrize("cell", ["", "noon", "03/04/2026 06:05", "inf", "nan", "1_000", "25:61"])
def test_what_is_no_time_or_could_be_two_is_not_guessed_at(cell):
    assert read_time(cell) is None


def test_a_clock_is_guessed_by_name_then_by_a_date():
    assert guess_clock(("flow", "Timestamp", "t"), {}) == "Timestamp"
    assert guess_clock(("flow", "logged"), {"flow": "1", "logged": "2026-03-01 06:05"}) == "logged"
    assert guess_clock(("flow", "speed"), {"flow": "1", "speed": "1772344800"}) is None


def test_a_clock_in_hours_says_so():
    assert Clock("hours").read("8.15", "line 2").text == "8.15 h"


def test_time_that_goes_back_is_refused_with_both_rows():
    clock = Clock("time")
    clock.read("2026-10-25 02:55", "rows.csv, line 2")
    with pytest.raises(InputError, match=r"rows\.csv, line 3, column 'time': .* 02:55 of line 2; .*UTC"):
        clock.read("2026-10-25 02:00", "rows.csv, line 3")


def test_time_that_stands_still_is_accepted():
    clock = Clock("time")
    assert clock.read("5", "line 2") == clock.read("5", "line 3")


def test_zones_may_change_but_not_come_and_go():
    clock = Clock("time")
    clock.read("2026-03-29T01:55+01:00", "line 2")
    clock.read("2026-03-29T03:00+02:00", "line 3")
    with pytest.raises(InputError, match="expected an instant with zone as in the first row"):
        clock.read("2026-03-29 03:05", "line 4")
