"""Cycle: the state is what it was a period ago. The period is found in the log itself."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from seqmix.models.context import ContextTree
from seqmix.models.history import BEFORE_START, Codes, History, Keys, Past
from seqmix.models.protocol import Floats, Setting, StatesModel

LONGEST = 2048  # rows of a period
FIRST_LOOK = 64  # rows; then again whenever the log has doubled


def find_period(codes: Codes) -> int:
    """The lag at which most rows repeat, of those that stand out from their neighbours; 0 where none does."""
    best, found = 0.0, 0
    rows = len(codes)
    lags = range(1, rows // 2)
    shares = np.array([np.count_nonzero(codes[lag:] == codes[:-lag]) / (rows - lag) for lag in lags])
    for at in range(1, len(shares) - 1):
        out = shares[at] - max(shares[at - 1], shares[at + 1])
        if out > 3.0 / np.sqrt(rows) and shares[at] > best + 0.01:
            best, found = shares[at], at + 1
    return found


class _Period(ContextTree):
    """A context tree over the state a period ago, its neighbours, and the last state."""

    kept = ("period", "rows", "recent")

    def __init__(self, alphabet: int) -> None:
        super().__init__("", self._a_period_ago, alphabet=alphabet, alpha=1 / 10, most=18)
        self.period = 0
        self.rows = 0
        self.recent = np.full(2 * LONGEST, BEFORE_START, dtype=np.int32)

    def _a_period_ago(self, past: Past) -> list[Keys]:
        if not self.period:
            return past.nested(past.lag(1))
        period = np.full(past.size, self.period)
        return past.nested(
            period, past.lag(self.period), past.lag(1), past.lag(self.period + 1), past.lag(max(self.period - 1, 1))
        )

    def learn(
        self, past: Past, codes: Codes, want: npt.NDArray[np.int32], laws: Floats, frozen: bool = False
    ) -> Floats:
        """Rows up to the next look at the period go through together, then the look is taken."""
        if frozen:
            return super().learn(past, codes, want, laws, frozen)
        bits = np.empty(len(codes))
        done = 0
        while done < len(codes):
            look = max(FIRST_LOOK, 1 << self.rows.bit_length())  # the power of two after the rows so far
            stop = min(len(codes), done + look - self.rows)
            keys = np.stack(self._a_period_ago(past), axis=1)[done:stop]
            bits[done:stop] = self._run(keys, codes[done:stop], want[done:stop], laws)
            self.recent = np.concatenate([self.recent, codes[done:stop]])[-2 * LONGEST :]
            self.rows += stop - done
            done = stop
            if self.rows == look:
                self.period = find_period(self.recent[-min(self.rows, 2 * LONGEST) :])
        return bits


class Cycle(StatesModel):
    name = "cycle"
    prior_cost = 5.0
    summary = "what it was a period ago, the period found in the log"
    source = "Krichevsky & Trofimov 1981, at a lag, weighed as a context tree"

    def bank(self, alphabet: int) -> tuple[list[Setting], History]:
        self._period = _Period(alphabet)
        return [self._period], History(LONGEST + 1)

    def setting(self) -> str:
        return f"period {self._period.period} rows" if self._period.period else "no period found"
