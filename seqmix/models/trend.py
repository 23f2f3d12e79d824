"""Trend and season: a level that wanders, with or without a damped trend and seasonal effects."""

from __future__ import annotations

from functools import lru_cache

import numpy as np
import numpy.typing as npt

from seqmix.kernels import numbers as kernel
from seqmix.kernels import view
from seqmix.models.laws import Floats, NumberLaw, log_peak, settled
from seqmix.models.numbers import Cells, NumberBank
from seqmix.models.protocol import Context

LEVEL_NOISE = (0.0, 0.001, 0.01, 0.03, 0.1, 0.3, 1.0, 3.0)
TREND_NOISE = (0.0, 1e-4, 1e-3, 1e-2, 1e-1)
DAMPING = (1.0, 0.95, 0.85)
SEASON_NOISE = (0.0, 1e-3, 1e-2, 1e-1)
LONGEST = 24  # rows of a period with effects of its own for every place
_VAGUE = 1e4  # prior variance of the level, in units of the observation's
_STEEP = 1.0  # of the trend
_SEASONAL = 100.0  # of each seasonal effect


@lru_cache(maxsize=8)
def _grid(period: int) -> Floats:
    """(settings, 5): damping (0: no trend), and noise of level, trend and season, and the prior cost in bits."""
    rows = []
    for level in LEVEL_NOISE:
        for season in SEASON_NOISE if period else (0.0,):
            rows.append((0.0, level, 0.0, season, 0.0))
            rows += [(damping, level, trend, season, 5.0) for damping in DAMPING for trend in TREND_NOISE]
    return np.array(rows)


