"""Rhythm: an autoregression with a period that the rows themselves show, where no clock tells of it."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from seqmix.keep import Kept
from seqmix.models.autoregression import Autoregression
from seqmix.models.laws import Floats, NumberLaw
from seqmix.models.numbers import Laws, Telling
from seqmix.models.protocol import Context
from seqmix.models.regressions import fill_gaps
from seqmix.series.rows import Rows

FIRST_LOOK = 64  # rows; then again whenever the log has doubled
_REMEMBERED = 2048  # rows that a period is looked for in, and that a new autoregression is taught
_CLEAR = 0.25  # least autocorrelation of the steps at a period


def find_period(values: Floats) -> int:
    """Rows per repeat by the autocorrelation of the steps between n values without gaps; 0 where none is clear.

    The shortest lag, of 3 to n / 3, that stands out from its neighbours and comes within a fifth of the best.
    """
    steps = np.diff(values)
    n = len(steps)
    steps = steps - steps.mean()
    power = np.abs(np.fft.rfft(steps, 2 * n)) ** 2
    if n < 12 or not power[1:].max() > 0:
        return 0
    lags = np.arange(n // 3 + 2)
    correlation = np.fft.irfft(power)[: n // 3 + 2] * n / (n - lags)
    correlation = correlation / correlation[0]
    inner = correlation[1:-1]
    peaks = np.flatnonzero((inner > correlation[:-2]) & (inner >= correlation[2:])) + 1
    peaks = peaks[(peaks >= 3) & (correlation[peaks] > max(_CLEAR, 3.0 / np.sqrt(n)))]
    if not len(peaks):
        return 0
    return int(peaks[correlation[peaks] >= 0.8 * correlation[peaks].max()][0])


class Rhythm(Telling):
    """Asleep until a period is found that the context does not name; then an `Autoregression` of that period.

    It looks after rows 64, 128, 256, ..., at the last 2,048 of them, and teaches those to the autoregression of a new
    period before that predicts.
    """

    name = "rhythm"
    prior_cost = 5.0
    summary = "an autoregression with a period found in the rows themselves"
    source = "Box & Jenkins 1970 for the autocorrelation; as autoregression"

    kept = ("rows", "period", "values", "widths")

    def __init__(self, context: Context) -> None:
        super().__init__(context)
        self.rows = 0
        self.period = 0
        self.values, self.widths = np.zeros(0), np.zeros(0)  # the last rows
        self._inner: Autoregression | None = None

    def parts(self) -> dict[str, Kept]:
        return {} if self._inner is None else {"inner": self._inner}

    def restore(self, state: dict[str, object]) -> None:
        self._inner = self._of(int(state["period"])) if state["period"] else None  # type: ignore[call-overload]
        super().restore(state)

    def _of(self, period: int) -> Autoregression:
        return Autoregression(Context((period,), None, False))

    def _absorb(self, rows: Rows, laws: Laws | None, frozen: bool) -> Floats:
        bits = np.full(len(rows), np.nan)
        done = 0
        while done < len(rows):
            look = max(FIRST_LOOK, 1 << self.rows.bit_length())
            stop = min(len(rows), done + look - self.rows)
            part = rows[done:stop]
            if self._inner is not None and laws is not None:
                bits[done:stop], told = self._inner.tell(part, frozen)
                laws += told
            elif self._inner is not None:
                bits[done:stop] = self._inner.absorb(part, None, frozen)
            elif laws is not None:
                laws += [None] * len(part)
            assert part.values is not None and part.cells is not None
            self.values = np.concatenate([self.values, part.values])[-_REMEMBERED:]
            self.widths = np.concatenate([self.widths, part.cells])[-_REMEMBERED:]
            self.rows += stop - done
            done = stop
            if self.rows == look and not frozen:
                self._look()
        return bits

    def _look(self) -> None:
        there = (~np.isnan(self.values)).astype(np.uint8)
        first = int(np.argmax(there))
        filled, _ = fill_gaps(np.nan_to_num(self.values[first:]), there[first:], 0.0)
        period = find_period(filled) if there.any() else 0
        if period == self.period or period in self.context.periods:
            return
        self.period = period
        self._inner = self._of(period) if period else None
        if self._inner is not None:
            codes = np.where(np.isnan(self.values), np.int32(-1), np.int32(0))
            self._inner.absorb(Rows(codes, None, 0, self.values, self.widths))

    def predict(self, time: int | None = None) -> NumberLaw | None:
        return None if self._inner is None else self._inner.predict(time)

    def walk(self, steps: int, paths: int, times: Sequence[int | None] | None = None) -> list[NumberLaw] | None:
        return None if self._inner is None else self._inner.walk(steps, paths, times)

    def sample(
        self, steps: int, paths: int, rng: np.random.Generator, times: Sequence[int | None] | None = None
    ) -> Floats:
        assert self._inner is not None, "asleep"
        return self._inner.sample(steps, paths, rng, times)

    def setting(self) -> str:
        return f"period {self.period} rows" if self.period else "no period found"
