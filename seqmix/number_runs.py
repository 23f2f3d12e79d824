"""Explanations of numbers that keep their ways: a level and a spread, of the values or of what is left of them.

In every run each explanation is a normal law of unknown mean and variance, with the conjugate normal-gamma prior, of
the row minus something that the rows before it tell: nothing, or a share of the last value, and the profile of a
period; on the scale of the log, or on that of its logarithm.
"""

from __future__ import annotations

from math import lgamma, log, pi

import numpy as np
import numpy.typing as npt

from seqmix.runs import BORNE_OUT, MOST

Floats = npt.NDArray[np.float64]

SHARES = (0.0, 1.0, 0.3, 0.5, 0.65, 0.8, 0.9, 0.95)
"""Shares of the last value that a row may go on from: 0 a constant level, 1 a constant law of the step."""

PACES = (0.05, 0.1, 0.3, 0.6)
"""Paces of means of the rows so far, new ones counting more, that a row may go on from instead."""

COSTS = np.array([0.0, 4.0, *[10.0] * 6, 5.0, 5.0, 10.0, 10.0])
"""Prior cost of each share and pace in bits. Those of 10 are soon at a new level, and so could explain a shift away."""

LONGEST = 1500
"""Rows of the longest period looked at; of those that fit, the two longest are."""

TAILS = 3.0
"""Degrees of freedom of heavy tails."""

PERIODS = 3
"""Periods that teach a profile before it is used; all runs begin anew when it is."""

FIRST = 4
"""Rows with a value that set the prior of the first run."""

MEAN_ROWS = 0.2
"""Rows that the prior mean of a fresh run counts for."""

SHAPE = 4.0
"""Shape of the prior of the precision: a fresh run takes the spread before for as good as eight rows."""

OUTLIERS = 0.01
"""Part of every law that is broad: no row speaks louder than this lets it."""

FAR = 4.0
"""Scales of a law beyond which a row is learned as if it lay there."""

_MEMORY = 20  # periods that a profile remembers
_LN2 = log(2.0)
_HEAVY_RATIO = lgamma((TAILS + 1.0) / 2.0) - lgamma(TAILS / 2.0)


