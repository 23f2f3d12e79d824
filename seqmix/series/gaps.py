"""Cadence and gaps: a regular log that skips steps of its clock gets missing rows there."""

from __future__ import annotations

from collections.abc import Iterable, Iterator

import numpy as np

from .rows import CHUNK, MISSING, Piece

REGULAR = 0.9
"""The share of steps that must equal the cadence for a log to be regular."""

MAX_FILL = 1_000_000
"""Rows put into one gap at most; a longer gap is left as it is."""


def find_cadence(times: np.ndarray) -> int | None:
    """The step in microseconds that at least 90 % of the steps between `times` equal; None without one."""
    steps, counts = np.unique(np.diff(times), return_counts=True)
    if len(steps) == 0:
        return None
    best = int(counts.argmax())
    return int(steps[best]) if steps[best] > 0 and counts[best] >= REGULAR * counts.sum() else None


class GapFiller:
    """Puts missing rows into the gaps of a log with a cadence.

    A step within 10 % of k cadences, k >= 2, is a gap of k - 1 rows.

    cadence: once `settled`; found from the first `CHUNK` rows. last: time of the last row, None before the first.
    gaps: gaps met so far. filled: rows put in. left: gaps too long to fill. disorder: rows whose time is not
    later than that of the row before; they are kept as they are.
    """

    def __init__(self) -> None:
        self.cadence: int | None = None
        self.settled = False
        self.last: int | None = None
        self.gaps = self.filled = self.left = self.disorder = 0

    def settle(self, cadence: int | None) -> None:
        """Take this cadence instead of looking for one."""
        self.cadence, self.settled = cadence, True

    def fill(self, pieces: Iterable[Piece]) -> Iterator[Piece]:
        """The rows of `pieces` with missing rows put in, `CHUNK` at a time or fewer.

        Where no cadence is settled, the first piece with times has `CHUNK` rows or more, or all of the log.
        """
        for held, times in pieces:
            if times is None or not len(times):
                yield held, times
                continue
            if not self.settled:
                self.settle(find_cadence(times[:CHUNK]))
            before = int(times[0]) - 1 if self.last is None else self.last
            steps = np.diff(times, prepend=before)
            self.disorder += int(np.count_nonzero(steps <= 0))
            self.last = int(times[-1])
            missing = self._missing(steps)
            if missing is None:
                yield held, times
            else:
                yield from self._spread(held, times, missing)

    def notes(self) -> list[str]:
        """What was met, a sentence each."""
        notes = []
        if self.filled:
            notes.append(f"gaps in the clock: {self.gaps - self.left}; missing rows put into them: {self.filled}")
        if self.left:
            notes.append(f"gaps of more than {MAX_FILL} rows, left as they are: {self.left}")
        if self.disorder:
            notes.append(f"rows not later than the row before, kept as they are: {self.disorder}")
        return notes

    def _missing(self, steps: np.ndarray) -> np.ndarray | None:
        """How many rows are missing before each row; None if none."""
        if self.cadence is None or steps.max() < 1.9 * self.cadence:
            return None
        whole = (2 * steps + self.cadence) // (2 * self.cadence)
        gap = (whole >= 2) & (10 * np.abs(steps - whole * self.cadence) <= self.cadence)
        missing = np.where(gap, whole - 1, 0)
        long = missing > MAX_FILL
        missing[long] = 0
        self.gaps += int(gap.sum())
        self.left += int(long.sum())
        self.filled += int(missing.sum())
        return missing if missing.any() else None

    def _spread(self, held: np.ndarray, times: np.ndarray, missing: np.ndarray) -> Iterator[Piece]:
        """The rows at their new places, computed a chunk at a time: one gap can be longer than the log."""
        blank = held.dtype.type(np.nan if held.dtype == np.float64 else MISSING)
        places = np.arange(len(held)) + np.cumsum(missing)
        for start in range(0, int(places[-1]) + 1, CHUNK):
            rows = np.arange(start, min(start + CHUNK, int(places[-1]) + 1))
            following = np.searchsorted(places, rows)
            steps_back = places[following] - rows
            spread = np.where(steps_back == 0, held[following], blank)
            yield spread, times[following] - steps_back * self.cadence
