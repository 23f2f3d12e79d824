"""Times: read, printed in the log's own manner, cadence and gaps."""

import io
from datetime import datetime, timedelta, timezone

import numpy as np
import pytest

from seqmix.series import MISSING, Clock, read
from seqmix.series.clock import TimeTextError, is_time
from seqmix.series.gaps import find_cadence

SECOND = 1_000_000
HOUR = 3600 * SECOND


@pytest.mark.parametrize(
    ("text", "micros"),
    [
        ("1970-01-01", 0),
        ("1970-01-01T00:00", 0),
        ("1970-01-02 00:00:01", 86401 * SECOND),
        ("1969-12-31t23:59:59.5", -SECOND // 2),
        ("2000-02-29T12:34:56,123456789", 951827696123456),
        ("1970-01-01T00:00Z", 0),
        ("1970-01-01T02:30:00+02:30", 0),
        ("1970-01-01T00:00:00-0100", HOUR),
        ("1970-01-01T00:00:00.25-01", HOUR + SECOND // 4),
        ("0001-01-01", -62135596800 * SECOND),
        ("9999-12-31T23:59:59.999999", 253402300799999999),
    ],
)
def test_reading_a_time(text, micros):
    assert is_time(text)
    assert Clock.like(text).parse([text, f" {text} "]).tolist() == [micros, micros]


@pytest.mark.parametrize(
    "text",
    [
        "",
        "2024",
        "2024-01",
        "20240101",
        "2024-1-1",
        "2024-01-01T",
        "2024-01-01T00",
        "2024-01-01Z",
        "now",
        "2024-01-01T00:00:00.Z",
        "2024-01-01T00:00:00.0000000000",
        "２０２４-01-01",
        "2024-01-01T00:00+1:00",
    ],
)
def test_what_is_no_time(text):
    assert not is_time(text)
    with pytest.raises(TimeTextError, match="not a time in ISO 8601") as error:
        Clock().parse(["2024-01-01", text])
    assert error.value.index == 1


@pytest.mark.parametrize(
    "text",
    [
        "2023-02-29",
        "2024-00-01",
        "2024-13-01",
        "2024-01-00",
        "2024-01-32",
        "0000-01-01",
        "2024-01-01T24:00",
        "2024-01-01T00:60",
        "2024-01-01T00:00:60",
    ],
)
def test_times_that_do_not_exist(text):
    with pytest.raises(TimeTextError, match="no such date or time of day"):
        Clock().parse([text])


def test_the_first_bad_time_is_named_whatever_is_wrong_with_it():
    good, impossible, offset, nonsense = "2024-01-01", "2024-13-01", "2024-01-01T00:00Z", "x"
    for texts in (
        [good, impossible, nonsense],
        [good, nonsense, impossible],
        [good, offset, impossible, nonsense],
    ):
        with pytest.raises(TimeTextError) as error:
            Clock().parse(texts)
        assert error.value.index == 1
    with pytest.raises(TimeTextError, match="a time without an offset, while the first has one"):
        Clock.like(offset).parse([offset, good])


def test_reading_agrees_with_the_standard_library():
    rng = np.random.default_rng(1)
    epoch = datetime(1970, 1, 1, tzinfo=timezone.utc)
    zones = [timezone(timedelta(minutes=int(minutes))) for minutes in rng.integers(-720, 840, 20)]
    times = [
        datetime.fromtimestamp(int(second), zones[i % 20]).replace(microsecond=int(rng.integers(10**6)) * (i % 3 > 0))
        for i, second in enumerate(rng.integers(-(10**10), 10**11, 2000))
    ]
    texts = [time.isoformat() for time in times]
    expected = [(time - epoch) // timedelta(microseconds=1) for time in times]
    assert Clock.like(texts[0]).parse(texts).tolist() == expected


@pytest.mark.parametrize(
    "text",
    [
        "2024-02-29",
        "2024-02-29T12:30",
        "2024-02-29 12:30:05",
        "2024-02-29T12:30:05.250",
        "2024-02-29T12:30:05Z",
        "2024-02-29T12:30:05.123456+05:30",
        "2024-02-29 12:30-0330",
        "0099-01-01",
        "1969-12-31T23:59:59.999999",
    ],
)
def test_times_are_printed_as_the_log_writes_them(text):
    clock = Clock.like(text)
    assert clock.text(clock.parse([text])[0]) == text


def test_times_are_printed_finer_where_needed():
    assert Clock.like("2024-01-01").text(90 * SECOND) == "1970-01-01T00:01:30"
    assert Clock.like("2024-01-01 00:00").text(60 * SECOND) == "1970-01-01 00:01"
    assert Clock.like("2024-01-01 00:00").text(90 * SECOND) == "1970-01-01 00:01:30"
    assert Clock.like("2024-01-01T00:00:00.0Z").text(1) == "1970-01-01T00:00:00.000001Z"
    assert Clock().text(0) == "1970-01-01T00:00:00"


def test_cadence():
    steady = np.arange(0, 100 * HOUR, HOUR)
    assert find_cadence(steady) == HOUR
    assert find_cadence(np.delete(steady, [5, 50])) == HOUR
    assert find_cadence(np.array([0, 1, 3, 6, 10])) is None
    assert find_cadence(np.array([5, 5, 5])) is None
    assert find_cadence(np.array([5])) is None
    assert find_cadence(np.cumsum([0, *[HOUR] * 9, 7])) == HOUR
    assert find_cadence(np.cumsum([0, *[HOUR] * 8, 7])) is None


def log_of(minutes):
    start = datetime(2024, 1, 1)
    lines = [f"{(start + timedelta(minutes=m)).isoformat()},s{i}" for i, m in enumerate(minutes)]
    return read(io.BytesIO("\n".join(lines).encode()))


def test_gaps_become_missing_rows():
    series = log_of([*range(0, 300, 10), 330, 340.5, 350])
    assert (series.cadence, series.gaps, series.filled) == (600 * SECOND, 1, 3)
    assert series.codes.tolist() == [*range(30), MISSING, MISSING, MISSING, 30, 31, 32]
    steps = np.diff(series.times) // (60 * SECOND)
    assert steps.tolist() == [10] * 33 + [10, 9]
    assert series.notes[-1] == "gaps in the clock: 1; missing rows put into them: 3"


def test_a_step_between_two_multiples_is_no_gap():
    series = log_of([*range(0, 300, 10), 314])
    assert (series.gaps, series.filled, len(series)) == (0, 0, 31)
    assert log_of([*range(0, 300, 10), 309]).filled == 1


def test_an_irregular_log_has_no_gaps():
    series = log_of([0, 10, 30, 40, 90])
    assert (series.cadence, series.gaps, len(series)) == (None, 0, 5)


def test_a_gap_too_long_is_left():
    series = log_of([*range(0, 300, 10), 20_000_000])
    assert (series.gaps, series.filled, len(series)) == (1, 0, 31)
    assert series.notes[-1] == "gaps of more than 1000000 rows, left as they are: 1"


def test_times_that_go_back_or_repeat_are_kept():
    series = log_of([*range(0, 300, 10), 290, 280, 290])
    assert series.codes.tolist() == list(range(33))
    assert series.notes[-1] == "rows not later than the row before, kept as they are: 2"


def test_gaps_over_many_chunks_and_at_their_edges():
    minutes = [m for m in range(0, 200_000, 10) if m not in (40_960, 81_910, 81_920) and not 90_000 <= m < 180_000]
    series = log_of(minutes)
    assert (series.gaps, series.filled, len(series)) == (3, 9003, 20_000)
    assert (np.diff(series.times) == 600 * SECOND).all()
    kept = series.codes != MISSING
    assert series.codes[kept].tolist() == list(range(len(minutes)))
    assert (series.times[kept] - series.times[0]).tolist() == [m * 60 * SECOND for m in minutes]
    assert [len(rows) for rows in series.chunks()] == [4096] * 4 + [20_000 - 4 * 4096]
