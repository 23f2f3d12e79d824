"""Counts: small whole numbers that come at a rate, and a rate that drifts."""

from __future__ import annotations

from collections.abc import Sequence
from functools import partial
from math import ceil, inf, nan

import numpy as np
import numpy.typing as npt

from seqmix.keep import Kept
from seqmix.mixture.weights import Weights
from seqmix.models.calendar import phases
from seqmix.models.laws import Floats, NumberLaw
from seqmix.models.numbers import Laws, Looking, wanted
from seqmix.models.protocol import Context, split
from seqmix.series.rows import Rows

DISCOUNTS = (1.0, 0.99, 0.97, 0.9, 0.8)
LARGEST = 1000.0
"""Mean of the counts above which the model sleeps: a law of atoms would be long, and a normal one as good."""

_STRAY = 2.0**-13  # mass of the broad law in every setting
_SMOOTH = 2.0  # visits of an even rate that each place of a period starts with
_FAR = 30.0  # bits behind the leading setting at which others are dropped
_LEAST = 1e-26  # mass under which atoms are left out
_LONGEST = 1 << 17  # atoms in a law


class Counts(Looking):
    """Gamma-Poisson with discount (Harvey & Fernandes 1989).

    The rate has a gamma law of shape a and size b. Time passing takes both down to d a and d b (never a below
    1/2: the mean stays); the next count y is then negative binomial,
    P(y) = G(a + y) / (G(a) y!) (b / (1 + b))^a (1 / (1 + b))^y, and makes them a + y and b + 1.
    Settings: discounts d from 1 to 0.8, each with one rate; a rate for each place in a period; one rate times the
    share of the place. 2^-13 of every law goes to a broad one. The model is awake from row 1, 2, 4, 8, ... to the next
    of them where the grid is 1 wide, no value was negative, and their mean is at most 1,000.
    """

    name = "counts"
    prior_cost = 5.0
    summary = "whole numbers at a rate that drifts, alone or with the place in a period"
    source = "Harvey & Fernandes 1989"

    kept = ("rows", "awake", "width", "negative", "total", "observed", "alive")

    def __init__(self, context: Context) -> None:
        super().__init__(context)
        self.phases = [phase for phase in phases(context.periods, context.cadence) if phase.rows or context.timed][:2]
        # (discount, phase or -1, whether the rate is shared by all places)
        self.settings = [(discount, -1, True) for discount in DISCOUNTS]
        for i in range(len(self.phases)):
            self.settings += [(discount, i, shared) for shared in (False, True) for discount in DISCOUNTS]
        self.awake = False
        self.width = 0.0  # of the last cell
        self.negative = False
        self.total = 0.0  # of the counts so far
        self.observed = 0
        self.alive = np.arange(len(self.settings))
        self._rates = [_Rate(self._places(i)) for i in range(len(self.settings))]
        self._shares = [_Shares(phase.places) for phase in self.phases]
        self._weights = Weights([0.0 if i < 0 else 1.0 for _, i, _ in self.settings], rates=(0.002,))

    def _places(self, setting: int) -> int:
        _, phase, shared = self.settings[setting]
        return 1 if shared else self.phases[phase].places

    def parts(self) -> dict[str, Kept]:
        own: dict[str, Kept] = {"base": self._base, "weights": self._weights}
        own.update({f"rate{i}": self._rates[i] for i in self.alive.tolist()})
        return own | {f"share{i}": share for i, share in enumerate(self._shares)}

    def _look(self) -> None:
        fits = self.observed > 0 and self.width == 1.0 and not self.negative
        awake = fits and self.total <= LARGEST * self.observed
        if awake and not self.awake:
            for i in self.alive.tolist():
                self._rates[i].forget()
            for share in self._shares:
                share.forget()
        self.awake = awake
        weights = self._weights.now()
        which = np.flatnonzero(weights >= weights.max() * 2.0**-_FAR)
        if len(which) < len(weights):
            self._weights.keep(which)
            self.alive = self.alive[which]

    def _learn(self, rows: Rows, laws: Laws | None, frozen: bool) -> Floats:
        assert rows.values is not None and rows.cells is not None
        values, widths, n = rows.values, rows.cells, len(rows)
        there = ~np.isnan(values)
        broad = [] if laws is None else self._base.laws(values)
        base = self._base.absorb(values, widths)
        with np.errstate(invalid="ignore"):
            count = np.where((values >= 0) & (values <= 2**31) & (values == np.floor(values)), values, -1.0)
        taken = np.where(count >= 0, count, 0.0)
        means = self.total + np.cumsum(taken) - taken + 0.5  # exact: whole numbers and a half
        means /= np.maximum(self.observed + np.cumsum(count >= 0) - (count >= 0), 1)
        self.total += float(taken.sum())
        self.observed += int((count >= 0).sum())
        self.negative |= bool((values < 0).any())
        at = np.flatnonzero(there)
        before = np.concatenate([[self.width], widths[at]])[np.cumsum(there) - there]
        if len(at):
            self.width = float(widths[at[-1]])
        if not self.awake:
            if laws is not None:
                laws += [None] * n
            return np.full(n, nan)
        a, b = self._follow(np.arange(self.rows, self.rows + n), rows.times, count, means)
        losses = self._losses(a, b, np.where(there, values, 0.0), widths, base)
        losses[~there | (before != 1.0)] = nan
        bits, weights = self._weights.mix(losses, wanted(n, laws), frozen)
        if laws is not None:
            for t, heavy in enumerate(weights):
                laws.append(partial(self._law, heavy, a[t], b[t], broad[t]) if before[t] == 1.0 else None)
        return bits

    def _follow(
        self,
        rows: npt.NDArray[np.int64],
        times: npt.NDArray[np.int64] | None,
        counts: Floats,
        means: Floats,
    ) -> tuple[Floats, Floats]:
        """Shape and size of the rate before each row, under each living setting, (n, settings); counts -1: none."""
        seen, even = counts.tolist(), means.tolist()
        places = [phase.of(rows, times).tolist() for phase in self.phases]
        shares = [share.follow(place, seen, even) for share, place in zip(self._shares, places, strict=True)]
        a, b = np.empty((2, len(rows), len(self.alive)))
        for column, i in enumerate(self.alive.tolist()):
            discount, phase, shared = self.settings[i]
            place = [0] * len(rows) if shared else places[phase]
            share = shares[phase] if shared and phase >= 0 else [1.0] * len(rows)
            a[:, column], b[:, column] = self._rates[i].follow(discount, place, share, seen, even)
        return a, b

    def _losses(self, a: Floats, b: Floats, values: Floats, widths: Floats, base: Floats) -> Floats:
        """Bits of each cell under each setting: of the counts in [low, high), and of the broad law."""
        first = np.ceil(values - 0.5 * widths)
        last = np.ceil(values + 0.5 * widths)
        inside = log_mass(a, b, np.maximum(first, 0.0)[:, None]) / np.log(2.0)
        inside[(first < 0) | (first >= last)] = -inf
        for row in np.flatnonzero(last - first > 1):  # the grid has just become coarser
            some = np.arange(*np.clip([first[row], last[row]], 0.0, _LONGEST))
            with np.errstate(divide="ignore"):
                inside[row] = np.log2(np.exp(log_mass(a[row], b[row], some[:, None])).sum(axis=0))
        return np.asarray(-np.logaddexp2(inside + np.log2(1 - _STRAY), (np.log2(_STRAY) - base)[:, None]))

    def _law(self, weights: Floats, a: Floats, b: Floats, base: NumberLaw) -> NumberLaw:
        """Atoms as far as they weigh anything, and the broad law; weights, a, b (settings,)."""
        # settings that say the same are one: all rates that nothing is known of yet
        alike: dict[tuple[float, float], float] = {}
        for shape, size, weight in zip(a.tolist(), b.tolist(), weights.tolist(), strict=True):
            alike[shape, size] = alike.get((shape, size), 0.0) + weight
        (a, b), heavy = np.array(list(alike)).T, np.array(list(alike.values()))
        most = 64 + ceil(float((a / b).max()))
        log_next = -a * np.log1p(1.0 / b)  # of the mass of the next count, under each setting
        parts: list[Floats] = []
        done = 0
        while done < _LONGEST and len(a):
            counts = np.arange(done, min(most, _LONGEST), dtype=np.float64)[:, None]
            ratios = np.log((a + counts) / ((1.0 + counts) * (1.0 + b)))  # of each mass to the one before
            logs = np.cumsum(np.concatenate([log_next[None, :], ratios]), axis=0)
            parts.append(np.exp(logs[:-1]) @ heavy * (1 - _STRAY))
            going = heavy * np.exp(logs[-1]) >= _LEAST / len(weights)
            a, b, heavy, log_next = a[going], b[going], heavy[going], logs[-1, going]
            done, most = most, 2 * most
        masses = np.concatenate(parts)
        some = np.flatnonzero(masses >= _LEAST)
        return NumberLaw.of(
            np.append(some.astype(np.float64), base.centres),
            np.append(np.zeros(len(some)), base.scales),
            np.append(np.zeros(len(some)), base.shapes),
            np.append(masses[some], _STRAY if done < _LONGEST else 1.0 - masses.sum()),
        )

    def _ahead(self, steps: int, times: Sequence[int | None] | None) -> tuple[Floats, Floats]:
        """Shape and size of the rate at the next steps if no count is seen, (steps, settings)."""
        held = self.state()
        means = np.full(steps, (self.total + 0.5) / max(self.observed, 1))
        a, b = self._follow(np.arange(self.rows, self.rows + steps), _when(times), np.full(steps, -1.0), means)
        self.restore(held)
        return a, b

    def predict(self, time: int | None = None) -> NumberLaw | None:
        laws = self.walk(1, 0, None if time is None else [time])
        return laws[0] if laws else None

    def walk(self, steps: int, paths: int, times: Sequence[int | None] | None = None) -> list[NumberLaw] | None:
        if not self.awake or self.width != 1.0:
            return None
        weights, base = self._weights.now(), self._base.law()
        return [self._law(weights, a, b, base) for a, b in zip(*self._ahead(steps, times), strict=True)]

    def sample(
        self, steps: int, paths: int, rng: np.random.Generator, times: Sequence[int | None] | None = None
    ) -> Floats:
        """Each path has a setting and a rate, which grows with the counts along it; asleep: the broad law."""
        out = self._base.law().draw(rng, paths * steps).reshape(paths, steps)
        if not self.awake or self.width != 1.0:
            return out
        done = 0
        for column, share in enumerate(split(self._weights.now(), paths, rng).tolist()):
            if share:
                out[done : done + share] = self._paths(column, steps, share, rng, times)
                done += share
        return out

    def _paths(
        self, column: int, steps: int, paths: int, rng: np.random.Generator, times: Sequence[int | None] | None
    ) -> Floats:
        """Counts under one living setting, which goes on learning from them."""
        setting = int(self.alive[column])
        discount, phase, shared = self.settings[setting]
        place, share = np.zeros(steps, dtype=np.int32), np.ones(steps)
        mean = (self.total + 0.5) / max(self.observed, 1)
        if phase >= 0:
            places = self.phases[phase].of(np.arange(self.rows, self.rows + steps), _when(times))
            if shared:
                share = np.array(self._shares[phase].now(mean))[places]
            else:
                place = places
        return self._rates[setting].draw(discount, place, share, mean, paths, rng)

    def setting(self) -> str:
        discount, phase, shared = self.settings[int(self.alive[int(np.argmax(self._weights.now()))])]
        rate = "one rate" if phase < 0 else f"rate of the {self.phases[phase].label}"
        if phase >= 0 and shared:
            rate = f"one rate, share of the {self.phases[phase].label}"
        return f"{rate}, discount {discount:g}"


