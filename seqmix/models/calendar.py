"""Phases of the clock for models of numbers: which place in the hour, day, week or year a row has."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

MINUTE = 60_000_000  # microseconds
HOUR = 60 * MINUTE
DAY = 24 * HOUR
WEEK = 7 * DAY


@dataclass(frozen=True)
class Phase:
    """A way to number the places in a period. label: in a few words; places: how many there are."""

    label: str
    places: int
    period: int = 0  # microseconds; 0: day of the year
    step: int = 0  # microseconds; 0: rows
    rows: int = 0  # rows a period, where the clock has no say

    def of(self, rows: npt.NDArray[np.int64], times: npt.NDArray[np.int64] | None) -> npt.NDArray[np.int32]:
        """Place of each row, from its number or its time: (n,)."""
        if self.rows:
            return (rows % self.rows).astype(np.int32)
        assert times is not None
        if not self.period:
            days = times.astype("datetime64[us]").astype("datetime64[D]")
            months = days.astype("datetime64[M]")
            month = months.astype(np.int64) % 12
            return (month * 31 + (days - months).astype(np.int64)).astype(np.int32)
        return ((times + 3 * DAY) % self.period // self.step).astype(np.int32)


def phases(periods: tuple[int, ...], cadence: int | None) -> list[Phase]:
    """Phases worth a look: of the clock where the cadence tells, else of the periods in rows; short ones first."""
    if cadence is None:
        return [Phase(f"place in {period} rows", period, rows=period) for period in periods if period <= 400]
    if cadence == DAY:
        return [Phase("day of the week", 7, WEEK, DAY), Phase("day of the year", 372)]
    if HOUR <= cadence < DAY:
        return [Phase("hour of the day", 24, DAY, HOUR), Phase("hour of the week", 168, WEEK, HOUR)]
    if cadence < HOUR:
        step = max(cadence, MINUTE)
        some = [Phase("ten minutes of the day", 144, DAY, 10 * MINUTE), Phase("hour of the week", 168, WEEK, HOUR)]
        return ([Phase("minute of the hour", HOUR // step, HOUR, step)] if step <= 15 * MINUTE else []) + some
    return [Phase(f"place in {period} rows", period, rows=period) for period in periods if period <= 400]


def periods_of(cadence: int | None) -> tuple[int, ...]:
    """Periods in rows that a cadence suggests: of a day, a week, a year, where they are 2 to 3,000 rows long."""
    if cadence is None:
        return ()
    if 27 * DAY < cadence < 32 * DAY:
        return (12,)
    if 89 * DAY < cadence < 93 * DAY:
        return (4,)
    spans = [span // cadence for span in (HOUR, DAY, WEEK, 365 * DAY) if span % cadence == 0]
    return tuple(span for span in spans if 2 <= span <= 3000)