class Trend(NumberBank):
    """Dynamic linear models with conjugate variance (West & Harrison 1997), on the plain and the log scale.

    Settings are numbered: all of the grid on the plain scale, then all of it on the log scale. The two of a pair
    share their covariance, so a pair is computed while one of them lives.
    """

    name = "trend"
    prior_cost = 2.0
    summary = "a level that wanders, with or without a damped trend; plain or log scale"
    source = "West & Harrison 1997"

    kept = ("period", "pairs", "mean", "cov", "squares", *NumberBank.kept)

    def __init__(self, context: Context, period: int = 0) -> None:
        self.period = period
        self.pairs = np.arange(len(_grid(period)))  # pairs alive
        super().__init__(context, np.tile(_grid(period)[:, 4], 2))
        dim = 2 + period
        self.mean = np.zeros((2, len(self.pairs), dim))
        self.cov = np.zeros((len(self.pairs), dim, dim))
        self.squares = np.zeros((2, len(self.pairs)))

    @property
    def _damping(self) -> Floats:
        return np.ascontiguousarray(_grid(self.period)[self.pairs, 0])

    @property
    def _noise(self) -> Floats:
        return np.ascontiguousarray(_grid(self.period)[self.pairs, 1:4])

    def _where(self, which: npt.NDArray[np.intp]) -> tuple[npt.NDArray[np.intp], npt.NDArray[np.intp]]:
        """Scale and place among the pairs of living settings."""
        side, pair = np.divmod(self.alive[which], len(_grid(self.period)))
        return side, np.searchsorted(self.pairs, pair)

    def _place(self, row: int) -> int:
        """Where the seasonal effect of a row stands in the state."""
        return 2 + row % self.period if self.period else 0

    def _begin(self, value: float) -> None:
        self.cov[:, 0, 0] = _VAGUE
        self.cov[:, 1, 1] = np.where(self._damping > 0, _STEEP, 0.0)
        if self.period:
            self.cov[:, 2:, 2:] = _SEASONAL * (np.eye(self.period) - 1.0 / self.period)
        self.mean[0, :, 0] = value
        self.mean[1, :, 0] = np.log(value) if value > 0 else 0.0
        self.squares[:] = 1e-300
        # the level is as sure as one row can make it
        here = self._place(self.rows - 1)
        gain = self.cov[:, :, 0] + (self.cov[:, :, here] if self.period else 0.0)
        spread = gain[:, 0] + (gain[:, here] if self.period else 0.0) + 1.0
        self.cov -= gain[:, :, None] * gain[:, None, :] / spread[:, None, None]

    def _size_up(self, least: Floats) -> None:
        self.squares = np.maximum(self.squares, np.maximum(least[:, None] ** 2, 1e-290))

    def _learn(self, cells: Cells) -> tuple[Floats, Floats, Floats, Floats]:
        return self._track(cells, self.mean, self.cov, self.squares)

    def _next(self) -> tuple[Floats, Floats, Floats]:
        nothing = Cells(np.full(1, np.nan), np.ones(1))
        return self._track(nothing, self.mean.copy(), self.cov.copy(), self.squares)[1:]

    def _track(self, cells: Cells, mean: Floats, cov: Floats, squares: Floats) -> tuple[Floats, Floats, Floats, Floats]:
        """What `_learn` gives; learns into `mean`, `cov` and `squares`."""
        n, pairs = len(cells), len(self.pairs)
        seen = self.observed + np.cumsum(cells.usable[0]) - cells.usable[0]
        df = np.maximum(seen - 1.0, 1.0)  # the first value settled the level
        shapes = np.stack([df, settled(df, True)])
        norms = np.array([[log_peak(shape) for shape in line] for line in shapes.tolist()])
        phase = ((self.rows + np.arange(n)) % max(self.period, 1)).astype(np.int32)
        bits, centres, scales = np.empty((3, n, 2 * pairs))
        kernel.track(
            view(cells.seen), view(cells.spans), view(cells.usable), view(phase), view(df), view(shapes), view(norms),
            view(self._damping), self.period > 0, view(self._noise), view(mean), view(cov), view(squares),
            view(np.empty(2 + self.period)), view(centres), view(scales), view(bits),
        )  # fmt: skip
        side, place = self._where(np.arange(len(self.alive)))
        bits, centres, scales = (
            every if len(side) == 2 * pairs else every[:, side * pairs + place] for every in (bits, centres, scales)
        )
        return bits, centres, scales, shapes[side].T

    def _logs(self) -> npt.NDArray[np.bool_]:
        return np.asarray(self.alive >= len(_grid(self.period)))

    def _keep(self, which: npt.NDArray[np.intp]) -> None:
        kept = np.unique(self._where(which)[1])
        self.pairs = self.pairs[kept]
        self.mean = np.ascontiguousarray(self.mean[:, kept])
        self.cov = np.ascontiguousarray(self.cov[kept])
        self.squares = np.ascontiguousarray(self.squares[:, kept])

    def _ahead(self, which: npt.NDArray[np.intp], weights: Floats, steps: int) -> list[NumberLaw]:
        side, place = self._where(which)
        mean, cov = self.mean[side, place].copy(), self.cov[place]
        move, noise = self._move(place), self._step_noise(place)
        df = max(self.observed - 1.0, 1.0)
        variance = self.squares[side, place] / df
        shapes = settled(np.full(len(side), df), side == 1)
        laws = []
        for step in range(steps):
            mean = np.einsum("ijk,ik->ij", move, mean)
            cov = move @ cov @ move.transpose(0, 2, 1) + noise
            here = self._place(self.rows + step)
            centre, spread = mean[:, 0], cov[:, 0, 0] + 1.0
            if self.period:
                centre = centre + mean[:, here]
                spread = spread + 2.0 * cov[:, 0, here] + cov[:, here, here]
            laws.append(NumberLaw.of(centre, np.sqrt(spread * variance), shapes, weights, side == 1))
        return laws

    def _move(self, place: npt.NDArray[np.intp]) -> Floats:
        move = np.tile(np.eye(2 + self.period), (len(place), 1, 1))
        move[:, 0, 1] = move[:, 1, 1] = self._damping[place]
        return move

    def _step_noise(self, place: npt.NDArray[np.intp]) -> Floats:
        noise = np.zeros((len(place), 2 + self.period, 2 + self.period))
        noise[:, [0, 1], [0, 1]] = self._noise[place, :2]
        if self.period:
            even = np.eye(self.period) - 1.0 / self.period
            noise[:, 2:, 2:] = self._noise[place, 2][:, None, None] * even
        return noise

    def _paths(self, at: int, steps: int, paths: int, rng: np.random.Generator) -> Floats:
        side, place = self._where(np.array([at]))
        move, noise = self._move(place)[0], self._step_noise(place)[0]
        variance = self.squares[side[0], place[0]] / rng.chisquare(max(self.observed - 1, 1), size=paths)
        deviation = np.sqrt(variance)[:, None]
        state = self.mean[side[0], place[0]] + deviation * _normal(self.cov[place[0]], paths, rng)
        out = np.empty((paths, steps))
        for step in range(steps):
            state = state @ move.T + deviation * _normal(noise, paths, rng)
            centre = state[:, 0] + (state[:, self._place(self.rows + step)] if self.period else 0.0)
            out[:, step] = centre + deviation[:, 0] * rng.standard_normal(paths)
        return np.exp(np.minimum(out, 700.0)) if side[0] else out

    def _label(self, setting: int) -> str:
        side, pair = divmod(setting, len(_grid(self.period)))
        damping, level, trend, season, _ = _grid(self.period)[pair]
        parts = [f"level noise {level:g}"]
        if damping:
            parts.append(f"trend noise {trend:g}" + (f" damped {damping:g}" if damping < 1 else ""))
        if self.period:
            parts.append(f"season of {self.period}, noise {season:g}")
        return ", ".join(parts) + (", log scale" if side else "")


class Season(Trend):
    """The same with an effect of its own for every place in a period."""

    name = "season"
    prior_cost = 3.0
    summary = "a level, perhaps a trend, and an effect for each place in a period; plain or log scale"
    source = "West & Harrison 1997"

    def __init__(self, context: Context) -> None:
        super().__init__(context, min(period for period in context.periods if 1 < period <= LONGEST))

    @classmethod
    def fits(cls, context: Context) -> bool:
        return any(1 < period <= LONGEST for period in context.periods)


def _normal(cov: Floats, count: int, rng: np.random.Generator) -> Floats:
    """(count, dim) draws of mean 0, for a covariance that may be singular."""
    values, vectors = np.linalg.eigh(cov)
    return rng.standard_normal((count, len(cov))) @ (vectors * np.sqrt(np.maximum(values, 0.0))).T
