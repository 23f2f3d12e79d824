"""Baselines for numbers: simple forecasts, each with a learned law of its errors."""

from __future__ import annotations

import numpy as np

from seqmix.models.errors import ErrorLaw
from seqmix.models.laws import Floats, NumberLaw
from seqmix.models.numbers import FIRST, Cells
from seqmix.series.rows import Rows


class NumberBaseline:
    """One forecast a row, from the values before it: the last one, the one a period ago, or the mean so far."""

    def __init__(self, name: str, period: int = 1) -> None:
        """period: rows back, for the last value 1; 0 for the mean so far."""
        self.name = name
        self._period = period
        self._past: Floats = np.zeros(0)  # values, gaps filled by the value before; for the mean: sum and count
        self._errors = ErrorLaw()

    def absorb(self, rows: Rows) -> Floats:
        """Loss of each row in bits, (n,), 0 where missing."""
        cells = Cells.of(rows)
        bits = np.zeros(len(cells))
        done = 0
        while done < len(cells) and not len(self._errors.sizes):
            done += self._early(cells[done:], bits[done:])
        rest = cells[done:]
        if len(rest):
            bits[done:] = self._errors.learn(self._guesses(rest), rest, np.zeros(len(rest), dtype=np.int32))
        return bits

    def _early(self, cells: Cells, bits: Floats) -> int:
        """One row, by a wide law, until there is an error that tells the scale."""
        if cells.usable[0, 0]:
            value, width = float(cells.values[0]), float(cells.widths[0])
            if len(self._past):
                guess = float(self._guesses(cells[:1])[0])
                bits[0] = NumberLaw.of(guess, 0.1 * abs(guess) or FIRST.scales[0], 1.0).bits(value, width)
                self._errors.begin(max(abs(value - guess), 0.01 * abs(value), width))
            else:
                bits[0] = FIRST.bits(value, width)
                self._past = np.array([value, 1.0] if not self._period else [value])
        return 1

    def _guesses(self, cells: Cells) -> Floats:
        """The forecast of each row, (n,); learns the values."""
        there = cells.usable[0] > 0
        if not self._period:
            sums = np.add.accumulate(np.concatenate([self._past[:1], np.where(there, cells.values, 0.0)]))
            counts = np.add.accumulate(np.concatenate([self._past[1:], there.astype(np.float64)]))
            self._past = np.array([sums[-1], counts[-1]])
            return sums[:-1] / counts[:-1]
        at = np.maximum.accumulate(np.where(there, np.arange(len(cells)), -1))
        filled = np.where(at >= 0, cells.values[at], self._past[-1])
        joined = np.concatenate([self._past, filled])
        back = np.arange(len(self._past), len(joined)) - self._period
        guesses = joined[np.where(back >= 0, back, np.arange(len(self._past), len(joined)) - 1)]
        self._past = joined[-self._period :]
        return guesses


def number_baselines(periods: tuple[int, ...]) -> list[NumberBaseline]:
    """Blank baselines; the value a period ago for the longest of `periods`, where there is one."""
    ago = [NumberBaseline(f"value {max(periods)} rows ago", max(periods))] if periods else []
    return [NumberBaseline("last value", 1), *ago, NumberBaseline("mean so far", 0)]
