"""Shifts: the rows where a log changed its ways, each with the evidence and the row at which it could be known."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import asdict, dataclass
from math import isfinite
from typing import Any

import numpy as np

from seqmix.errors import OptionError
from seqmix.inputs import opened
from seqmix.mixture.mixture import Mixture
from seqmix.mixture.numbers import HUGE, TINY
from seqmix.models.calendar import periods_of
from seqmix.models.protocol import Model
from seqmix.models.registry import SHARE
from seqmix.number_runs import NumberWays
from seqmix.reading import mixture_for
from seqmix.runs import Found, Runs
from seqmix.series import Log, Rows, Series
from seqmix.series.grid import Grid
from seqmix.state_runs import StateWays

_CLOSE, _WIDE = 8, 64  # rows from one look at the weights to the next: among the first 1,024 rows, and after


@dataclass(frozen=True)
class Shift:
    """A row from which on a log went other ways than before.

    row, time: its first row, numbered from 1, as far as could be told at known_row, known_time: the row that
    settled it. evidence_bits: what explanations begun afresh at that row lost less than those that went on, on
    the rows from there to known_row. odds: of a shift since the last one, to none, after known_row.
    leading_before, leading_after: the heaviest model of the mixture shortly before the row, and after known_row.
    level_before, level_after: mean of the rows since the last shift, and since this one, at known_row; numbers only.
    """

    row: int
    time: str | None
    known_row: int
    known_time: str | None
    evidence_bits: float
    odds: float
    leading_before: str
    leading_after: str
    level_before: float | None
    level_after: float | None


@dataclass(frozen=True)
class Shifts:
    """All shifts of a log. rows: read. odds: that a further shift was there when it ended, to none."""

    shifts: list[Shift]
    rows: int
    odds: float

    def records(self) -> Iterator[dict[str, Any]]:
        """One JSON-ready object a shift."""
        return map(asdict, self.shifts)


def shifts(
    log: Any,
    odds: float = 100.0,
    *,
    models: Sequence[str] | Sequence[Model] | None = None,
    period: int | Sequence[int] | None = None,
    resolution: float | None = None,
    compressor_share: float = SHARE,
    **reading: Any,
) -> Shifts:
    """Where a log changed its ways: rows from which on explanations begun afresh beat those that went on.

    odds: of a shift to none, above 1, at which it is declared. models: whose leading ones are told; they do not
    decide. log, period, resolution, compressor_share, reading: as for `seqmix.forecast`. Raises OptionError or
    DataError.
    """
    if not (isfinite(odds) and odds > 1):
        raise OptionError("odds at which a shift is declared are above 1")
    with opened(log, **reading) as source:
        found: list[Shift] = []
        search: _Search | None = None
        mixture: Mixture | None = None
        rows_read = 0
        for rows in source.chunks():
            if search is None or mixture is None:
                search = _Search(source, odds, period, resolution)
                mixture = mixture_for(source, rows, models, period, resolution, compressor_share)
                leaders = _Leaders(mixture)
            done = 0
            for shift, time in search.absorb(rows):
                known = shift.known + 1 - rows.first
                leaders.absorb(rows[done:known])
                done = known
                found.append(_shift(shift, time, _time(rows, known - 1), leaders, source.clock.text))
            leaders.absorb(rows[done:])
            rows_read += len(rows)
        return Shifts(found, rows_read, search.runs.odds if search else 0.0)


def _shift(found: Found, start: int | None, known: int | None, leaders: _Leaders, text: Callable[[int], str]) -> Shift:
    return Shift(
        row=found.start + 1,
        time=None if start is None else text(start),
        known_row=found.known + 1,
        known_time=None if known is None else text(known),
        evidence_bits=found.evidence_bits,
        odds=found.odds,
        leading_before=leaders.before(found.start),
        leading_after=leaders.now(),
        level_before=found.level_before,
        level_after=found.level_after,
    )


def _time(rows: Rows, place: int) -> int | None:
    return None if rows.times is None else int(rows.times[place])


class _Search:
    """The runs over a log, fed with its rows."""

    def __init__(
        self, source: Log | Series, odds: float, period: int | Sequence[int] | None, resolution: float | None
    ) -> None:
        self._ways: NumberWays | StateWays
        if source.kind == "numbers":
            given = () if period is None else (period,) if isinstance(period, int) else tuple(period)
            self._ways = NumberWays(given or periods_of(source.cadence))
        else:
            self._ways = StateWays(256 if source.kind == "bytes" else 0)
        self.runs = Runs(self._ways, odds)
        self._grid = Grid(resolution)
        self._factor = 0.0  # numbers are seen times this, so that their squares are floats
        self._times: dict[int, int] = {}  # of the rows that runs may have started at

    def absorb(self, rows: Rows) -> Iterator[tuple[Found, int | None]]:
        """Each shift that the rows settle, with the time of its first row."""
        there = rows.codes >= 0
        values = rows.codes
        if isinstance(self._ways, NumberWays):
            assert rows.values is not None
            values = self._grid.snap(np.where(np.abs(rows.values) < TINY, 0.0, rows.values))
            widths, _ = self._grid.cells(values)
            factors = self._factors(values)
            with np.errstate(over="ignore", under="ignore", invalid="ignore"):
                values, widths = values * factors, np.clip(widths * factors, 1 / HUGE, HUGE)
                there = np.abs(values) <= HUGE
        for place in np.flatnonzero(there).tolist():
            row = rows.first + place
            if isinstance(self._ways, NumberWays):
                self._ways.row, self._ways.cell = row, float(widths[place])
            if rows.times is not None:
                self._times[row] = int(rows.times[place])
            found = self.runs.absorb(row, values[place].item())
            if found is not None:
                yield self._in_unit(found), self._times.get(found.start)
        kept = self.runs.starts()
        self._times = {row: time for row, time in self._times.items() if row in kept}

    def _factors(self, values: np.ndarray) -> np.ndarray:
        """What each value is multiplied by: a power of two, fixed by the first value that is not 0."""
        factors = np.ones(len(values))
        sized = np.flatnonzero((values != 0) & ~np.isnan(values))
        first = 0
        if self._factor == 0.0:
            first = int(sized[0]) if len(sized) else len(values)
            if len(sized):
                self._factor = 2.0 ** int(np.clip(-np.frexp(values[first])[1], -1000, 1000))
        factors[first:] = self._factor
        return factors

    def _in_unit(self, found: Found) -> Found:
        if found.level_before is None or found.level_after is None:
            return found
        before, after = (level / (self._factor or 1.0) for level in (found.level_before, found.level_after))
        return Found(found.start, found.known, found.evidence_bits, found.odds, before, after)


class _Leaders:
    """The mixture run along, and which of its models led when: noted every so many rows, at fixed ones."""

    def __init__(self, mixture: Mixture) -> None:
        self._mixture = mixture
        self._changes = [(0, self.now())]  # (rows read, who leads from there on)

    def now(self) -> str:
        return self._mixture.names[int(self._mixture.weights.now().argmax())]

    def before(self, row: int) -> str:
        """Who led at the last look before row number `row`."""
        return next(name for rows, name in reversed(self._changes) if rows <= row)

    def absorb(self, rows: Rows) -> None:
        done = 0
        while done < len(rows):
            step = _CLOSE if self._mixture.rows < 1024 else _WIDE
            stop = min(len(rows), done + step - self._mixture.rows % step)
            self._mixture.absorb(rows[done:stop])
            done = stop
            if self._mixture.rows % step == 0 and self.now() != self._changes[-1][1]:
                self._changes.append((self._mixture.rows, self.now()))
