"""Which lagged values and which dates an autoregression looks at: the grid of choices for some periods."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache

import numpy as np

from seqmix.models.calendar import Phase
from seqmix.models.laws import Floats

FADING = (1.0, 0.9985, 0.985)
"""How much of the past a row leaves, for each forgetting factor."""


@dataclass(frozen=True)
class Lags:
    """One choice of regressors: lags, dated (bit k: the mean residual in phase k joins), prior."""

    lags: tuple[int, ...]
    walk: bool  # prior mean: 1 on the first lag, else on the seasonal one, else on none
    season: int
    tight: float  # prior deviation of the first lag's coefficient
    fading: int
    dated: int

    def label(self, dates: Sequence[Phase]) -> str:
        text = "lags " + _ranges(self.lags)
        text += "".join(f", {phase.label}" for k, phase in enumerate(dates) if self.dated >> k & 1)
        return text + (f", forgetting {1 - FADING[self.fading]:.2g} a row" if self.fading else "")


def _ranges(lags: tuple[int, ...]) -> str:
    """1-4, 24, 168."""
    parts: list[list[int]] = []
    for lag in lags:
        if parts and parts[-1][1] == lag - 1:
            parts[-1][1] = lag
        else:
            parts.append([lag, lag])
    return ", ".join(f"{a}-{b}" if b > a else f"{a}" for a, b in parts)


@lru_cache(maxsize=64)
def choices(periods: tuple[int, ...], dates: int) -> tuple[Lags, ...]:
    """The grid of regressors for some periods and so many phases."""
    short = [(1,), (1, 2), (1, 2, 3, 4), tuple(range(1, 10))]
    sets = [(lags, 0) for lags in short]
    season = min((period for period in periods if period > 1), default=0)
    if season:
        near = tuple(range(1, min(season, 14) + 1))
        around = tuple(lag for period in periods for lag in (period - 1, period, period + 1) if lag > 2)
        twice = tuple(k * season for k in (2, 3, 4, 5) if k * season <= 60)
        sets += [
            (_union((1, 2), (season, season + 1)), season),
            (_union(near, (season, season + 1)), season),
            (_union((1, 2, 3), around), season),
            (_union(near, around, twice), season),
            (_union(near, around, twice, _year(season, periods)), season),
        ]
    out = []
    for lags, place in dict.fromkeys(sets):
        for walk in (True, False):
            for tight in (0.1, 0.4):
                for fading in range(len(FADING)):
                    for dated in range(1 << dates):
                        out.append(Lags(lags, walk, place, tight, fading, dated))
    return tuple(out)


@lru_cache(maxsize=64)
def priors(grid: tuple[Lags, ...]) -> tuple[Floats, Floats]:
    """Prior means and variances of the coefficients of each choice: constant, lags, dates; (choices, most) each.

    The further back a lag, the tighter its coefficient is held to its mean (Litterman 1986), save at the season.
    """
    most = max(1 + len(choice.lags) + choice.dated.bit_count() for choice in grid)
    means, variances = np.zeros((len(grid), most)), np.zeros((len(grid), most))
    for i, choice in enumerate(grid):
        lags = np.array(choice.lags)
        spread = choice.tight / np.minimum(lags, 4.0 + np.sqrt(lags))
        if choice.season:
            spread = np.where(np.isin(lags, [choice.season, choice.season + 1]), choice.tight, spread)
        size = 1 + len(lags)
        variances[i, 0] = 0.3**2 if choice.walk else 1.0
        variances[i, 1:size] = spread**2
        dated = slice(size, size + choice.dated.bit_count())
        means[i, dated], variances[i, dated] = 0.5, 0.5**2
        leading = 1 if choice.walk else choice.season if choice.season in choice.lags else 0
        if leading:
            means[i, 1 + choice.lags.index(leading)] = 1.0
    return means, variances


def _union(*lags: tuple[int, ...]) -> tuple[int, ...]:
    return tuple(sorted(set().union(*lags)))


def _year(season: int, periods: tuple[int, ...]) -> tuple[int, ...]:
    """Whole seasons nearest to the longest period and one season on either side."""
    far = max(periods) // season * season
    return (far, far + season) if far > 5 * season else ()
