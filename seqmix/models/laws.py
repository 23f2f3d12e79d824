"""The law of a number: a mixture of standard laws, on the plain or the log scale, and of atoms."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property, lru_cache
from math import inf, lgamma, log, log1p, nan, pi
from typing import Any

import numpy as np
import numpy.typing as npt

from seqmix.kernels import numbers as kernel
from seqmix.kernels import view

Floats = npt.NDArray[np.float64]

NORMAL, LAPLACE, UNIFORM = 0.0, -1.0, -2.0
"""Shapes of a standard law (uniform: on [-1, 1]); any other is the degrees of freedom of Student's t, at least 1."""


_INTERVALS = 96  # of each stretch that a score is integrated over


@lru_cache(maxsize=1024)
def _normal_quantile(level: float) -> float:
    """Quantile of the standard normal law."""
    from statistics import NormalDist  # only where it is needed: start-up time

    return NormalDist().inv_cdf(level)


@lru_cache(maxsize=65536)
def log_peak(shape: float) -> float:
    """Log density of a standard law at its centre."""
    if shape == NORMAL:
        return -0.5 * log(2 * pi)
    if shape in (LAPLACE, UNIFORM):
        return -log(2.0)
    half = shape / 2
    if half > 100:  # the difference of two large numbers, by its series (DLMF 5.11.8)
        return -0.5 * log(2 * pi) - 1 / (8 * half) + 1 / (192 * half**3)
    return lgamma(half + 0.5) - lgamma(half) - 0.5 * log(shape * pi)


def settled(df: Floats, log_scale: bool) -> Floats:
    """Shapes of laws with these degrees of freedom: normal from 20,000 on, where the difference is lost in rounding
    of printed figures, and on the log scale from 60 on, so that a mean exists."""
    return np.where(df >= np.where(log_scale, 60.0, 20000.0), NORMAL, df)


def span(x: float, width: float) -> tuple[float, float, float, float]:
    """Middle and width of the cell of `width` around x, plain and on the log scale.

    There, a cell that reaches to 0 or below is all that lies under its upper edge (width inf); one that has
    nothing above 0 is NaN.
    """
    half = 0.5 * width
    if x > half:
        share = half / x
        return x, width, log(x) + 0.5 * log1p(-share * share), log1p(share) - log1p(-share)
    if x + half > 0:
        return x, width, log(x + half), inf
    return x, width, nan, nan