class NumberWays:
    """The explanations of numbers; periods in rows. `cell`, the width of a row's cell, is twice the least spread."""

    def __init__(self, periods: tuple[int, ...] = ()) -> None:
        self._profiles = [Profile(period) for period in sorted(p for p in periods if p <= LONGEST)[-2:]]
        self.borne_out = max([BORNE_OUT, *(profile.period for profile in self._profiles[:1])])
        self._bases = 1 + len(self._profiles)
        part = self._bases * len(COSTS)
        explanations = 3 * part
        self._plain, self._log, self._heavy = (slice(part * i, part * (i + 1)) for i in range(3))
        # Fisher information of a row about the mean and about the scale, that of a normal law 1
        self._mean_told, self._scale_told = np.ones((2, explanations))
        self._mean_told[self._heavy] = (TAILS + 1.0) / (TAILS + 3.0)
        self._scale_told[self._heavy] = TAILS / (TAILS + 3.0)
        self._positive = True
        self._shifts = 0
        self._set_prior()
        self._last: Floats | None = None  # the bases of the last row
        self._seen: list[Floats] = []
        self._target = np.zeros(explanations)
        self._floor = np.zeros(explanations)
        self.cell = 0.0
        self.row = 0
        shape = (MOST, explanations)
        self._count = np.zeros(MOST)
        self._ratio = np.zeros(MOST)  # ln of gamma(a + 1/2) / gamma(a)
        self._mean = np.zeros(shape)
        self._rest = np.zeros(shape)  # b of the gamma law: half the sum of squares about the mean
        self._total = np.zeros((MOST, 2))  # rows of a run, and their sum

    def _set_prior(self) -> None:
        # a log that shifts again and again is one that wanders: what explains that costs less each time
        prior = np.exp2(-np.tile(COSTS / (1.0 + self._shifts), 3 * self._bases))
        self.prior = prior / prior.sum()

    def _look(self, value: float) -> None:
        """Work out what each explanation has to explain of this row."""
        plain = np.array([value] + [value - profile.at(self.row, 0) for profile in self._profiles])
        self._positive &= value > 0
        scaled = np.zeros(self._bases)
        if self._positive:
            logged = log(value)
            scaled[:] = [logged] + [logged - profile.at(self.row, 1) for profile in self._profiles]
        bases = np.concatenate([plain, scaled])
        if self._last is None:
            self._last = bases
            self._means = np.tile(bases[:, None], len(PACES))
        before = np.concatenate([self._last[:, None] * SHARES, self._means], axis=1)
        target = (bases[:, None] - before).reshape(-1)
        self._target = np.concatenate([target, target[self._plain]])
        self._means += (bases[:, None] - self._means) * PACES
        self._floor[:] = self.cell**2 / 4.0
        self._floor[self._log] = (self.cell / value) ** 2 / 4.0 if self._positive else 1.0
        self._last = bases
        self._value = value
        for profile in self._profiles:
            profile.learn(self.row, value, logged if self._positive else 0.0)

    def anew(self) -> bool:
        woken = False
        for profile in self._profiles:
            if not profile.awake and self.row >= PERIODS * profile.period:
                profile.awake = woken = True
        return woken

    def ready(self, value: float) -> bool:
        self._look(value)
        self._seen.append(self._target)
        if len(self._seen) < FIRST:
            return False
        rows = np.array(self._seen[1:])  # the first has nothing to go on from
        self._first = rows.mean(axis=0), np.maximum(rows.var(axis=0), self._floor)
        self._seen = []
        return True

    def begin(self, run: int, running: int) -> None:
        if run == running:
            mean, variance = self._first
            self._mean[run], self._rest[run] = mean, variance * SHAPE * self._scale_told
        else:
            self._mean[run] = self._mean[running]
            self._rest[run] = self._variance(running) * SHAPE * self._scale_told
        self._count[run] = 0.0
        self._ratio[run] = lgamma(SHAPE + 0.5) - lgamma(SHAPE)
        self._total[run] = 0.0
        self._broad = running

    def losses(self, value: float, runs: int) -> Floats:
        self._look(value)
        rows, shape = self._rows_and_shape(runs)
        scale = self._rest[:runs] * (rows + 1.0) / (rows * shape)  # squared
        half = shape.copy()  # of the degrees of freedom
        half[:, self._heavy] = TAILS / 2.0
        ratio = np.broadcast_to(self._ratio[:runs, None], scale.shape).copy()
        ratio[:, self._heavy] = _HEAVY_RATIO
        spread = 2.0 * half * scale
        off = self._target - self._mean[:runs]
        logs = ratio - 0.5 * np.log(pi * spread) - (half + 0.5) * np.log1p(off * off / spread)
        broad = self._broad
        wide = 4.0 * self._variance(broad)
        outlier = 1.0 / (pi * np.sqrt(wide) * (1.0 + (self._target - self._mean[broad]) ** 2 / wide))
        bits = -np.log((1.0 - OUTLIERS) * np.exp(logs) + OUTLIERS * outlier) / _LN2
        if self._positive:
            bits[:, self._log] += log(value) / _LN2
        else:
            bits[:, self._log] = bits[:, self._plain]
        return bits

    def _rows_and_shape(self, runs: int) -> tuple[Floats, Floats]:
        count = self._count[:runs, None]
        return MEAN_ROWS + count * self._mean_told, self._shape(count)

    def _shape(self, count: Floats) -> Floats:
        return (SHAPE + count / 2.0) * self._scale_told

    def _variance(self, run: int) -> Floats:
        variance: Floats = self._rest[run] / self._shape(self._count[run])
        return variance

    def learn(self, runs: int) -> None:
        rows, shape = self._rows_and_shape(runs)
        scale = np.sqrt(self._rest[:runs] * (rows + 1.0) / (rows * shape))
        off = (self._target - self._mean[:runs]) / scale
        far = off[:, self._heavy]
        less = (TAILS + 1.0) / (TAILS + far * far)  # outliers count for less
        np.clip(off, -FAR, FAR, out=off)
        square = off * off
        # a step of Fisher scoring for a Student t law: twice that of EM, which forgets a wrong scale too slowly
        square[:, self._heavy] = less * far * far - 1.0 + self._scale_told[self._heavy]
        off[:, self._heavy] = less * far
        off *= scale
        square *= scale * scale
        self._mean[:runs] += off / (rows + self._mean_told)
        self._rest[:runs] += 0.5 * (square * rows / (rows + 1.0) + self._floor)
        self._ratio[:runs] = np.log(shape[:, 0]) - self._ratio[:runs]
        self._count[:runs] += 1.0
        self._total[:runs] += 1.0, self._value

    def keep(self, which: npt.NDArray[np.intp]) -> None:
        for kept in (self._count, self._ratio, self._mean, self._rest, self._total):
            kept[: len(which)] = kept[which]
        self._shifts += 1
        self._set_prior()

    def level(self, run: int) -> float:
        return float(self._total[run, 1] / self._total[run, 0])


class Profile:
    """What the places of a period are above or below the mean of a period, of the values and of their logarithms."""

    def __init__(self, period: int) -> None:
        self.period = period
        self.awake = False
        self._window = np.full((period, 2), np.nan)
        self._means = np.zeros((period, 2))
        self._counts = np.zeros(period)

    def at(self, row: int, scale: int) -> float:
        return float(self._means[row % self.period, scale]) if self.awake else 0.0

    def learn(self, row: int, value: float, logged: float) -> None:
        place = row % self.period
        self._window[place] = value, logged
        if row >= self.period - 1:
            off = self._window[place] - np.nanmean(self._window, axis=0)
            self._counts[place] = min(self._counts[place] + 1.0, _MEMORY)
            self._means[place] += (off - self._means[place]) / self._counts[place]
