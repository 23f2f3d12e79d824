"""Bins: which size of step comes next depends on the sizes of the last ones."""

from __future__ import annotations

from collections.abc import Sequence
from math import nan

import numpy as np
import numpy.typing as npt

from seqmix.keep import Kept
from seqmix.models.history import Codes
from seqmix.models.laws import UNIFORM, Floats, NumberLaw
from seqmix.models.novelty import Novelty
from seqmix.models.numbers import Laws, Looking
from seqmix.models.pool import Pool
from seqmix.models.protocol import Ask, Context, StatesModel
from seqmix.series.rows import Rows

MOST = 16
"""Bins; fewer where quantiles coincide."""

_FIRST = 128  # rows before the first bins
_MEMORY = 4096  # steps that bins are cut from, and taught with
_STRAY = 2.0**-10  # mass of the broad law
_REACH = np.array([0, 0.25, 0.5, 0.75, 1, 1.5, 2, 3, 4, 6, 8, 12, 16, 24, 32, 64, 128, 256])
"""Edges of the pieces of an outer bin, in median excesses over its edge."""
_FIRM = 2.0  # steps that the tail 1 / (1 + x) of an outer bin counts for, beside those seen
_LARGE = 1e300  # steps and values beyond are left to other models: the edges of bins might overflow
_SPOTS = 64  # pieces of a law of later steps


