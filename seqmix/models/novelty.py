"""The mass of a state never seen: Good's estimate, learned like any other event (Good 1953).

After n rows of which s are of states seen exactly once, the next row is a new state with chance
(s + 1/2) / (n + 1); before the first row, with chance 1. Which new state it is cannot be foretold and costs nothing.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from seqmix.keep import Kept


class Novelty(Kept):
    """Losses and chances of the event "a state never seen"; nothing at all where the alphabet is known."""

    kept = ("rows", "singles", "times_seen")

    def __init__(self, alphabet: int) -> None:
        self._fixed = alphabet > 0
        self.rows = 0
        self.singles = 0
        self.times_seen = np.zeros(1, dtype=np.int8)  # of each state, 2 = twice or more

    def unseen(self) -> float:
        """Chance that the next row is a new state."""
        if self._fixed:
            return 0.0
        return (self.singles + 0.5) / (self.rows + 1.0) if self.rows else 1.0

    def absorb(
        self, codes: npt.NDArray[np.int32], frozen: bool = False
    ) -> tuple[npt.NDArray[np.float64], npt.NDArray[np.float64]]:
        """Loss in bits of "new" or "not new" for each row, and the chance of "new" before it; both (n,)."""
        n = len(codes)
        if self._fixed:
            return np.zeros(n), np.zeros(n)
        if n == 1 and not frozen:
            return self._absorb_one(int(codes[0]))
        there = codes >= 0
        if frozen:
            known = np.isin(codes, np.flatnonzero(self.times_seen))
            return self._losses(there & ~known, there, np.full(n, self.unseen()))
        states = len(self.times_seen)
        more = int(codes.max(initial=-1)) + 1 - states
        if more > 0:
            self.times_seen = np.concatenate([self.times_seen, np.zeros(more, dtype=np.int8)])
        change = np.zeros(n, dtype=np.int64)  # of the number of states seen once
        new = np.zeros(n, dtype=bool)
        for row in np.flatnonzero(there & (self.times_seen[codes] < 2)):
            code = codes[row]
            if self.times_seen[code] < 2:
                self.times_seen[code] += 1
                new[row] = self.times_seen[code] == 1
                change[row] = 1 if new[row] else -1
        rows = self.rows + np.cumsum(there) - there
        singles = self.singles + np.cumsum(change) - change
        chance = np.where(rows > 0, (singles + 0.5) / (rows + 1.0), 1.0)
        self.rows += int(there.sum())
        self.singles += int(change.sum())
        return self._losses(new, there, chance)

    def _absorb_one(self, code: int) -> tuple[npt.NDArray[np.float64], npt.NDArray[np.float64]]:
        """The same for one row, without the cost of arrays."""
        chance = self.unseen()
        if code < 0:
            return np.zeros(1), np.array([chance])
        if code >= len(self.times_seen):
            more = np.zeros(code + 1 - len(self.times_seen), dtype=np.int8)
            self.times_seen = np.concatenate([self.times_seen, more])
        seen = int(self.times_seen[code])
        if seen < 2:
            self.times_seen[code] = seen + 1
            self.singles += -1 if seen else 1
        self.rows += 1
        with np.errstate(divide="ignore"):
            loss = -np.log2(np.array([1.0 - chance if seen else chance]))
        return loss + 0.0, np.array([chance])

    @staticmethod
    def _losses(
        new: npt.NDArray[np.bool_], there: npt.NDArray[np.bool_], chance: npt.NDArray[np.float64]
    ) -> tuple[npt.NDArray[np.float64], npt.NDArray[np.float64]]:
        with np.errstate(divide="ignore"):
            loss = -np.log2(np.where(new, chance, 1.0 - chance))
        return np.where(there, loss + 0.0, 0.0), chance
