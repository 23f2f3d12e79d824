"""How improbable a row was under the law that predicted it: the mass of all that was no likelier.

With that p-value, rows of a log that the law tells of truly are at most as improbable as p in a share p of all rows.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from math import ceil

import numpy as np

from seqmix.models.laws import Floats, NumberLaw

_NEAR = 6  # cells each way from a place that stand for themselves
_COARSE, _FINE = 1.6, 1.05  # how much longer each stretch of cells is than the one before, further out
_SMALL = 0.02  # p-values from which on the coarse stretches will do
_SMOOTH = 16.0  # stretches to the narrowest part of a law, at least, where that is many cells wide
_REACH = 1e3  # spreads to either side, beyond the furthest centre
_MOST = 1e22  # cells
_LIGHT = 1e-4, 1e-7  # weight of the parts of a law that are left out: for coarse stretches, for fine ones
_HEAVY, _PARTS, _ROUNDS = 0.01, 8, 3  # stretches of more mass are divided so, so many times at most
_ROUNDED = 1e-12  # masses of cells below are lost in rounding, as differences
_SAME = 1 + 1e-9  # masses that differ by rounding are alike


@dataclass(frozen=True)
class Improbable:
    """What a law says of a row.

    p_value: mass of all outcomes no likelier than the one that came. expected_bits: loss that the law expected.
    levels: (k,) the p-values that there can be, ascending; whole: (k,) bool, whether there is none between this
    level and the one before.
    """

    p_value: float
    expected_bits: float
    levels: Floats
    whole: np.ndarray


def of_state(masses: Floats, code: int) -> Improbable:
    """masses (k,): of every state, and of an unseen one; code: of the one that came."""
    some = np.sort(masses[masses > 0])
    levels = np.cumsum(some)  # one after the other: states that cannot come change no bit
    p = min(float(levels[np.searchsorted(some, masses[code] * _SAME, side="right") - 1]), 1.0)
    expected = float(np.cumsum(-some * np.log2(some))[-1])
    return Improbable(p, max(0.0, expected), levels, np.ones(len(levels), dtype=bool))


def of_number(law: NumberLaw, value: float, width: float, median: float) -> Improbable:
    """Of a value on a grid of `width`: cells around it and around the median one by one, further out in stretches."""
    fine, law = law, law.lighter(_LIGHT[0]).eased()
    middle = float(np.clip(np.rint((median - value) / width), -_MOST, _MOST))
    centres = np.where(law.logs, np.exp(np.minimum(law.centres, 700.0)), law.centres)
    furthest = float(np.abs(np.append(centres, median) - value).max())
    reach = float(np.clip((_REACH * law.spread + furthest) / width, 16.0, _MOST))
    found = _at(law, value, width, middle, reach, _COARSE)
    if found.p_value > _SMALL:
        return found
    return _at(fine.lighter(_LIGHT[1]).eased(), value, width, middle, reach, _FINE)


def _at(law: NumberLaw, value: float, width: float, middle: float, reach: float, growth: float) -> Improbable:
    def below(edges: Floats) -> Floats:
        with np.errstate(over="ignore"):
            return law.cdf(np.clip(value + edges * width, -1e308, 1e308))

    edges = _edges(law, value, width, middle, reach, growth)
    heights = below(edges)
    for _ in range(_ROUNDS):
        more = _inside(edges, np.diff(heights))
        if not len(more):
            break
        edges, first = np.unique(np.concatenate([edges, more]), return_index=True)
        heights = np.concatenate([heights, below(more)])[first]
    masses = np.maximum(np.diff(heights, prepend=0.0, append=1.0), 0.0)
    span = edges[-1] - edges[0]
    cells = np.concatenate([[span], np.diff(edges), [span]])
    each = masses / cells
    came = int(np.searchsorted(edges, 0.0))  # the stretch that is the cell of the value
    if each[came] < _ROUNDED:
        each[came] = 2.0 ** -law.bits(value, width)
    order = np.argsort(each, kind="stable")
    levels = np.cumsum(masses[order])
    p = float(masses @ _no_likelier(each, cells, each[came] * _SAME))
    there = each > 0
    expected = float(-(masses[there] * np.log2(each[there])).sum())
    return Improbable(min(p, 1.0), max(expected, 0.0), levels, cells[order] <= 1.0)


def _edges(law: NumberLaw, value: float, width: float, middle: float, reach: float, growth: float) -> Floats:
    """Edges of the stretches, in cells from the middle of that of the value."""
    near, far = np.split(_ladder(growth), [_NEAR + 1])
    around, gap = near, 1.0  # of the median
    narrow = np.where(law.logs, abs(value), 1.0) * law.scales
    with np.errstate(over="ignore"):
        wide = narrow.min(initial=np.inf, where=narrow > 0) / (_SMOOTH * width * far[0])
    if 1.0 < wide < _MOST:  # all cells are far narrower than any part of the law: that of the value alone counts
        near, around, far = near[:1], near[:0], np.ceil(far * wide)
        gap = far[0] / 2.0
    far = far[: int(np.searchsorted(far, reach)) + 1]
    sides, others = _both_sides(near, far), middle + _both_sides(around, far)
    after = np.searchsorted(sides, others)
    before = np.abs(others - sides[np.maximum(after - 1, 0)])
    apart = np.minimum(before, np.abs(others - sides[np.minimum(after, len(sides) - 1)]))
    return np.unique(np.concatenate([sides, others[apart >= gap]]))


def _both_sides(near: Floats, far: Floats) -> Floats:
    out = np.concatenate([near, far])
    return np.concatenate([-out[::-1], out + 1.0]) - 0.5


@lru_cache(maxsize=2)
def _ladder(growth: float) -> Floats:
    """Cells one by one, then ever further apart, as far as any law reaches."""
    out = [float(cell) for cell in range(_NEAR + 1)]
    while out[-1] < _MOST:
        out.append(float(ceil(out[-1] + (out[-1] - out[-2]) * growth)))
    return np.array(out)


def _inside(edges: Floats, masses: Floats) -> Floats:
    """Edges that divide the stretches of much mass: there may be a peak in one, or a slope."""
    cells = np.diff(edges)
    heavy = np.flatnonzero((masses > _HEAVY) & (cells > 1.0))
    parts = np.arange(1, _PARTS) / _PARTS
    return np.unique(np.rint(edges[heavy, None] + cells[heavy, None] * parts - 0.5) + 0.5)


def _no_likelier(each: Floats, cells: Floats, than: float) -> Floats:
    """Share of the mass of each stretch in cells of mass up to `than`: the mass of a cell moves as an exponential
    from one end of a stretch to the other."""
    ends = np.sqrt(each[1:] * each[:-1])
    low, high = np.append(each[0], ends), np.append(ends, each[-1])
    low, high = np.minimum(low, high), np.maximum(low, high)
    with np.errstate(divide="ignore", invalid="ignore"):
        share = np.clip((than - low) / (high - low), 0.0, 1.0)
    return np.where((cells > 1.0) & (low < high), share, each <= than)


class Alarms:
    """Which rows are surprising at a rate of false alarms, for laws that tell of the log truly.

    Where few outcomes are possible, no p-value may be just as small as the rate: what a row cannot spend of it is
    kept for the next ones, up to ten times the rate.
    """

    def __init__(self, rate: float) -> None:
        """rate: false alarms a row."""
        self.rate = rate
        self.kept = 0.0

    def rings(self, row: Improbable) -> bool:
        budget = min(self.kept + self.rate, 10.0 * self.rate)
        at = int(np.searchsorted(row.levels, budget, side="right"))  # levels within the budget
        if at == len(row.levels):
            spent = budget
        elif row.whole[at]:
            spent = float(row.levels[at - 1]) if at else 0.0
        else:
            spent = budget
        self.kept = budget - spent
        return row.p_value <= budget
