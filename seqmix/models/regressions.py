"""A bank of Bayesian regressions on lagged values, on one scale: what an autoregression learns and looks ahead with."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from seqmix.keep import Kept
from seqmix.kernels import numbers as kernel
from seqmix.kernels import view
from seqmix.models.calendar import Phase
from seqmix.models.lags import FADING, Lags, priors
from seqmix.models.laws import Floats, log_peak, settled
from seqmix.models.numbers import Cells

_LOOSEST = 25.0  # variance up to which a coefficient may be forgotten, in units of the errors'
WIDE = 3.0
"""Forecasts stay within so many ranges of what was seen: no explosion."""


class Regressions(Kept):
    """The regressions of one scale: settings alive, coefficients, and the values they look back on."""

    kept = ("alive", "means", "covs", "squares", "effects", "middle", "unit", "past", "fill", "low", "high")

    def __init__(self, choices: tuple[Lags, ...], dates: list[Phase], log: bool) -> None:
        self.choices, self.dates, self.log = choices, dates, log
        self.reach = max(max(choice.lags) for choice in choices)
        most = priors(choices)[0].shape[1]
        self.alive = np.arange(len(choices))
        self.means = np.zeros((len(choices), most))
        self.covs = np.zeros((len(choices), most, most))
        self.squares = np.zeros(len(choices))
        places = max((phase.places for phase in dates), default=1)
        self.effects = np.zeros((len(choices), max(len(dates), 1), places, 2))
        self.middle, self.unit = 0.0, 1.0
        self.past = np.zeros(self.reach)  # the last values, in units, gaps filled
        self.fill = 0.0
        self.low = self.high = 0.0  # range of what was seen, in units

    def begin(self, values: Floats, least: float) -> None:
        """Units from the first values."""
        self.middle = float(values.mean())
        self.unit = max(float(values.std()), least)
        self.fill = float((values[0] - self.middle) / self.unit)
        self.past[:] = self.fill
        means, variances = priors(self.choices)
        self.means[:] = means
        at = np.arange(means.shape[1])
        self.covs[:, at, at] = variances
        self.squares[:] = 0.5**2

    def columns(self) -> tuple[npt.NDArray[np.int32], npt.NDArray[np.int32], list[int]]:
        """starts and columns for the kernel, and the lag of each regressor after the constant."""
        lags = sorted({lag for i in self.alive for lag in self.choices[i].lags})
        place = {lag: at + 1 for at, lag in enumerate(lags)}
        lists = [[0, *(place[lag] for lag in self.choices[i].lags)] for i in self.alive]
        starts = np.cumsum([0, *map(len, lists)]).astype(np.int32)
        return starts, np.array([column for one in lists for column in one], dtype=np.int32), lags

    def keep(self, which: npt.NDArray[np.intp]) -> None:
        for name in ("alive", "means", "covs", "squares", "effects"):
            setattr(self, name, np.ascontiguousarray(getattr(self, name)[which]))

    def learn(self, cells: Cells, dates: npt.NDArray[np.int32], df: Floats) -> tuple[Floats, Floats, Floats]:
        """Losses, forecasts and scales, (n, living settings) each, forecasts and scales in units; df (fadings, n)."""
        n, side = len(cells), int(self.log)
        usable = cells.usable[side]
        seen = np.ascontiguousarray((cells.seen[side] - self.middle) / self.unit)
        spans = np.ascontiguousarray((cells.spans[side] - np.array([self.middle, 0.0])) / self.unit)
        filled, self.fill = fill_gaps(seen, usable, self.fill)
        joined = np.concatenate([self.past, filled])
        starts, columns, lags = self.columns()
        rows = np.ones((n, 1 + len(lags)))
        for at, lag in enumerate(lags):
            rows[:, at + 1] = joined[len(self.past) - lag : len(self.past) - lag + n]
        self.past = joined[n:].copy()
        if (usable == 1).any():
            self.low = min(self.low, float(seen[usable == 1].min()))
            self.high = max(self.high, float(seen[usable == 1].max()))
        forecasts, scales, bits = self._run(rows, seen, spans, usable, dates, df, starts, columns)
        return bits, forecasts, scales

    def _run(
        self,
        rows: Floats,
        seen: Floats,
        spans: Floats,
        usable: npt.NDArray[np.uint8],
        dates: npt.NDArray[np.int32],
        df: Floats,
        starts: npt.NDArray[np.int32],
        columns: npt.NDArray[np.int32],
    ) -> tuple[Floats, Floats, Floats]:
        """Forecasts, scales and losses of rows, (n, living settings); learns those that are usable."""
        shapes = settled(df, self.log)
        norms = np.array([[log_peak(shape) for shape in line] for line in shapes.tolist()])
        rate = np.array([self.choices[i].fading for i in self.alive], dtype=np.int32)
        dated = np.array([self.choices[i].dated for i in self.alive], dtype=np.int32)
        forecasts, scales, bits = (np.empty((len(rows), len(self.alive))) for _ in range(3))
        most = self.means.shape[1]
        kernel.regress(
            view(rows), view(seen), view(spans), view(usable), not self.log, view(dates), view(df), view(shapes),
            view(norms), view(rate), view(np.array(FADING)), _LOOSEST, view(starts), view(columns), view(dated),
            view(self.means), view(self.covs), view(self.squares), view(self.effects), view(np.empty(most)),
            view(np.empty(most)),
            view(forecasts), view(scales), view(bits),
        )  # fmt: skip
        return forecasts, scales, bits

    def next(self, dates: npt.NDArray[np.int32], df: Floats) -> tuple[Floats, Floats]:
        """Means and scales of the next row, (1, living settings), in units; dates (phases, 1), df (fadings,)."""
        starts, columns, lags = self.columns()
        rows = np.ones((1, 1 + len(lags)))
        rows[0, 1:] = self.past[len(self.past) - np.array(lags)]
        nothing = np.zeros(1, dtype=np.uint8)
        forecasts, scales, _ = self._run(
            rows, np.zeros(1), np.zeros((1, 2)), nothing, np.ascontiguousarray(dates),
            np.ascontiguousarray(df[:, None]), starts, columns,
        )  # fmt: skip
        return forecasts, scales

    def ahead(
        self, which: npt.NDArray[np.intp], steps: int, dates: npt.NDArray[np.int32], df: Floats
    ) -> tuple[Floats, Floats]:
        """Means and scales (steps, settings) of the next rows in units; dates (phases, steps)."""
        means, scales = np.empty((steps, len(which))), np.empty((steps, len(which)))
        alike: dict[tuple[tuple[int, ...], int], list[int]] = {}
        for column, at in enumerate(which.tolist()):
            choice = self.choices[self.alive[at]]
            alike.setdefault((choice.lags, choice.dated), []).append(column)
        for (lags, dated), columns in alike.items():
            at = which[columns]
            variance = self.squares[at] / df[[self.choices[i].fading for i in self.alive[at]]]
            means[:, columns], scales[:, columns] = self._ahead(at, np.array(lags), dated, steps, dates, variance)
        return means, scales

    def _ahead(
        self,
        at: npt.NDArray[np.intp],
        lags: npt.NDArray[np.intp],
        dated: int,
        steps: int,
        dates: npt.NDArray[np.int32],
        variance: Floats,
    ) -> tuple[Floats, Floats]:
        """The same for settings of one choice of regressors."""
        size = len(lags) + 1 + dated.bit_count()
        span = WIDE * max(self.high - self.low, 1e-6)
        now = len(self.past)
        coefficients, cov = self.means[at, :size], self.covs[at, :size, :size]
        line = np.concatenate([np.tile(self.past, (len(at), 1)), np.zeros((len(at), steps))], axis=1)
        ripple = np.zeros((len(at), steps))  # how much of a shock is left after so many rows
        ripple[:, 0] = 1.0
        doubts = np.zeros((len(at), steps))
        scales = np.empty((steps, len(at)))
        x = np.ones((len(at), size))
        for step in range(steps):
            x[:, 1 : len(lags) + 1] = line[:, now + step - lags]
            if dated:
                x[:, len(lags) + 1 :] = self._dated(at, dated, dates[:, step])
            centre = (x * coefficients).sum(axis=1)
            doubt = np.maximum(np.einsum("ij,ijk,ik->i", x, cov, x), 0.0)
            if step:
                # the law of the next row is as it is; later ones stay within what was seen, and some more
                centre = np.clip(centre, self.low - span, self.high + span)
                back = lags[lags <= step]
                ripple[:, step] = (coefficients[:, 1 : len(back) + 1] * ripple[:, step - back]).sum(axis=1)
            line[:, now + step] = centre
            # shocks are new at each row; what is not known of the coefficients is the same at all of them
            doubts[:, step] = np.sqrt(doubt)
            wrong = (np.abs(ripple[:, : step + 1]) * doubts[:, step::-1]).sum(axis=1)
            with np.errstate(over="ignore"):
                spread = (np.square(ripple[:, : step + 1]).sum(axis=1) + wrong**2) * variance
            scales[step] = np.sqrt(np.minimum(spread, span * span) if step else spread)
        return line[:, now:].T, scales

    def _dated(self, at: npt.NDArray[np.intp], dated: int, dates: npt.NDArray[np.int32]) -> Floats:
        """Mean residuals of settings on a date, (settings, phases of `dated`)."""
        which = [k for k in range(len(self.dates)) if dated >> k & 1]
        total, count = self.effects[at[:, None], which, dates[which]].transpose(2, 0, 1)
        return total / (count + 1.0)

    def paths(
        self, at: int, steps: int, count: int, dates: npt.NDArray[np.int32], df: Floats, rng: np.random.Generator
    ) -> Floats:
        """Joint continuations under one setting, in units, (count, steps): coefficients drawn once a path."""
        choice = self.choices[self.alive[at]]
        lags = np.array(choice.lags)
        size = len(lags) + 1 + choice.dated.bit_count()
        deviation = np.sqrt(self.squares[at] / rng.chisquare(df[choice.fading], size=count))
        values, vectors = np.linalg.eigh(self.covs[at, :size, :size])
        noise = rng.standard_normal((count, size)) @ (vectors * np.sqrt(np.maximum(values, 0.0))).T
        doubt = deviation[:, None] * noise
        out = self._follow(at, steps, self.means[at, :size] + doubt, deviation, dates, rng)
        # coefficients that lead out of all that is known would not have led here: such paths take the mean ones
        wild = (np.abs(out - 0.5 * (self.low + self.high)) > 1.5 * (self.high - self.low)).any(axis=1)
        if wild.any():
            tame = np.tile(self.means[at, :size], (int(wild.sum()), 1))
            out[wild] = self._follow(at, steps, tame, deviation[wild], dates, rng)
        return out

    def _follow(
        self,
        at: int,
        steps: int,
        coefficients: Floats,
        deviation: Floats,
        dates: npt.NDArray[np.int32],
        rng: np.random.Generator,
    ) -> Floats:
        """Paths under given coefficients (count, size) and deviations (count,)."""
        choice = self.choices[self.alive[at]]
        lags, (count, size) = np.array(choice.lags), coefficients.shape
        span = WIDE * max(self.high - self.low, 1e-6)
        line = np.concatenate([np.tile(self.past, (count, 1)), np.zeros((count, steps))], axis=1)
        for step in range(steps):
            now = len(self.past) + step
            x = np.ones((count, size))
            x[:, 1 : len(lags) + 1] = line[:, now - lags]
            if choice.dated:
                x[:, len(lags) + 1 :] = self._dated(np.array([at]), choice.dated, dates[:, step])
            value = (x * coefficients).sum(axis=1) + deviation * rng.standard_normal(count)
            line[:, now] = np.clip(value, self.low - span, self.high + span)
        return line[:, len(self.past) :]


def fill_gaps(seen: Floats, usable: npt.NDArray[np.uint8], last: float) -> tuple[Floats, float]:
    """`seen` with gaps filled by the value before them, and the last value."""
    at = np.maximum.accumulate(np.where(usable == 1, np.arange(len(seen)), -1))
    filled = np.where(at >= 0, seen[at], last)
    return filled, float(filled[-1])
