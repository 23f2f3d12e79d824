"""Surprise: rows that were improbable under the law that predicted them, joined into events."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np

from seqmix.errors import OptionError, visible
from seqmix.improbable import Alarms, Improbable, of_number, of_state
from seqmix.mixture.mixture import Mixture
from seqmix.mixture.numbers import LIGHT, NumberMixture
from seqmix.models.laws import NumberLaw
from seqmix.models.protocol import Ask, Model
from seqmix.reading import begun, mixture_for
from seqmix.series import Log, Rows, Series

RATE = "1/10000rows"
"""False alarms, unless said otherwise."""

JOINED = 5
"""Rows after a surprising one in which another belongs to the same event."""

_AT_ONCE = 512  # rows whose laws are asked for together
_SECONDS = {"hour": 3600, "day": 86400, "week": 604800}


@dataclass(frozen=True)
class SurpriseRow:
    """One row with a value: loss and expected loss in bits, p-value, and whether it is surprising.

    row: from 1. p_value: mass, under the law before the row, of all that was no likelier than what came; 1 for the
    first number of a log.
    """

    row: int
    time: str | None
    value: str | float
    bits: float
    expected_bits: float
    p_value: float
    surprise: bool

    def record(self) -> dict[str, Any]:
        """JSON-ready."""
        return dict(vars(self))


@dataclass
class Event:
    """Surprising rows at most `JOINED` rows apart.

    start, end: the first and the last of them, from 1; start_time, end_time: theirs. rows: how many. value, p_value:
    of the least probable one. excess_bits: sum over them of loss minus expected loss.
    """

    start: int
    end: int
    start_time: str | None
    end_time: str | None
    rows: int
    value: str | float
    p_value: float
    excess_bits: float

    def record(self) -> dict[str, Any]:
        """JSON-ready."""
        return dict(vars(self))


@dataclass(frozen=True)
class Surprise:
    """rows: read that have a value. rate: false alarms a row that were asked for. surprising: rows. events: of them."""

    rows: int
    rate: float
    surprising: int
    events: list[Event] = field(default_factory=list)


def surprise(
    log: Any,
    *,
    false_alarms: str = RATE,
    models: Sequence[str] | Sequence[Model] | None = None,
    period: int | Sequence[int] | None = None,
    resolution: float | None = None,
    compressor_share: float | None = None,
    state: Any = None,
    on_row: Callable[[SurpriseRow], None] | None = None,
    **reading: Any,
) -> Surprise:
    """The events of a log: rows that their own law held improbable, so rarely that `false_alarms` says how often.

    false_alarms: "1/10000rows", "1/day", "2/week": so many a stretch, of rows that are as the mixture tells; times
    need a log with a cadence. on_row: called for every row with a value. The rest is as for `seqmix.forecast`; rows of
    a state are not looked at again. Raises OptionError, DataError or StateError.
    """
    _parsed(false_alarms)  # what cannot be read is said before the log is
    rows_seen = surprising = 0
    rate = 0.0
    events: list[Event] = []
    with begun(log, state, models, period, resolution, compressor_share, True, **reading) as (source, mixture, _):
        watch: Watch | None = None
        for rows in source.chunks():
            if mixture is None:
                mixture = mixture_for(source, rows, models, period, resolution, compressor_share)
            if watch is None:
                rate = rate_of(false_alarms, source.cadence)
                watch = Watch(mixture, source, rate)
            for row in watch.rows(rows):
                rows_seen += 1
                if row.surprise:
                    surprising += 1
                    join(events, row)
                if on_row is not None:
                    on_row(row)
    return Surprise(rows_seen, rate, surprising, events)


def rate_of(text: str, cadence: int | None) -> float:
    """False alarms a row, of a text like 1/10000rows or 1/day; cadence: microseconds. Raises OptionError."""
    count, many, unit = _parsed(text)
    if unit.startswith("row"):
        rate = count / many
    elif cadence is None:
        raise OptionError(f"'{visible(text)}' needs a log with regular times; give the rate in rows, as 1/10000rows")
    else:
        rate = count * cadence / (many * _SECONDS[unit] * 1e6)
    if not 0.0 < rate < 0.5:
        raise OptionError(f"'{visible(text)}' is {rate:.3g} false alarms a row; it takes more than 0 and less than 0.5")
    return rate


def in_rows(text: str) -> bool:
    """Whether a rate counts rows, not time. Raises OptionError."""
    return _parsed(text)[2].startswith("row")


def _parsed(text: str) -> tuple[float, int, str]:
    """How many, in how many of which unit."""
    match = re.fullmatch(r"(\d+(?:\.\d+)?)/(\d+)? ?(rows?|hour|day|week)", text.strip())
    if match is None or match[2] == "0":
        raise OptionError(f"'{visible(text)}' is no rate of false alarms; say 1/10000rows, 1/hour, 1/day or 1/week")
    return float(match[1]), int(match[2] or 1), match[3]


def join(events: list[Event], row: SurpriseRow) -> None:
    """Add a surprising row to the last event, or as a new one."""
    excess = row.bits - row.expected_bits
    last = events[-1] if events else None
    if last is None or row.row - last.end > JOINED:
        events.append(Event(row.row, row.row, row.time, row.time, 1, row.value, row.p_value, excess))
        return
    last.end, last.end_time, last.rows, last.excess_bits = row.row, row.time, last.rows + 1, last.excess_bits + excess
    if row.p_value < last.p_value:
        last.value, last.p_value = row.value, row.p_value


class Watch:
    """A mixture going along a log, and what it thinks of each row before it learns it."""

    def __init__(self, mixture: Mixture, source: Log | Series, rate: float) -> None:
        """rate: false alarms a row."""
        self._mixture, self._source, self._alarms = mixture, source, Alarms(rate)

    def rows(self, rows: Rows) -> Iterator[SurpriseRow]:
        """Absorbs rows; gives those with a value."""
        some = self._numbers(rows) if isinstance(self._mixture, NumberMixture) else self._states(rows)
        labels = self._source.alphabet.labels
        for t, bits, found in some:
            time = None if rows.times is None else self._source.clock.text(int(rows.times[t]))
            value = labels[rows.codes[t]] if rows.values is None else float(rows.values[t])
            rings = self._alarms.rings(found)
            row = rows.first + t + 1
            yield SurpriseRow(row, time, value, bits, found.expected_bits, found.p_value, rings)

    def _states(self, rows: Rows) -> Iterator[tuple[int, float, Improbable]]:
        for start in range(0, len(rows), _AT_ONCE):
            part = rows[start : start + _AT_ONCE]
            known = self._mixture.seen
            ask = Ask.of(len(part), np.arange(len(part)), max(known, int(part.codes.max()) + 1))
            bits = self._mixture.absorb(part, ask).tolist()
            for t, code in enumerate(part.codes.tolist()):
                if code >= 0:
                    yield start + t, bits[t], of_law(ask.laws[t], code, code >= known)
                    known = max(known, code + 1)

    def _numbers(self, rows: Rows) -> Iterator[tuple[int, float, Improbable]]:
        mixture = self._mixture
        assert isinstance(mixture, NumberMixture)
        for start in range(0, len(rows), _AT_ONCE):
            part = rows[start : start + _AT_ONCE]
            known = mixture.present
            bits, laws = mixture.tell(part)
            for t, law in enumerate(laws):
                if law is not None:
                    yield start + t, float(bits[t]), of_value(mixture, t, law, law.lighter(LIGHT).median, known)
                    known += 1


def of_law(law: np.ndarray, code: int, new: bool) -> Improbable:
    """law (k + 1,): masses of states, of an unseen one last; new: the state that came was not seen before."""
    return of_state(law, len(law) - 1 if new else code)


def of_value(mixture: NumberMixture, t: int, law: NumberLaw, median: float, known: int) -> Improbable:
    """Of row `t` of those absorbed last, under the law before it, when so many values were known.

    The first of a log is not improbable: nothing was known.
    """
    value, width = mixture.latest_cells[:, t].tolist()
    found = of_number(law, value, width, median)
    return found if known else replace(found, p_value=1.0)
