"""Series made from Python values, and what holds of any series."""

from datetime import date, datetime, timezone

import numpy as np
import pytest

from seqmix.errors import DataError, OptionError
from seqmix.series import CHUNK, MISSING, Rows, Series
from seqmix.series.rows import cut


def test_states():
    series = Series.of(["a", None, "b", "a", float("nan"), "NA", " b", True, np.str_("b")])
    assert series.alphabet.labels == ["a", "b", " b", "true"]
    assert series.codes.tolist() == [0, MISSING, 1, 0, MISSING, MISSING, 2, 3, 1]
    assert (series.kind, series.format, series.name) == ("states", "values", "values")
    assert series.codes.dtype == np.int32


def test_the_characters_of_a_text_are_states():
    assert Series.of("abca").codes.tolist() == [0, 1, 2, 0]


@pytest.mark.parametrize(
    ("values", "numbers"),
    [
        ([1, 2], [1, 2]),
        ([1.5, None, float("nan"), "NA"], [1.5, None, None, None]),
        ([1.5, None, 2], [1.5, None, 2]),
        ((value for value in [1]), [1]),
        (range(3), [0, 1, 2]),
        (np.arange(3), [0, 1, 2]),
        (np.array([0.1, np.nan]), [0.1, None]),
        (np.array([0.1, np.nan, 3e38, 16.7], np.float32), [0.1, None, 3e38, 16.7]),
        (np.array([200, 1], np.uint8), [200, 1]),
        (np.array([1, None, 2.5], object), [1, None, 2.5]),
        ([np.float32(0.5), np.int16(3)], [0.5, 3]),
        ([1e300, -1e-300, 10**300, 12.658579999999999], [1e300, -1e-300, 1e300, 12.658579999999999]),
    ],
)
def test_numbers(values, numbers):
    series = Series.of(values)
    assert (series.kind, series.format, len(series.alphabet), series.notes) == ("numbers", "values", 0, [])
    assert (series.values.dtype, series.codes.dtype) == (np.float64, np.int32)
    assert [None if np.isnan(value) else value for value in series.values] == numbers
    assert series.codes.tolist() == [MISSING if number is None else 0 for number in numbers]


def test_numbers_are_a_copy():
    values = np.array([1.0, 2.0])
    series = Series.of(values)
    values[0] = 7
    assert series.values.tolist() == [1, 2]


def test_infinite_numbers_are_missing():
    for values in ([1, float("inf"), -float("inf")], [1, 10**400, -(10**400)], np.array([1, np.inf, -np.inf])):
        series = Series.of(values)
        assert series.codes.tolist() == [0, MISSING, MISSING]
        assert series.notes == ["numbers that are not finite, taken as missing: 2"]


def test_what_kind_values_are():
    assert Series.of(np.zeros(0)).kind == "numbers"
    assert Series.of([], kind="numbers").values.tolist() == []
    assert Series.of([float("nan")]).kind == "numbers"
    for values in ([], [None], ["1", "2"], [1, "a"], [True, 2], [True, False], np.array([True]), "12"):
        assert Series.of(values).kind == "states"
    assert Series.of(["1", " 2.5 ", None], kind="numbers").values[:2].tolist() == [1, 2.5]
    assert Series.of([1, 1.0, True, "1"], kind="states").alphabet.labels == ["1", "1.0", "true"]
    assert Series.of(np.array([7, 3, 7]), kind="states").alphabet.labels == ["7", "3"]


def test_values_that_are_no_number():
    advice = 'kind="states" takes every value as one'
    with pytest.raises(DataError, match=f"values: row 1: not a number: 'a\\\\x1b'; {advice}"):
        Series.of([1, "a\x1b"], kind="numbers")
    with pytest.raises(DataError, match="values: row 4096: not a number: 'true'"):
        Series.of([*range(CHUNK), True])
    with pytest.raises(DataError, match="values: a value that cannot be taken: complex is neither text"):
        Series.of([1j])
    with pytest.raises(DataError, match="values: an array of 2 dimensions, where rows have one"):
        Series.of(np.zeros((2, 2)))


def test_bytes():
    for values in (b"abc", bytearray(b"abc"), memoryview(b"abc")):
        series = Series.of(values)
        assert (series.kind, series.codes.tolist(), len(series.alphabet)) == ("bytes", [97, 98, 99], 256)
    assert Series.of([97, None, np.uint8(255)], kind="bytes").codes.tolist() == [97, MISSING, 255]
    for bad in (256, -1, "a", 1.0):
        with pytest.raises(DataError, match=f"values: row 1: not a byte, an integer from 0 to 255: {bad!r}"):
            Series.of([1, bad], kind="bytes")


def test_values_that_are_no_state():
    with pytest.raises(DataError, match="x: a value that cannot be taken: tuple is neither text"):
        Series.of([(1, 2)], name="x")
    with pytest.raises(DataError, match="a value that cannot be taken"):
        Series.of([["a"]])
    with pytest.raises(OptionError, match="no kind 'x'"):
        Series.of(["a"], kind="x")


@pytest.mark.parametrize(
    "times",
    [
        ["2024-01-01", "2024-01-02"],
        [datetime(2024, 1, 1), datetime(2024, 1, 2)],
        [date(2024, 1, 1), date(2024, 1, 2)],
        np.array(["2024-01-01", "2024-01-02"], "datetime64[D]"),
        [1704067200_000000, 1704153600_000000],
        [datetime(2024, 1, 1, tzinfo=timezone.utc), datetime(2024, 1, 2, tzinfo=timezone.utc)],
    ],
)
def test_times(times):
    series = Series.of("ab", times=times)
    assert series.times.tolist() == [1704067200_000000, 1704153600_000000]
    assert series.cadence == 86400_000000