class _Rate(Kept):
    """Gamma laws of rates, one for each place in a period: shape and size, 0 where nothing is known yet."""

    kept = ("shape", "size")

    def __init__(self, places: int) -> None:
        self.shape: Floats = np.zeros(places)
        self.size: Floats = np.zeros(places)

    def forget(self) -> None:
        self.shape[:] = self.size[:] = 0.0

    def follow(
        self,
        discount: float,
        places: Sequence[int],
        shares: Sequence[float],
        counts: Sequence[float],
        means: Sequence[float],
    ) -> tuple[list[float], list[float]]:
        """Shape and size, in units of the share, before each row; a count of -1 is a missing row.

        A rate met for the first time has shape 1/2 and the mean of all counts so far.
        """
        shape, size = self.shape.tolist(), self.size.tolist()
        most = 1.0 / (1.0 - discount) if discount < 1.0 else inf  # as much as the discount lets it know
        shapes, sizes = [], []
        for place, share, count, mean in zip(places, shares, counts, means, strict=True):
            a, b = shape[place], size[place]
            if a == 0.0:
                a, b = 0.5, 0.5 / mean
            elif a * discount >= 0.5:
                a *= discount
                b *= discount
            else:
                b *= 0.5 / a
                a = 0.5
            shapes.append(a)
            sizes.append(b / share)
            if count >= 0.0:
                a += count
                b = min(b + share, most)
            shape[place], size[place] = a, b
        self.shape, self.size = np.array(shape), np.array(size)
        return shapes, sizes

    def draw(
        self,
        discount: float,
        places: npt.NDArray[np.int32],
        shares: Floats,
        mean: float,
        paths: int,
        rng: np.random.Generator,
    ) -> Floats:
        """Joint counts of the next rows, (paths, rows), learned along each path as `follow` does."""
        shape, size = np.tile(self.shape, (paths, 1)), np.tile(self.size, (paths, 1))
        most = 1.0 / (1.0 - discount) if discount < 1.0 else inf
        out = np.empty((paths, len(places)))
        for step, (place, share) in enumerate(zip(places.tolist(), shares.tolist(), strict=True)):
            a, b = shape[:, place], size[:, place]
            if a[0] == 0.0:
                a[:], b[:] = 0.5, 0.5 / mean
            else:
                less = np.maximum(discount, 0.5 / a)
                a *= less
                b *= less
            out[:, step] = rng.poisson(np.minimum(rng.gamma(a, share / b), 1e15))
            a += out[:, step]
            b[:] = np.minimum(b + share, most)
        return out


