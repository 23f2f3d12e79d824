"""Runs: explanations that keep their ways, begun at many rows side by side, to find where a log changed its own.

Bayesian online changepoint detection: Adams & MacKay 2007.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol

import numpy as np
import numpy.typing as npt

Floats = npt.NDArray[np.float64]

MOST = 160
"""Runs kept at a time."""

RECENT = 40
"""Starts so many rows old, or less, are never dropped."""

BORNE_OUT = 5
"""Rows that a fresh run has predicted, at least, before it counts, or a period: what is over sooner is an exception."""

KEPT = 25
"""Rows after which ways are no longer new: too little is known of new ones, so a start k rows after theirs counts
(k / KEPT)^3 as much."""

_LEAST = 1e-60  # weight of an explanation within a run: what was ruled out can come back
_NEW = np.array([-np.inf, *(3.0 * np.log2(np.arange(1, KEPT + 1) / KEPT))])  # of a start after so many rows, in bits


class Ways(Protocol):
    """The explanations of one kind of log: what each of `MOST` runs has learned, an entry a run."""

    prior: Floats  # of each explanation within a run
    borne_out: int  # rows that a fresh run has predicted, at least, before it counts

    def begin(self, run: int, running: int) -> None:
        """Start run `run` afresh, its prior from what `running` has learned; equal numbers: from the first rows."""

    def anew(self) -> bool:
        """Whether the explanations change at this row, so that all runs have to begin anew."""

    def ready(self, value: float) -> bool:
        """Take in one of the first rows; False while they only set the prior."""

    def losses(self, value: float, runs: int) -> Floats:
        """Loss of the row under each explanation of the first `runs` runs, (runs, explanations) in bits, up to a
        constant that is the same for all."""

    def learn(self, runs: int) -> None:
        """Learn the row asked for last."""

    def keep(self, which: npt.NDArray[np.intp]) -> None:
        """Forget all runs but these, which move to the front."""

    def level(self, run: int) -> float | None:
        """Mean of the rows of a run, of numbers."""


@dataclass(frozen=True)
class Found:
    """A shift as `Runs` finds it. start, known: row numbers from 0, of the first row of the new ways and of the one
    that settled it; the rest as in `seqmix.shifting.Shift`."""

    start: int
    known: int
    evidence_bits: float
    odds: float
    level_before: float | None
    level_after: float | None


class Runs:
    """All runs over one log. One is running, since the last shift; each later row starts a fresh one.

    odds: probability that a shift above it is there, to that of none, at which it is declared. The odds of a shift
    now are the mean of 2^gain over all starts since the last one: as many bits as a fresh run lost less than the
    running one on the rows since its start. Starts soon after the last shift count less, and those that were dropped
    as no gain at all.
    """

    def __init__(self, ways: Ways, odds: float) -> None:
        self.ways = ways
        self.threshold = odds
        self.odds = 0.0  # of a further shift, after the rows so far
        self._runs = 0
        self._running = 0
        self._candidates = 0  # rows since the running one began, each the start of a fresh one
        self._rows = np.zeros(MOST, dtype=np.int64)  # row number of each start
        self._age = np.zeros(MOST, dtype=np.int64)  # rows with a value since
        self._bits = np.zeros(MOST)  # lost by each run so far
        self._before = np.zeros((MOST, MOST))  # lost by run j when run i began: [i, j]
        self._weights = np.zeros((MOST, len(ways.prior)))

    def absorb(self, row: int, value: float) -> Found | None:
        """Take in row number `row`, which has a value; the shift that it settles, if it does."""
        if self.ways.anew():
            self._runs = self._running = self._candidates = 0
            self.odds = 0.0
        if not self._runs:
            if self.ways.ready(value):
                self._begin(row)
            return None
        if self._age[self._running]:
            self._begin(row)
        runs = self._runs
        losses = self.ways.losses(value, runs)
        least = losses.min()
        weights = self._weights[:runs] * np.exp2(least - losses)
        sums = weights.sum(axis=1)
        self._bits[:runs] += least - np.log2(sums)
        self._weights[:runs] = np.maximum(weights / sums[:, None], _LEAST)
        self._age[:runs] += 1
        self.ways.learn(runs)
        gains = self._gains()
        ages = self._age[:runs]
        bits = gains + _NEW[np.minimum(self._age[self._running] - ages, KEPT)]
        best = int(bits.argmax())
        borne_out = ages >= self.ways.borne_out
        # a log of bits that no float can hold is a shift all the same
        self.odds = float(np.exp2(np.minimum(bits[borne_out], 1000.0)).sum()) / max(self._candidates, 1)
        settled = borne_out[best] and self.odds >= self.threshold
        return self._shift(best, row, float(gains[best])) if settled else None

    def starts(self) -> set[int]:
        """Row numbers at which the runs kept began."""
        return set(self._rows[: self._runs].tolist())

    def _gains(self) -> Floats:
        runs, running = self._runs, self._running
        return self._bits[running] - self._before[:runs, running] - self._bits[:runs]

    def _begin(self, row: int) -> None:
        run = self._runs
        if run == MOST:
            old = (self._age >= RECENT) & (np.arange(MOST) != self._running)
            run = int(np.where(old, self._gains(), np.inf).argmin())
        else:
            self._runs += 1
        running = self._running if self._runs > 1 else run
        self.ways.begin(run, running)
        # half of the prior on what explains the log now: a shift seldom changes all ways
        self._weights[run] = self.ways.prior
        if run != running:
            self._weights[run] = 0.5 * (self._weights[running] + self.ways.prior)
            self._candidates += 1
        self._rows[run] = row
        self._age[run] = 0
        self._bits[run] = 0.0
        self._before[run] = self._bits
        self._before[:, run] = 0.0

    def _shift(self, best: int, row: int, gain: float) -> Found:
        start = int(self._rows[best])
        found = Found(start, row, gain, self.odds, self.ways.level(self._running), self.ways.level(best))
        later = np.flatnonzero(self._rows[: self._runs] >= start)
        self.ways.keep(later)
        self._runs = len(later)
        for kept in (self._rows, self._age, self._bits, self._weights):
            kept[: len(later)] = kept[later]
        self._before[: len(later), : len(later)] = self._before[np.ix_(later, later)]
        self._running = int(np.flatnonzero(later == best)[0])
        self._candidates = int(self._age[self._running]) - 1
        self.odds = 0.0
        return found
