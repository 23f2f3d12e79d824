"""A broad law for whatever the sharp laws of other models leave over."""

from __future__ import annotations

from math import inf, isnan, nan

import numpy as np

from seqmix.keep import Kept
from seqmix.kernels import numbers as kernel
from seqmix.kernels import view
from seqmix.models.laws import FIRST, Floats, NumberLaw, log_peak

_SHAPE = 2.0  # degrees of freedom: heavy tails, but a mean
_RECENT = 256  # steps that the scale is taken from
_SHAPES, _PEAKS = np.array([_SHAPE]), np.array([log_peak(_SHAPE)])
_WHOLE, _PLAIN = np.ones(1), np.zeros(1, dtype=np.bool_)


class Broad(Kept):
    """A law for whatever the sharp laws leave over: Student's t of 2 degrees of freedom around the last value.

    Its scale is the median of the last 256 steps that were not 0, taken anew whenever `refit` is called.
    """

    kept = ("last", "scale", "steps")

    def __init__(self) -> None:
        self.last = nan
        self.scale = float(FIRST.scales[0])
        self.steps: Floats = np.zeros(0)

    def law(self) -> NumberLaw:
        if isnan(self.last):
            return FIRST
        return NumberLaw(_WHOLE, np.array([self.last]), np.array([self.scale]), _SHAPES, _PLAIN)

    def laws(self, values: Floats) -> list[NumberLaw]:
        """The law before each of the next rows; not taken anew between them."""
        out = []
        law, scale = self.law(), np.array([self.scale])
        for value in values.tolist():
            out.append(law)
            if not isnan(value):
                if law is FIRST:
                    scale = np.array([0.1 * abs(value) or float(FIRST.scales[0])])
                law = NumberLaw(_WHOLE, np.array([value]), scale, _SHAPES, _PLAIN)
        return out

    def absorb(self, values: Floats, widths: Floats) -> Floats:
        """Bits of the cell of each row under the law before it, (n,); of no meaning where a value is missing."""
        if len(values) == 1 and not isnan(self.last):
            return self._absorb_one(values, widths)
        there = np.flatnonzero(~np.isnan(values))
        if not len(there):
            return np.zeros(len(values))
        first = float(values[there[0]])
        began = isnan(self.last)
        if began:
            self.last = float(FIRST.centres[0])
            self.scale = 0.1 * abs(first) or float(FIRST.scales[0])
        held = np.concatenate([[self.last], values[there]])  # what the last value may be
        count = np.cumsum(~np.isnan(values)) - ~np.isnan(values)
        scales = np.where(began & (count == 0), FIRST.scales[0], self.scale)
        bits = np.zeros(len(values))
        middle = np.where(np.isnan(values), 0.0, values)
        shapes = np.where(began & (count == 0), FIRST.shapes[0], _SHAPE)
        kernel.masses(
            view(shapes), view(np.where(shapes == _SHAPE, log_peak(_SHAPE), log_peak(1.0))),
            view(middle), view(np.ascontiguousarray(widths)), view(held[count]), view(scales), view(bits),
        )  # fmt: skip
        with np.errstate(over="ignore"):
            steps = np.abs(np.diff(held[1:] if began else held))
        self.steps = np.concatenate([self.steps, steps[(steps > 0) & np.isfinite(steps)]])[-_RECENT:]
        self.last = float(held[-1])
        return bits

    def _absorb_one(self, values: Floats, widths: Floats) -> Floats:
        """The same for one row, with fewer arrays."""
        bits = np.zeros(1)
        value = float(values[0])
        if not isnan(value):
            kernel.masses(
                view(_SHAPES), view(_PEAKS), view(np.array(values)), view(np.array(widths)),
                view(np.array([self.last])), view(np.array([self.scale])), view(bits),
            )  # fmt: skip
            step = abs(value - self.last)
            if 0.0 < step < inf:
                self.steps = np.append(self.steps, step)[-_RECENT:]
            self.last = value
        return bits

    def refit(self) -> None:
        if len(self.steps):
            self.scale = float(np.median(self.steps))
