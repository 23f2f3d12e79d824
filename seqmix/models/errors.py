"""A learned law of the errors of any forecast: scales times shapes, weighed apart in each phase of the clock."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from seqmix.keep import Kept
from seqmix.kernels import numbers as kernel
from seqmix.kernels import view
from seqmix.models.laws import LAPLACE, NORMAL, Floats, NumberLaw, log_peak
from seqmix.models.numbers import Cells

SHAPES = np.array([NORMAL, LAPLACE, 4.0])
_PEAKS = np.array([log_peak(shape) for shape in SHAPES.tolist()])
_OCTAVES = np.arange(-16, 25) / 2  # scales from 1/256 to 4,096 of the first guess, two in an octave
_RATE = 0.002  # fixed share, a row, back to equal weights (Herbster & Warmuth 1998)


class ErrorLaw(Kept):
    """Weights (places, scales x shapes) of the parts of a law around a forecast, learned by Bayes with fixed share."""

    kept = ("sizes", "weights")

    def __init__(self, places: int = 1) -> None:
        """places: of the phase that the weights are kept apart for."""
        self._places = places
        self.sizes = np.zeros(0)
        self.weights = np.zeros((0, 0))

    def begin(self, unit: float) -> None:
        """Choose the scales around a first guess, equal weights."""
        self.sizes = unit * np.exp2(_OCTAVES)
        parts = len(self.sizes) * len(SHAPES)
        self.weights = np.full((self._places, parts), 1.0 / parts)

    def learn(
        self, centres: Floats, cells: Cells, places: npt.NDArray[np.int32], before: Floats | None = None
    ) -> Floats:
        """Loss of each row around its forecast, (n,), predicted before it is learned; 0 where there is no value.

        before (n, parts): filled with the weights of the parts before each row.
        """
        bits = np.empty(len(cells))
        told = before is not None
        if before is None:
            before = np.empty((1, self.weights.shape[1]))
        spans = np.ascontiguousarray(cells.spans[0])
        kernel.spread_of_errors(
            view(np.ascontiguousarray(centres)), view(spans), view(cells.usable[0]), True, view(places),
            view(self.sizes), view(SHAPES), view(_PEAKS), _RATE, view(self.weights),
            view(np.empty(self.weights.shape[1])), told, view(before), view(bits),
        )  # fmt: skip
        return bits

    def forms(self) -> tuple[Floats, Floats]:
        """Scale and shape of each part."""
        return np.tile(self.sizes, len(SHAPES)), np.repeat(SHAPES, len(self.sizes))

    def law(self, centre: float, weights: Floats, wider: float = 1.0) -> NumberLaw:
        """The law around a forecast, by weights of the parts; its scales times `wider`."""
        sizes, forms = self.forms()
        return NumberLaw.of(np.full(len(sizes), centre), wider * sizes, forms, weights)
