"""Clock: the state depends on the minute of the hour, the hour of the day, the day of the week."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from seqmix.models.context import ContextTree
from seqmix.models.history import History, Keys, Past
from seqmix.models.protocol import Setting, StatesModel

MINUTE = 60_000_000  # microseconds
HOUR = 60 * MINUTE
DAY = 24 * HOUR
WEEK = 7 * DAY


def phase(past: Past, period: int, step: int) -> npt.NDArray[np.int64]:
    """Which `step` of the `period` (both in microseconds) each row falls in; weeks start on a Monday."""
    assert past.times is not None
    return (past.times + 3 * DAY) % period // step


def _day(past: Past) -> list[Keys]:
    return past.nested(phase(past, DAY, HOUR), phase(past, DAY, 10 * MINUTE))


def _last_and_day(past: Past) -> list[Keys]:
    return past.nested(past.lag(1), phase(past, DAY, 6 * HOUR), phase(past, DAY, HOUR), phase(past, DAY, 10 * MINUTE))


def _last_and_week(past: Past) -> list[Keys]:
    return past.nested(past.lag(1), phase(past, WEEK, DAY), phase(past, WEEK, HOUR))


def _last_and_hour(past: Past) -> list[Keys]:
    return past.nested(past.lag(1), phase(past, HOUR, 10 * MINUTE), phase(past, HOUR, MINUTE))


class Clock(StatesModel):
    name = "clock"
    kinds = ("states",)
    prior_cost = 4.0
    summary = "time of hour, day and week, with the last state"
    source = "Krichevsky & Trofimov 1981, in phases of the clock, weighed as a context tree"
    needs_times = True

    def bank(self, alphabet: int) -> tuple[list[Setting], History]:
        settings: list[Setting] = [
            ContextTree(label, contexts, alphabet=alphabet, alpha=1 / 10, most=18)
            for label, contexts in (
                ("time of day", _day),
                ("last state, time of day", _last_and_day),
                ("last state, hour of week", _last_and_week),
                ("last state, minute of hour", _last_and_hour),
            )
        ]
        return settings, History(1)