class _Shares(Kept):
    """How much larger than even the rate is at each place in a period."""

    kept = ("sums", "visits")

    def __init__(self, places: int) -> None:
        self.sums: Floats = np.zeros(places)
        self.visits = np.zeros(places, dtype=np.int64)

    def forget(self) -> None:
        self.sums[:] = 0.0
        self.visits[:] = 0

    def now(self, mean: float) -> list[float]:
        """Share of every place, where the mean of all counts is `mean`; smoothed by two even visits."""
        return [float(share) for share in (self.sums / mean + _SMOOTH) / (self.visits + _SMOOTH)]

    def follow(self, places: list[int], counts: list[float], means: list[float]) -> list[float]:
        """Share of the place of each row, before it."""
        sums, visits = self.sums.tolist(), self.visits.tolist()
        out = []
        for place, count, mean in zip(places, counts, means, strict=True):
            out.append((sums[place] / mean + _SMOOTH) / (visits[place] + _SMOOTH))
            if count >= 0.0:
                sums[place] += count
                visits[place] += 1
        self.sums, self.visits = np.array(sums), np.array(visits)
        return out


def log_mass(a: Floats, b: Floats, count: Floats) -> Floats:
    """Log of the negative binomial mass of whole numbers >= 0, elementwise: the gamma functions of large numbers
    are taken apart by Stirling's formula first, so that nothing large is subtracted from its like.
    """
    y = np.maximum(count, 1.0)  # where it is 0, its own part is
    own = y * np.log((a + y) / ((1.0 + b) * y)) - 0.5 * np.log(2.0 * np.pi * y) - _stirling(y)
    rest = (a - 0.5) * np.log1p(count / a) - a * np.log1p(1.0 / b)
    return np.asarray(rest + np.where(count > 0, own + _stirling(a + y) - _stirling(a), 0.0))


def _stirling(x: Floats) -> Floats:
    """log G(x) - (x - 1/2) log x + x - log(2 pi) / 2 for x >= 1/2, to 13 digits (Binet's function)."""
    x = np.asarray(x, dtype=np.float64)
    far = x.copy()
    more = np.zeros_like(x)
    near = far < 8.0
    while near.any():
        some = far[near]
        more[near] += (some + 0.5) * np.log1p(1.0 / some) - 1.0
        far[near] += 1.0
        near = far < 8.0
    square = 1.0 / (far * far)
    series = 1 / 12 - square * (1 / 360 - square * (1 / 1260 - square * (1 / 1680 - square / 1188)))
    return np.asarray(more + series / far)


def _when(times: Sequence[int | None] | None) -> npt.NDArray[np.int64] | None:
    """Times as an array, None where there are none."""
    return None if times is None or times[0] is None else np.array(times, dtype=np.int64)
