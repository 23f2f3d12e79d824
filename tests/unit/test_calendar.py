"""Phases of the clock, against datetime, and the periods that a cadence suggests."""

from __future__ import annotations

from datetime import datetime, timedelta

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from seqmix.models.calendar import DAY, HOUR, MINUTE, WEEK, Phase, periods_of, phases

EPOCH = datetime(1970, 1, 1)
MICROSECOND = timedelta(microseconds=1)


def place(phase: Phase, moment: datetime, row: int = 0) -> int:
    times = np.array([(moment - EPOCH) // MICROSECOND], dtype=np.int64)
    return int(phase.of(np.array([row]), times)[0])


def expected(label: str, moment: datetime) -> int:
    return {
        "day of the week": moment.weekday(),
        "day of the year": 31 * (moment.month - 1) + moment.day - 1,
        "hour of the day": moment.hour,
        "hour of the week": 24 * moment.weekday() + moment.hour,
        "ten minutes of the day": 6 * moment.hour + moment.minute // 10,
    }[label]


MOMENTS = st.datetimes(datetime(1900, 1, 1), datetime(2200, 1, 1))


@given(st.sampled_from([5 * MINUTE, 20 * MINUTE, HOUR, 6 * HOUR, DAY]), MOMENTS)
@settings(max_examples=300, deadline=None)
def test_phases_are_those_of_datetime(cadence: int, moment: datetime) -> None:
    for phase in phases((), cadence):
        if phase.label != "minute of the hour":
            assert place(phase, moment) == expected(phase.label, moment) < phase.places


@given(st.sampled_from([1, 2, 5, 10, 12, 15]), MOMENTS)
@settings(max_examples=100, deadline=None)
def test_minute_of_the_hour_goes_in_steps_of_the_cadence(minutes: int, moment: datetime) -> None:
    (phase,) = [one for one in phases((), minutes * MINUTE) if one.label == "minute of the hour"]
    assert phase.places == 60 // minutes
    assert place(phase, moment) == moment.minute // minutes


@pytest.mark.parametrize(
    ("moment", "week", "year"),
    [
        (datetime(1970, 1, 1), 3, 0),  # a Thursday
        (datetime(1969, 12, 31, 23, 59), 2, 371),
        (datetime(2024, 2, 29), 3, 59),
        (datetime(2023, 3, 1), 2, 62),
        (datetime(2000, 1, 3), 0, 2),
    ],
)
def test_days_by_hand(moment: datetime, week: int, year: int) -> None:
    of_week, of_year = phases((7, 365), DAY)
    assert place(of_week, moment) == week
    assert place(of_year, moment) == year


def test_the_same_day_has_the_same_place_in_every_year() -> None:
    _, of_year = phases((), DAY)
    for month, day in ((1, 1), (3, 1), (12, 25), (12, 31)):
        assert len({place(of_year, datetime(year, month, day)) for year in range(1950, 2050)}) == 1


def test_without_a_clock_the_place_is_counted_in_rows() -> None:
    labels = [phase.label for phase in phases((12, 7, 1000), None)]
    assert labels == ["place in 12 rows", "place in 7 rows"]  # 1,000 places would never fill
    phase = phases((7,), None)[0]
    assert phase.of(np.arange(20), None).tolist() == [row % 7 for row in range(20)]
    assert phases((), None) == []


def test_a_cadence_of_weeks_or_months_counts_in_rows_too() -> None:
    (phase,) = phases((12,), 30 * DAY)
    assert (phase.rows, phase.places) == (12, 12)
    assert [phase.rows for phase in phases((52,), WEEK)] == [52]


@pytest.mark.parametrize(
    ("cadence", "periods"),
    [
        (None, ()),
        (5_000_000, (720,)),
        (MINUTE, (60, 1440)),
        (10 * MINUTE, (6, 144, 1008)),
        (15 * MINUTE, (4, 96, 672)),
        (30 * MINUTE, (2, 48, 336)),
        (HOUR, (24, 168)),
        (6 * HOUR, (4, 28, 1460)),
        (DAY, (7, 365)),
        (30 * DAY, (12,)),
        (31 * DAY, (12,)),
        (91 * DAY, (4,)),
        (365 * DAY, ()),
        (7 * MINUTE, (1440,)),  # 7 minutes go into a week, and into no hour or day
    ],
)
def test_periods_of_a_cadence(cadence: int | None, periods: tuple[int, ...]) -> None:
    assert periods_of(cadence) == periods