class Bins(Looking):
    """The step from the last value, cut into bins, foretold as a log of states by the model `pool`.

    At rows 128, 256, 512, ... bins are cut anew at quantiles of the last 4,096 steps, on edges of cells, and a new
    pool is taught these steps. Within an inner bin the law is uniform; an outer one is a histogram of the excesses
    over its edge, in 17 pieces up to 256 median excesses. With P the pool's law of the bins and B a broad law, the
    mass of a cell is (1 - 2^-10) sum P(bin) (mass of the cell in the bin) + 2^-10 B(cell).
    """

    name = "bins"
    prior_cost = 5.0
    summary = "steps cut into bins, foretold from the bins before as states are"
    source = "Genest & Zidek 1986; Mattern 2012"
    fewest_paths = 4 * _SPOTS

    kept = ("rows", "awake", "last", "width", "steps", "centres", "scales", "shares", "starts", "edges", "codes")

    def __init__(self, context: Context) -> None:
        super().__init__(context)
        self.awake = False
        self.last = nan  # value
        self.width = 0.0  # of the last cell
        self.steps: Floats = np.zeros(0)  # of the last rows, NaN where there is none
        self.edges: Floats = np.zeros(0)  # between bins, as steps
        # pieces: middle and half width as steps, and their share of their bin; the first of each bin
        self.centres: Floats = np.zeros(0)
        self.scales: Floats = np.zeros(0)
        self.shares: Floats = np.zeros(0)
        self.starts = np.zeros(0, dtype=np.intp)
        self.codes = np.zeros(0, dtype=np.int32)  # of the bins, in order of appearance
        self._states = self._first()
        self._novelty = Novelty(0)

    def _first(self) -> StatesModel:
        """What foretells the bins, blank."""
        return Pool()

    def _taught(self, codes: Codes) -> StatesModel:
        """The same, for new bins, taught these codes."""
        pool = Pool()
        pool.absorb(Rows(codes, None, 0))
        return pool

    def parts(self) -> dict[str, Kept]:
        return {"base": self._base, "novelty": self._novelty, "states": self._states}

    def _look(self) -> None:
        if self.rows >= _FIRST:
            self._cut()

    def _cut(self) -> None:
        """Cut new bins, and teach a new pool; asleep if there is one bin only."""
        steps = np.sort(self.steps[np.abs(self.steps) < _LARGE])
        self.awake = len(steps) >= 2 * MOST
        if self.awake:
            wanted = np.arange(1, MOST) / MOST
            near = np.rint(steps[(wanted * len(steps)).astype(np.intp)] / self.width)
            choice = (near + np.array([[-0.5], [0.5]])) * self.width
            shares = np.searchsorted(steps, choice) / len(steps)
            edges = np.unique(choice[np.argmin(np.abs(shares - wanted), axis=0), np.arange(MOST - 1)])
            below = np.searchsorted(steps, edges)
            kept = np.flatnonzero((np.diff(below, prepend=0) > 0) & (below < len(steps)))  # no bin is empty
            self.edges, below = edges[kept], below[kept]
            self.awake = len(self.edges) > 0
        if self.awake:
            self._shape(steps[: below[0]], steps[below[-1] :])
            bins = self._bins(self.steps)
            held = bins[bins >= 0]
            found, first = np.unique(held, return_index=True)
            self.codes = np.empty(len(found), dtype=np.int32)
            self.codes[found[np.argsort(first)]] = np.arange(len(found))
            codes = np.where(bins >= 0, self.codes[bins], -1).astype(np.int32)
            self._states, self._novelty = self._taught(codes), Novelty(0)
            self._novelty.absorb(codes)

    def _shape(self, left: Floats, right: Floats) -> None:
        """Lay out the pieces, from the steps below the first edge and above the last."""
        first, last = self.edges[0], self.edges[-1]
        low, left_shares = self._tail(first - left)
        high, right_shares = self._tail(right - last)
        spots = np.concatenate([(first - low[::-1])[:-1], self.edges, (last + high)[1:]])
        inner = len(self.edges) - 1
        self.centres = (spots[1:] + spots[:-1]) / 2
        self.scales = np.diff(spots) / 2
        self.shares = np.concatenate([left_shares[::-1], np.ones(inner), right_shares])
        self.starts = np.concatenate([[0], len(left_shares) + np.arange(inner + 1)])

    def _tail(self, excess: Floats) -> tuple[Floats, Floats]:
        """Edges of the pieces of an outer bin, and their shares, from the excesses seen over its edge."""
        size = max(float(np.median(excess)), self.width / 2)
        seen, _ = np.histogram(np.minimum(excess / size, 0.999 * _REACH[-1]), _REACH)
        before = -np.diff(1.0 / (1.0 + _REACH))
        return _REACH * size, (seen + _FIRM * before / before.sum()) / (len(excess) + _FIRM)

    def _bins(self, steps: Floats) -> Codes:
        """Bin of each step, -1 where there is none."""
        return np.where(np.isnan(steps), -1, np.searchsorted(self.edges, steps, side="right")).astype(np.int32)

    def _learn(self, rows: Rows, laws: Laws | None, frozen: bool) -> Floats:
        assert rows.values is not None and rows.cells is not None
        values, widths = rows.values, rows.cells
        there = ~np.isnan(values)
        broad = [] if laws is None else self._base.laws(values)
        base = self._base.absorb(values, widths)
        before = np.concatenate([[self.last], values[there]])[np.cumsum(there) - there]
        with np.errstate(over="ignore"):
            steps = values - before
        self.steps = np.concatenate([self.steps, steps])[-_MEMORY:]
        if there.any():
            self.last = float(values[there][-1])
            self.width = float(widths[there][-1])
        if laws is not None and (not self.awake or self._states.sleeps(len(rows))):
            laws += [None] * len(rows)
        if not self.awake:
            return np.full(len(rows), nan)
        bins = self._bins(steps)
        codes = np.where(bins >= 0, self.codes[bins], -1).astype(np.int32)
        if self._states.sleeps(len(rows)):
            self._novelty.absorb(codes, frozen)
            return self._states.absorb(Rows(codes, None, self.rows), None, frozen)
        asleep = np.abs(before) >= _LARGE
        clear = there & ~asleep
        inside = self._inside(np.where(clear, values, 0.0), widths, np.where(clear, before, 0.0))
        at = np.arange(len(rows)), np.maximum(bins, 0)
        own = inside[at]
        inside[at] = 0.0
        # a cell that is cut by an edge wants the whole law
        torn = np.flatnonzero(clear & (inside.sum(axis=1) > 1e-13 * own))
        inside[at] = own
        asked = torn if laws is None else np.arange(len(rows))
        wanted = Ask.of(len(rows), asked, len(self.codes)) if len(asked) else None
        novel, unseen = self._novelty.absorb(codes, frozen)
        pooled = self._states.absorb(Rows(codes, None, self.rows), wanted, frozen) - novel
        with np.errstate(divide="ignore"):
            mass = np.log2(own) - pooled
            if wanted is not None:
                masses = wanted.laws[wanted.want[torn]][:, self.codes] / (1.0 - unseen[torn])[:, None]
                mass[torn] = np.log2((masses * inside[torn]).sum(axis=1))
        if laws is not None and wanted is not None:
            for t, law in enumerate(wanted.laws):
                asleep_here = np.isnan(pooled[t]) or not abs(before[t]) < _LARGE
                laws.append(None if asleep_here else self._law(law[self.codes], before[t], broad[t]))
        mass[np.isnan(pooled)] = -np.inf
        bits = -np.logaddexp2(np.log2(1 - _STRAY) + mass, np.log2(_STRAY) - base)
        return np.where(asleep | np.isnan(pooled), nan, bits)

    def _inside(self, values: Floats, widths: Floats, before: Floats) -> Floats:
        """Mass of each cell within each bin, (n, bins)."""
        middle = before[:, None] + self.centres
        with np.errstate(over="ignore"):
            place = (values[:, None] - middle) / self.scales
            half = 0.5 * widths[:, None] / self.scales
            overlap = np.maximum(np.minimum(place + half, 1.0) - np.maximum(place - half, -1.0), 0.0)
        # a cell that lies wholly in a piece is not got as a difference; far from the bins the mass is 0
        share = np.where(np.abs(place) + half <= 1.0, 2.0 * half, overlap) * (0.5 * self.shares)
        return np.add.reduceat(share, self.starts, axis=1)

    def predict(self, time: int | None = None) -> NumberLaw | None:
        law = self._states.predict() if self._sees() else None
        if law is None:
            return None
        return self._law(law.masses[self.codes], self.last, self._base.law())

    def _law(self, masses: Floats, last: float, base: NumberLaw) -> NumberLaw:
        """Law of the row after the value `last`, from masses of the bins."""
        owner = np.searchsorted(self.starts, np.arange(len(self.centres)), side="right") - 1
        return NumberLaw.of(
            np.append(last + self.centres, base.centres),
            np.append(self.scales, base.scales),
            np.append(np.full(len(self.scales), UNIFORM), base.shapes),
            np.append((1 - _STRAY) * (masses / masses.sum())[owner] * self.shares, _STRAY),
        )

    def walk(self, steps: int, paths: int, times: Sequence[int | None] | None = None) -> list[NumberLaw] | None:
        """The first law is exact; later ones are even between 65 quantiles of `paths` sampled continuations."""
        first = self.predict()
        if first is None:
            return None
        base = self._base.law()
        laws = [first]
        if steps > 1:
            drawn = self.sample(steps, max(paths, self.fewest_paths), np.random.default_rng(0))[:, 1:]
            for spots in np.quantile(drawn, np.linspace(0.0, 1.0, _SPOTS + 1), axis=0).T:
                laws.append(
                    NumberLaw.of(
                        np.append((spots[1:] + spots[:-1]) / 2, base.centres),
                        np.append(np.diff(spots) / 2, base.scales),
                        np.append(np.full(_SPOTS, UNIFORM), base.shapes),
                        np.append(np.full(_SPOTS, (1 - _STRAY) / _SPOTS), _STRAY),
                    )
                )
        return laws

    def sample(
        self, steps: int, paths: int, rng: np.random.Generator, times: Sequence[int | None] | None = None
    ) -> Floats:
        """Bins from the pool, as it stands, and a step from each; the broad law only while asleep."""
        if not self._sees():
            return self._base.law().draw(rng, paths * steps).reshape(paths, steps)
        codes = self._states.sample(steps, paths, rng, times)
        bins: npt.NDArray[np.intp] = np.argsort(self.codes)[codes % len(self.codes)]
        # the pieces of all bins end to end, each bin one long
        ends = np.cumsum(self.shares)
        piece = np.minimum(np.searchsorted(ends, bins + rng.random((paths, steps))), len(ends) - 1)
        moves = self.centres[piece] + self.scales[piece] * rng.uniform(-1.0, 1.0, (paths, steps))
        return np.asarray(self.last + np.cumsum(moves, axis=1))

    def _sees(self) -> bool:
        """Whether the next row is foretold."""
        return self.awake and abs(self.last) < _LARGE

    def setting(self) -> str:
        return f"{len(self.codes)} bins" if self.awake else ""
