"""Forecast of a log of numbers: quantiles, thresholds and joint paths of the next rows."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from functools import cached_property
from typing import Any

import numpy as np
import numpy.typing as npt

from seqmix.errors import OptionError
from seqmix.mixture.numbers import NumberMixture
from seqmix.models.laws import Floats, NumberLaw

LEVELS = (0.05, 0.1, 0.25, 0.5, 0.75, 0.9, 0.95)
"""Quantiles given unless others are asked for."""

THRESHOLD_PATHS = 4000
"""Joint paths that "at least once within the horizon" is counted on."""


@dataclass(frozen=True)
class NumberStep:
    """The law of one row ahead, in the unit of the log.

    mean: None where it does not exist. quantiles: by level, "0.05" and so on. above, below: probability that the
    row lies over, or under, each threshold asked for.
    """

    step: int
    time: str | None
    mean: float | None
    median: float
    quantiles: dict[str, float]
    above: dict[str, float] = field(default_factory=dict)
    below: dict[str, float] = field(default_factory=dict)


@dataclass(frozen=True)
class NumberForecast:
    """What comes next in a log of numbers.

    weights: posterior probability of each model, largest first; they add to 1. settings: leading setting of each.
    rows: rows read. drawn: joint continuations when asked for. ever_above, ever_below: probability that a
    threshold is passed at least once within the horizon.
    """

    weights: dict[str, float]
    settings: dict[str, str]
    rows: int
    resolution: float
    times: list[str | None]
    levels: tuple[float, ...]
    thresholds: tuple[tuple[float, ...], tuple[float, ...]]
    laws: list[NumberLaw] = field(repr=False)
    _mixture: NumberMixture = field(repr=False)
    _ahead: list[int] | None = field(repr=False)
    _seed: int = field(repr=False)
    drawn: list[list[float]] | None = field(repr=False)

    @cached_property
    def median(self) -> Floats:
        """(steps,)"""
        return self.quantile(0.5)

    @cached_property
    def mean(self) -> Floats:
        """(steps,); NaN where it does not exist."""
        return np.array([law.mean for law in self.laws])

    def quantile(self, level: float) -> Floats:
        """(steps,) quantiles at a level in (0, 1)."""
        return np.array([float(law.quantile(level)) for law in self.laws])

    def paths(self, count: int) -> Floats:
        """(count, steps) joint continuations, drawn with the seed of the forecast."""
        drawn = self._mixture.sample(len(self.laws), count, np.random.default_rng(self._seed), self._ahead)
        return on_grid(drawn, self.resolution)

    @cached_property
    def _many_paths(self) -> Floats:
        return self.paths(THRESHOLD_PATHS)

    @property
    def ever_above(self) -> dict[str, float]:
        """Share of joint paths that lie over each threshold at least once; no less than any step's own chance."""
        above = {x: [step.above[_name(x)] for step in self.steps] for x in self.thresholds[0]}
        return {_name(x): self._ever(self._many_paths > x, chances) for x, chances in above.items()}

    @property
    def ever_below(self) -> dict[str, float]:
        """The same for under each threshold."""
        below = {x: [step.below[_name(x)] for step in self.steps] for x in self.thresholds[1]}
        return {_name(x): self._ever(self._many_paths < x, chances) for x, chances in below.items()}

    @staticmethod
    def _ever(passed: npt.NDArray[np.bool_], by_step: list[float]) -> float:
        return max(float(passed.any(axis=1).mean()), *by_step)

    def _edge(self, x: float, side: int) -> float:
        """Edge of the first cell whose centre lies beyond x, on the side towards x."""
        points = x / self.resolution * side
        return side * (np.floor(points + 1e-9) + 0.5) * self.resolution

    @cached_property
    def steps(self) -> list[NumberStep]:
        out = []
        for number, (time, law) in enumerate(zip(self.times, self.laws, strict=True), 1):
            values = law.quantile([*self.levels, 0.5]).tolist()
            mean = law.mean
            over = {_name(x): float(1.0 - law.cdf(self._edge(x, 1))) for x in self.thresholds[0]}
            under = {_name(x): float(law.cdf(self._edge(x, -1))) for x in self.thresholds[1]}
            quantiles = dict(zip(map(_name, self.levels), values, strict=False))
            out.append(NumberStep(number, time, None if np.isnan(mean) else mean, values[-1], quantiles, over, under))
        return out

    def records(self) -> Iterator[dict[str, Any]]:
        """One JSON-ready object a step."""
        asked: dict[str, Any] = {}
        if self.thresholds[0]:
            asked["ever_above"] = self.ever_above
        if self.thresholds[1]:
            asked["ever_below"] = self.ever_below
        for step in self.steps:
            record: dict[str, Any] = {
                "step": step.step,
                "time": step.time,
                "mean": step.mean,
                "median": step.median,
                "quantiles": step.quantiles,
            }
            if step.above:
                record["above"] = step.above
            if step.below:
                record["below"] = step.below
            yield {**record, **asked, "weights": self.weights}


def on_grid(values: Floats, resolution: float) -> Floats:
    """Values moved to the nearest points of a grid, with its decimals."""
    decimals = int(np.clip(np.ceil(-np.log10(resolution)) + 3, 0, 300))
    with np.errstate(over="ignore"):
        moved = np.round(np.round(values / resolution) * resolution, decimals)
    return np.where(np.isfinite(moved), moved, values)


def _name(number: float) -> str:
    """A level or threshold as it was given: 0.05, 12, 4.5."""
    return f"{number:.15g}"


def several(number: float | Sequence[float] | None) -> tuple[float, ...]:
    """None, one number or some, as a tuple."""
    if number is None:
        return ()
    return tuple(map(float, np.atleast_1d(np.asarray(number, dtype=np.float64)).tolist()))


def number_forecast(
    mixture: NumberMixture,
    steps: int,
    times: list[str | None],
    ahead: list[int] | None,
    *,
    seed: int,
    paths: int | None,
    quantiles: Sequence[float],
    above: float | Sequence[float] | None,
    below: float | Sequence[float] | None,
) -> NumberForecast:
    """The forecast of a mixture that has read its log. Raises OptionError for levels outside (0, 1)."""
    levels = tuple(map(float, quantiles))
    if not levels or not all(0.0 < level < 1.0 for level in levels):
        raise OptionError("quantiles lie between 0 and 1, both excluded")
    drawn: npt.NDArray[np.float64] | None = None
    if paths is not None:
        drawn = mixture.sample(steps, paths, np.random.default_rng(seed), ahead)
    return NumberForecast(
        weights=mixture.in_force(),
        settings=mixture.settings(),
        rows=mixture.rows,
        resolution=mixture.grid.resolution,
        times=times,
        levels=levels,
        thresholds=(several(above), several(below)),
        laws=mixture.walk(steps, ahead),
        _mixture=mixture,
        _ahead=ahead,
        _seed=seed,
        drawn=None if drawn is None else on_grid(drawn, mixture.grid.resolution).tolist(),
    )