@dataclass(frozen=True)
class NumberLaw:
    """A mixture of m parts, each a standard law moved and stretched; that of the logarithm where `logs`.

    weights (adding to 1), centres, scales, shapes (m,) floats; logs (m,) bool. A scale of 0 is an atom.
    """

    weights: Floats
    centres: Floats
    scales: Floats
    shapes: Floats
    logs: npt.NDArray[np.bool_]

    @classmethod
    def of(
        cls,
        centres: npt.ArrayLike,
        scales: npt.ArrayLike,
        shapes: npt.ArrayLike = NORMAL,
        weights: npt.ArrayLike | None = None,
        logs: npt.ArrayLike = False,
    ) -> NumberLaw:
        """From arrays or numbers, stretched to the length of `centres`; equal weights unless given."""
        middle = np.atleast_1d(np.asarray(centres, dtype=np.float64))
        m = len(middle)
        heavy = np.full(m, 1.0 / m) if weights is None else np.atleast_1d(np.asarray(weights, dtype=np.float64))

        def stretched(values: npt.ArrayLike, dtype: type) -> npt.NDArray[Any]:
            array: npt.NDArray[Any] = np.ascontiguousarray(values, dtype=dtype)
            return array if array.shape == (m,) else np.full(m, array, dtype=dtype)

        return cls(
            heavy / heavy.sum(),
            middle,
            stretched(scales, np.float64),
            stretched(shapes, np.float64),
            stretched(logs, np.bool_),
        )

    @classmethod
    def combine(cls, weights: Sequence[float] | Floats, laws: Sequence[NumberLaw], light: float = 0.0) -> NumberLaw:
        """The mixture of several laws; `light`: its lightest parts, of so much weight in all, are left out."""
        heavy = np.concatenate([weight * law.weights for weight, law in zip(weights, laws, strict=True)])
        if light:
            order = np.argsort(heavy)
            keep = np.sort(order[np.cumsum(heavy[order]) > light * heavy.sum()])
        else:
            keep = np.flatnonzero(heavy)
        return cls(
            heavy[keep] / heavy[keep].sum(),
            np.concatenate([law.centres for law in laws])[keep],
            np.concatenate([law.scales for law in laws])[keep],
            np.concatenate([law.shapes for law in laws])[keep],
            np.concatenate([law.logs for law in laws])[keep],
        )

    @cached_property
    def _parts(self) -> tuple[memoryview, ...]:
        shapes, which = np.unique(self.shapes, return_inverse=True)
        norms = np.array([log_peak(shape) for shape in shapes.tolist()])[which]
        arrays = (self.weights, self.centres, self.scales, self.shapes, norms, self.logs.astype(np.uint8))
        return tuple(view(np.ascontiguousarray(array)) for array in arrays)

    def cdf(self, x: npt.ArrayLike) -> Floats:
        """P(X <= x) for each x, in the shape of `x`."""
        xs = np.asarray(x, dtype=np.float64)
        flat = np.ascontiguousarray(xs.reshape(-1))
        out = np.empty(len(flat))
        kernel.below(view(flat), *self._parts, view(out))
        return out.reshape(xs.shape)

    def bits(self, x: float, width: float) -> float:
        """Minus log2 of the mass of the cell of `width` centred at x; infinite where there is none."""
        bits = float(kernel.mixed_bits(*span(x, width), *self._parts, view(np.empty(len(self.weights)))))
        return bits if bits < 1e300 else inf

    def quantile(self, level: npt.ArrayLike) -> Floats:
        """The least x with P(X <= x) >= level, for each level in (0, 1), in the shape of `level`."""
        levels = np.asarray(level, dtype=np.float64)
        flat = np.ascontiguousarray(levels.reshape(-1))
        low, high = self._bracket(float(flat.min()), float(flat.max()))
        # a first guess: the normal law of the same middle and spread
        out = self._middle + self.spread * np.array([_normal_quantile(level) for level in flat.tolist()])
        wide = self.scales > 0
        plain, log_scale = (
            float(self.scales.min(initial=1e300, where=wide & side)) for side in (~self.logs, self.logs)
        )
        atoms = np.sort(self.centres[~wide & ~self.logs])
        kernel.quantiles(
            view(flat), view(np.append(atoms, 0.0)), len(atoms), low, high, plain, log_scale, *self._parts, view(out)
        )
        order = np.argsort(flat, kind="stable")
        out[order] = np.maximum.accumulate(out[order])
        return out.reshape(levels.shape)

    @cached_property
    def _middle(self) -> float:
        return float(self.weights @ np.where(self.logs, np.exp(np.minimum(self.centres, 700.0)), self.centres))

    @cached_property
    def spread(self) -> float:
        grown = np.where(self.logs, np.exp(np.minimum(self.centres, 700.0)), 1.0)
        return float(self.weights @ (self.scales * grown))

    def _bracket(self, least: float, most: float) -> tuple[float, float]:
        """Two numbers with all quantiles from `least` to `most` between them."""
        low = high = 0.0
        for side in (-1.0, 1.0):
            reach = 8.0
            while True:
                with np.errstate(over="ignore"):
                    ends = self.centres + side * reach * self.scales
                ends = np.where(self.logs, np.exp(np.clip(ends, -745.0, 709.0)), np.clip(ends, -1e308, 1e308))
                end = float(side * (side * ends).max())
                end += side * (1e-9 * abs(end) + 1e-300)
                below = float(self.cdf(end))
                if reach > 1e300 or (below < least if side < 0 else below >= most):
                    break
                reach *= 4.0
            low, high = (end, high) if side < 0 else (low, end)
        return low, high

    @property
    def median(self) -> float:
        return float(self.quantile(0.5))

    @property
    def mean(self) -> float:
        """The mean; NaN where it does not exist (tails too heavy, or heavy tails of a logarithm)."""
        heavy = (self.shapes > NORMAL) & (self.scales > 0)
        if (heavy & (self.logs | (self.shapes <= 1))).any():
            return nan
        laplace = (self.shapes == LAPLACE) & (self.scales > 0)
        if (laplace & self.logs & (self.scales >= 1)).any():
            return nan
        scales = np.where(self.logs, self.scales, 0.0)
        with np.errstate(over="ignore", divide="ignore", invalid="ignore"):
            grown = np.exp(self.centres + scales**2 / 2)
            grown = np.where(laplace, np.exp(self.centres) / (1 - scales**2), grown)
            even = (self.shapes == UNIFORM) & (scales > 0)
            grown = np.where(even, np.exp(self.centres) * np.sinh(scales) / scales, grown)
        mean = float(self.weights @ np.where(self.logs, grown, self.centres))
        return mean if np.isfinite(mean) else nan

    def times(self, factor: float) -> NumberLaw:
        """The law of the number times `factor` > 0; never over 1e307."""
        with np.errstate(over="ignore"):
            centres = np.where(self.logs, self.centres + log(factor), np.clip(self.centres * factor, -1e307, 1e307))
            scales = np.where(self.logs, self.scales, np.minimum(self.scales * factor, 1e307))
        return NumberLaw(self.weights, centres, scales, self.shapes, self.logs)

    def lighter(self, light: float) -> NumberLaw:
        """The law without its lightest parts, of weight `light` in all."""
        return NumberLaw.combine([1.0], [self], light)

    def eased(self) -> NumberLaw:
        """Nearly the same law, faster: Student t of 60 degrees of freedom or more as normal laws of their variance."""
        near = self.shapes >= 60.0
        df = np.where(near, self.shapes, 60.0)
        scales = np.where(near, self.scales * np.sqrt(df / (df - 2.0)), self.scales)
        return NumberLaw(self.weights, self.centres, scales, np.where(near, NORMAL, self.shapes), self.logs)

    def draw(self, rng: np.random.Generator, count: int) -> Floats:
        """(count,) independent numbers from the law."""
        which = rng.choice(len(self.weights), size=count, p=self.weights / self.weights.sum())
        shapes = self.shapes[which]
        z = rng.standard_normal(count)
        student = shapes > NORMAL
        if student.any():
            z[student] /= np.sqrt(rng.chisquare(shapes[student]) / shapes[student])
        laplace = shapes == LAPLACE
        z[laplace] = rng.laplace(size=int(laplace.sum()))
        even = shapes == UNIFORM
        z[even] = rng.uniform(-1.0, 1.0, size=int(even.sum()))
        x = self.centres[which] + z * self.scales[which]
        with np.errstate(over="ignore"):
            return np.where(self.logs[which], np.exp(x), x)

    def crps(self, x: float) -> float:
        """Continuous ranked probability score at x: the integral of (P(X <= y) - 1[y >= x])^2 over y.

        By Simpson's rule on three stretches: below and above both the median and x, out to where the law holds 1e-8,
        and between the two.
        """
        low, middle, high = self.quantile([1e-8, 0.5, 1 - 1e-8]).tolist()
        total = self._stretch(min(middle, x), min(low, x), True) + self._stretch(max(middle, x), max(high, x), False)
        return total + self._stretch(middle, x, x > middle)

    def _stretch(self, start: float, end: float, below: bool) -> float:
        """Integral of P(X <= y)^2, or of P(X > y)^2, between two numbers; finest near `start`."""
        if start == end:
            return 0.0
        # y goes from start to end as expm1 of an even parameter, so steps are as fine as the law, then ever wider
        growth = min(float(np.log1p(abs(end - start) / max(self.spread, 1e-300))), 600.0) + 1.0
        even = np.linspace(0.0, 1.0, _INTERVALS + 1)
        pace = growth * np.exp(growth * even) / np.expm1(growth)
        mass = self.cdf(start + (end - start) * (np.expm1(growth * even) / np.expm1(growth)))
        heights = pace * (mass if below else 1.0 - mass) ** 2
        simpson = heights[0] + heights[-1] + 4.0 * heights[1:-1:2].sum() + 2.0 * heights[2:-1:2].sum()
        return float(simpson / (3.0 * _INTERVALS) * abs(end - start))


FIRST = NumberLaw.of(0.0, 100.0, 1.0)
"""The law of the first value of a log, for every model: Cauchy, for nothing is known of its size."""