def test_times_fill_gaps_and_keep_their_manner():
    times = [f"2024-01-{day:02d} 00:00+01:00" for day in (*range(1, 13), 15)]
    series = Series.of("abcdefghijklm", times=times)
    assert (len(series), series.gaps, series.filled) == (15, 1, 2)
    assert series.clock.text(series.times[-1]) == "2024-01-15 00:00+01:00"
    assert series.notes == ["gaps in the clock: 1; missing rows put into them: 2"]


def test_bad_times():
    with pytest.raises(OptionError, match="2 values, but 1 times"):
        Series.of("ab", times=["2024-01-01"])
    with pytest.raises(DataError, match=r"values: row 1: not a time in ISO 8601.*: 'x'"):
        Series.of("ab", times=["2024-01-01", "x"])
    with pytest.raises(DataError, match="values: row 0: a time outside the years 1 to 9999"):
        Series.of("a", times=[1704067200_000000000])
    with pytest.raises(DataError, match="values: row 0: a time outside the years 1 to 9999"):
        Series.of("a", times=np.array(["NaT"], "datetime64[us]"))


def test_no_values():
    for series in (Series.of([]), Series.of(b""), Series.of([], times=[])):
        assert (len(series), list(series.chunks())) == (0, [])


def test_a_slice_is_a_log_of_its_own():
    times = np.arange(3 * CHUNK) * 1_000_000
    series = Series.of(["a", "b", "c"] * CHUNK, times=times)
    part = series.slice(5, CHUNK + 7)
    assert (len(part), part.first) == (CHUNK + 2, 5)
    assert part.alphabet.labels == ["c", "a", "b"]
    assert [part.alphabet.labels[code] for code in part.codes] == (["a", "b", "c"] * CHUNK)[5 : CHUNK + 7]
    assert [(rows.first, len(rows)) for rows in part.chunks()] == [(5, CHUNK), (5 + CHUNK, 2)]
    assert part.times[0] == 5_000_000
    assert part.slice(-2).first == CHUNK + 5
    assert Series.of(["a", None, "b", None]).slice(1).codes.tolist() == [-1, 0, -1]
    assert Series.of(b"xyz").slice(1).codes.tolist() == [121, 122]
    assert len(series.slice(0, 0)) == 0
    assert [len(rows) for rows in series.chunks()] == [len(rows) for rows in series.chunks()] == [CHUNK] * 3


def test_a_slice_of_numbers():
    values = np.where(np.arange(2 * CHUNK) % 5 == 0, np.nan, np.arange(2 * CHUNK))
    series = Series.of(values, times=np.arange(2 * CHUNK) * 1_000_000)
    part = series.slice(5, CHUNK + 7)
    assert (part.kind, part.first, len(part)) == ("numbers", 5, CHUNK + 2)
    np.testing.assert_array_equal(part.values, values[5 : CHUNK + 7])
    assert part.codes.tolist() == [MISSING if row % 5 == 0 else 0 for row in range(5, CHUNK + 7)]
    first, second = part.chunks()
    assert (len(first), second.first, len(second.times)) == (CHUNK, 5 + CHUNK, 2)
    np.testing.assert_array_equal(second.values, values[CHUNK + 5 : CHUNK + 7])


def test_gaps_of_numbers_are_filled():
    series = Series.of(np.arange(12.0), times=[*range(0, 110, 10), 130])
    assert (series.cadence, series.gaps, series.filled) == (10, 1, 2)
    np.testing.assert_array_equal(series.values, [*range(11), np.nan, np.nan, 11])
    assert series.codes.tolist() == [0] * 11 + [MISSING] * 2 + [0]


def test_rows_can_be_sliced():
    rows = Rows(np.arange(10, dtype=np.int32), np.arange(10) * 10, first=100)
    part = rows[3:7]
    assert (len(part), part.first, part.codes.tolist(), part.times.tolist()) == (
        4,
        103,
        [3, 4, 5, 6],
        [30, 40, 50, 60],
    )
    assert rows[-2:].first == 108
    assert (part.values, part.cells) == (None, None)
    rows = Rows(np.zeros(10, np.int32), None, 0, np.arange(10.0), np.ones(10))
    assert (rows[3:5].values.tolist(), rows[3:5].cells.tolist()) == ([3, 4], [1, 1])
    with pytest.raises(ValueError, match="no step"):
        rows[::2]


def test_cutting_does_not_depend_on_the_pieces():
    codes = np.arange(3 * CHUNK + 10, dtype=np.int32)
    for steps in ([1, 2, CHUNK, 3], [CHUNK], [2 * CHUNK + 1, CHUNK], [5 * CHUNK]):
        places = np.cumsum(steps)
        pieces = [(piece, piece * 2) for piece in np.split(codes, places[places < len(codes)])]
        chunks = list(cut(pieces, first=7))
        assert [(rows.first, len(rows)) for rows in chunks] == [(7 + k * CHUNK, CHUNK) for k in range(3)] + [
            (7 + 3 * CHUNK, 10)
        ]
        assert np.concatenate([rows.codes for rows in chunks]).tolist() == codes.tolist()
        assert np.concatenate([rows.times for rows in chunks]).tolist() == (codes * 2).tolist()
