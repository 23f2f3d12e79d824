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


def test_numbers_need_a_kind():
    for values in ([1, 2], [1.5, None], np.arange(3), (value for value in [1])):
        with pytest.raises(OptionError, match="values: numbers are not supported yet; --as states"):
            Series.of(values)
    with pytest.raises(OptionError, match="numbers are not supported yet"):
        Series.of(["a"], kind="numbers")
    assert Series.of([1, 1.0, True, "1"], kind="states").alphabet.labels == ["1", "1.0", "true"]
    assert Series.of(np.array([7, 3, 7]), kind="states").alphabet.labels == ["7", "3"]


def test_bytes():
    for values in (b"abc", bytearray(b"abc"), memoryview(b"abc")):
        series = Series.of(values)
        assert (series.kind, series.codes.tolist(), len(series.alphabet)) == ("bytes", [97, 98, 99], 256)
    assert Series.of([97, None, np.uint8(255)], kind="bytes").codes.tolist() == [97, MISSING, 255]
    for bad in (256, -1, "a", 1.0):
        with pytest.raises(DataError, match=f"values: row 1: not a byte, an integer from 0 to 255: {bad!r}"):
            Series.of([1, bad], kind="bytes")


def test_values_that_are_no_state():
    with pytest.raises(DataError, match="x: a value that is no state: tuple is neither text"):
        Series.of([(1, 2)], name="x")
    with pytest.raises(DataError, match="a value that is no state"):
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
