"""The law of a number: a mixture of standard laws, on the plain or the log scale, and of atoms."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache
from math import lgamma, log, pi

import numpy as np
import numpy.typing as npt

from seqmix.kernels import numbers as kernel
from seqmix.kernels import view

Floats = npt.NDArray[np.float64]

NORMAL, LAPLACE = 0.0, -1.0
"""Shapes of a standard law beside these two: the degrees of freedom of Student's t."""


@lru_cache(maxsize=65536)
def log_peak(shape: float) -> float:
    """Log density of a standard law at its centre."""
    if shape == NORMAL:
        return -0.5 * log(2 * pi)
    if shape == LAPLACE:
        return -log(2.0)
    return lgamma((shape + 1) / 2) - lgamma(shape / 2) - 0.5 * log(shape * pi)


@dataclass(frozen=True)
class NumberLaw:
    """A mixture of m parts, each a standard law moved and stretched, its logarithm taken back where `logs`.

    weights, centres, scales, shapes (m,): floats; logs (m,): bool. A scale of 0 is an atom at the centre: all
    of its mass on one cell. Weights add to 1.
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
        heavy = np.full(m, 1.0 / m) if weights is None else np.asarray(weights, dtype=np.float64)
        return cls(
            heavy / heavy.sum(),
            middle,
            np.broadcast_to(np.asarray(scales, dtype=np.float64), m).copy(),
            np.broadcast_to(np.asarray(shapes, dtype=np.float64), m).copy(),
            np.broadcast_to(np.asarray(logs, dtype=bool), m).copy(),
        )

    @classmethod
    def combine(cls, weights: Sequence[float] | Floats, laws: Sequence[NumberLaw]) -> NumberLaw:
        """The mixture of several laws."""
        return cls(
            np.concatenate([weight * law.weights for weight, law in zip(weights, laws, strict=True)]),
            np.concatenate([law.centres for law in laws]),
            np.concatenate([law.scales for law in laws]),
            np.concatenate([law.shapes for law in laws]),
            np.concatenate([law.logs for law in laws]),
        )

    def _standard(self, x: float) -> Floats:
        """x as seen by each part: its distance from the centre in scales; infinite where there is none."""
        with np.errstate(divide="ignore", invalid="ignore"):
            seen = np.where(self.logs, np.log(x) if x > 0 else -np.inf, x)
            return np.where(
                self.scales > 0, (seen - self.centres) / self.scales, np.where(seen < self._atoms(), -np.inf, np.inf)
            )

    def _atoms(self) -> Floats:
        return np.where(self.logs, np.exp(np.minimum(self.centres, 700.0)), self.centres)

    def cdf(self, x: float) -> float:
        """P(X <= x)."""
        return float(self.weights @ self._tails(self._standard(x)))

    def _tails(self, z: Floats) -> Floats:
        out = np.empty(len(z))
        z = np.clip(z, -1e300, 1e300)
        norms = np.array([log_peak(shape) for shape in self.shapes.tolist()])
        kernel.tails(view(self.shapes), view(norms), view(z), view(out))
        return out

    def bits(self, x: float, width: float) -> float:
        """Minus log2 of the mass of the cell of `width` centred at x."""
        logs = self.logs
        if x <= 0 and logs.all():
            return float("inf")
        seen = np.where(logs, log(x) if x > 0 else 0.0, x)
        widths = np.where(logs, width / x if x > 0 else 1.0, width)
        norms = np.array([log_peak(shape) for shape in self.shapes.tolist()])
        out = np.empty(len(logs))
        kernel.masses(
            view(self.shapes), view(norms), view(seen - self.centres),
            view(np.where(self.scales > 0, self.scales, 1.0)),
            view(widths), view(out),
        )  # fmt: skip
        at = np.abs(x - self._atoms()) < width / 2
        out = np.where(self.scales > 0, out, np.where(at, 0.0, np.inf))
        if x <= 0:
            out = np.where(logs, np.inf, out)
        least = float(out.min())
        return least - float(np.log2(self.weights @ np.exp2(least - out))) if np.isfinite(least) else least
