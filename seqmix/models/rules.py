"""Exact rules: constant differences, linear recurrences and repeated blocks, on the grid."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from itertools import islice
from math import nan

import numpy as np

from seqmix.keep import Kept
from seqmix.mixture.weights import Weights
from seqmix.models.laws import Floats, NumberLaw
from seqmix.models.numbers import Laws, Looking, wanted
from seqmix.models.protocol import Context
from seqmix.models.recurrence import recurrence
from seqmix.series.rows import Rows

LONGEST = 12  # rows of a block
FARTHEST = 1 << 53  # steps of the grid from 0: beyond, a double no longer counts them

_RULES = ("same value again", "constant steps", "constant second differences", "constant third differences",
          "linear recurrence", "repeated block")  # fmt: skip
_COSTS = (1.0, 2.0, 3.0, 4.0, 4.0, 3.0)  # bits
_RECURRENCE, _REPEAT = 4, 5
_REMEMBERED = 32  # values
_USED = 24  # of them, for a recurrence
_SHORT = 12  # up to so many values, a recurrence is sought at every row
_FRESH = (1 / 10, 1 / 5, 1 / 2, 1 / 2, 2 / 3, 2 / 3)  # chance that a rule holds once more, before any row
_STUBBORN = 1 / 40  # rows that this counts for


class Rules(Looking):
    """What the last values obeyed exactly is taken to go on; asleep while they obeyed no rule.

    A rule that h rows bore out and m did not gives the value it foretells the mass p = (h + f/40) / (h + m + 1/40),
    f from 1/10 to 2/3 the more values it took to find it; p is 0.99 after two hits. The rest, 1 - p, goes to a broad
    law. A rule foretells something when it holds for the last value too: a difference of order k was the same twice;
    a recurrence of order r <= 4, shortest by the algorithm of Berlekamp and Massey over the rationals (Massey 1969),
    fits more than 2 r values; a block of 2 to 12 values came twice. Where several foretell the same value, the
    simplest speaks for them; those that speak are mixed by Bayes, the others sleep.
    A missing row is filled with what the leading rule foretold.
    """

    name = "rules"
    prior_cost = 2.0
    summary = "constant differences, linear recurrences and repeated blocks that hold exactly"
    source = "Massey 1969"

    kept = ("rows", "recent", "width", "taps", "hits", "misses", "wait", "pause")

    def __init__(self, context: Context) -> None:
        super().__init__(context)
        self.recent: Floats = np.zeros(0)  # the last values that follow each other
        self.width = 0.0  # of their grid
        self.taps = np.zeros(0, dtype=np.int64)  # of the recurrence: denominator, then the factors of lags 1, 2, ...
        self.hits = np.zeros(len(_RULES), dtype=np.int64)
        self.misses = np.zeros(len(_RULES), dtype=np.int64)
        self.wait = 1  # rows between this search for a recurrence and the next
        self.pause = 0  # rows before the next search
        self._weights = Weights(_COSTS, rates=())
        self._grid = _Grid([], 0.0, self.taps)

    def parts(self) -> dict[str, Kept]:
        return {"base": self._base, "weights": self._weights}

    def restore(self, state: dict[str, object]) -> None:
        super().restore(state)
        self._grid = _Grid(self.recent.tolist(), self.width, self.taps)

    def _learn(self, rows: Rows, laws: Laws | None, frozen: bool) -> Floats:
        assert rows.values is not None and rows.cells is not None
        values, widths = rows.values, rows.cells
        at: list[int] = []
        which: list[int] = []
        sure: list[float] = []
        right: list[bool] = []
        spots: list[float] = []
        for row, (value, width) in enumerate(zip(values.tolist(), widths.tolist(), strict=True)):
            if value != value:
                self._grid.fill(self._leading())
                continue
            low, high = value - 0.5 * width, value + 0.5 * width
            for rule, number in self._grid.spoken().items():
                hit = low <= number * self._grid.width < high
                at.append(row)
                which.append(rule)
                sure.append(self._sure(rule))
                right.append(hit)
                spots.append(number * self._grid.width)
                if not frozen:
                    (self.hits if hit else self.misses)[rule] += 1
                    if rule == _RECURRENCE:
                        self._wait(hit)
            self._grid.push(value, width)
            if not frozen and not self._grid.foretold:
                self._seek()
        self.recent = np.array(self._grid.values)
        self.width, self.taps = self._grid.width, self._grid.taps
        broad = [] if laws is None else self._base.laws(values)
        base = self._base.absorb(values, widths)
        losses = np.full((len(values), len(_RULES)), nan)
        chance, foretold = np.array(sure), np.array(right, dtype=bool)
        inside = np.logaddexp2(np.log2(chance), np.log2(1 - chance) - base[at])
        losses[at, which] = -np.where(foretold, inside, np.log2(1 - chance) - base[at])
        every = wanted(len(values), laws)
        bits, weights = self._weights.mix(losses, every, frozen)
        if laws is not None:
            masses = weights[at, which] * chance
            ends = np.searchsorted(at, [every, every + 1])
            for start, stop, law in zip(*ends.tolist(), broad, strict=True):
                laws.append(_law(np.array(spots[start:stop]), masses[start:stop], law) if start < stop else None)
        return bits

    def _sure(self, rule: int, ahead: int = 0) -> float:
        """Chance that a rule holds once more, after `ahead` more hits."""
        hits = int(self.hits[rule]) + ahead
        return (hits + _STUBBORN * _FRESH[rule]) / (hits + int(self.misses[rule]) + _STUBBORN)

    def _wait(self, hit: bool) -> None:
        """How long to wait before the next search, after a hit or a miss (or a search in vain)."""
        long = len(self._grid.numbers) > _SHORT
        self.wait = 1 if hit or not long else 2 * self.wait
        self.pause = 0 if hit else self.wait - 1

    def _seek(self) -> None:
        if self.pause:
            self.pause -= 1
        elif len(self._grid.numbers) > 2:
            self._grid.seek()
            if not len(self._grid.taps):
                self._wait(False)

    def _weighed(self) -> dict[int, float]:
        """Weights of the rules that are awake."""
        spoken = list(self._grid.spoken())
        if not spoken:
            return {}
        weights = self._weights.of(np.isin(np.arange(len(_RULES)), spoken))
        return {rule: float(weights[rule]) for rule in spoken}

    def _leading(self) -> int | None:
        weighed = self._weighed()
        return max(weighed, key=weighed.__getitem__) if weighed else None

    def predict(self, time: int | None = None) -> NumberLaw | None:
        laws = self.walk(1, 0, None)
        return laws[0] if laws else None

    def walk(self, steps: int, paths: int, times: Sequence[int | None] | None = None) -> list[NumberLaw] | None:
        weighed = self._weighed()
        if not weighed:
            return None
        base = self._base.law()
        spots = np.full((steps, len(weighed)), nan)
        masses = np.zeros((steps, len(weighed)))
        for i, (rule, weight) in enumerate(weighed.items()):
            for step, number in enumerate(islice(self._grid.go_on(rule), steps)):
                spots[step, i] = number * self._grid.width
                weight *= self._sure(rule, step)
                masses[step, i] = weight
        laws = []
        for spot, mass in zip(spots, masses, strict=True):
            laws.append(_law(spot, mass, base))
        return laws

    def sample(
        self, steps: int, paths: int, rng: np.random.Generator, times: Sequence[int | None] | None = None
    ) -> Floats:
        """A path obeys one rule until it misses, then it is drawn from the broad law; asleep, from the start."""
        out = self._base.law().draw(rng, paths * steps).reshape(paths, steps)
        weighed = self._weighed()
        if weighed:
            ruled = np.array(list(weighed))[rng.choice(len(weighed), size=paths, p=list(weighed.values()))]
            for rule in weighed:
                obeying = ruled == rule
                for step, number in enumerate(islice(self._grid.go_on(rule), steps)):
                    obeying &= rng.random(paths) < self._sure(rule, step)
                    out[obeying, step] = number * self._grid.width
        return out

    def setting(self) -> str:
        rule = self._leading()
        if rule is None:
            return ""
        return f"{_RULES[rule]} of order {len(self._grid.taps) - 1}" if rule == _RECURRENCE else _RULES[rule]


def _law(spots: Floats, masses: Floats, base: NumberLaw) -> NumberLaw:
    """Atoms at the spots that have a mass, and the broad law."""
    some = np.flatnonzero(masses)
    return NumberLaw.of(
        np.append(spots[some], base.centres),
        np.append(np.zeros(len(some)), base.scales),
        np.append(np.zeros(len(some)), base.shapes),
        np.append(masses[some], max(1.0 - masses.sum(), 0.0)),
    )


class _Grid:
    """The last values as whole numbers of grid steps, and what each rule foretells after them (`foretold`)."""

    def __init__(self, values: list[float], width: float, taps: np.ndarray) -> None:
        self.width = width
        self.taps = taps[:0]
        self._read(values)
        self.taps = taps
        self._recur()

    def _read(self, values: list[float]) -> None:
        """Read values anew, as far back as they lie on the grid; a recurrence is forgotten."""
        self.values: list[float] = []
        self.numbers: list[int] = []
        self.differences: list[int] = []  # the last of order 0, 1, 2, 3
        self.foretold: dict[int, int] = {}
        start = len(values)
        while start and self._number(values[start - 1]) is not None:
            start -= 1
        for value in values[start:]:
            self._append(value, int(self._number(value) or 0))

    def _number(self, value: float) -> int | None:
        ratio = value / self.width if self.width else 0.0
        if not abs(ratio) <= FARTHEST:
            return None
        number = round(ratio)
        return number if abs(ratio - number) <= min(1e-6 + 1e-9 * abs(ratio), 0.25) else None

    def push(self, value: float, width: float) -> None:
        """The next value, on a grid of `width`."""
        if width != self.width:
            self.width = width
            self._read(self.values)
        number = self._number(value)
        if number is None:
            self._forget()
        else:
            self._append(value, number)

    def fill(self, rule: int | None) -> None:
        """A missing row: what `rule` foretold stands in for it."""
        if rule is None:
            self._forget()
        else:
            number = self.foretold[rule]
            self._append(number * self.width, number)

    def _forget(self) -> None:
        self.taps = self.taps[:0]
        self._read([])

    def _append(self, value: float, number: int) -> None:
        if len(self.taps) and self.foretold.get(_RECURRENCE) != number:
            self.taps = self.taps[:0]
        old = self.differences
        new = [number]
        for order in range(min(3, len(old))):
            new.append(new[order] - old[order])
        self.differences = new
        numbers = self.numbers
        self.values.append(value)
        numbers.append(number)
        if len(numbers) > _REMEMBERED:
            del self.values[0], numbers[0]
        foretold = {order: sum(new[: order + 1]) for order in range(len(old)) if new[order] == old[order]}
        for period in range(2, min(LONGEST, len(numbers) // 2) + 1):
            if number == numbers[-1 - period] and numbers[-period:] == numbers[-2 * period : -period]:
                foretold[_REPEAT] = numbers[-period]
                break
        self.foretold = {rule: ahead for rule, ahead in foretold.items() if abs(ahead) <= FARTHEST}
        self._recur()

    def _recur(self) -> None:
        if len(self.taps):
            ahead = next(self.go_on(_RECURRENCE), None)
            if ahead is None:
                self.taps = self.taps[:0]
            else:
                self.foretold[_RECURRENCE] = ahead

    def spoken(self) -> dict[int, int]:
        """What is foretold, each number by the simplest rule only."""
        if len(self.foretold) < 2:
            return self.foretold
        simplest: dict[int, int] = {}
        for rule, number in self.foretold.items():
            simplest.setdefault(number, rule)
        return {rule: number for number, rule in simplest.items()}

    def seek(self) -> None:
        """Look for a recurrence."""
        found = recurrence(self.numbers[-_USED:])
        if found and max(map(abs, found)) <= FARTHEST:
            self.taps = np.array(found, dtype=np.int64)
            self._recur()

    def go_on(self, rule: int) -> Iterator[int]:
        """The numbers that a rule foretells, one after the other, as long as they are whole and not too large."""
        if rule == _RECURRENCE:
            denominator, *factors = self.taps.tolist()
            past = self.numbers[: -len(factors) - 1 : -1]  # the last one first
            while True:
                ahead, rest = divmod(sum(f * x for f, x in zip(factors, past, strict=True)), denominator)
                if rest or abs(ahead) > FARTHEST:
                    return
                yield ahead
                past = [ahead, *past[:-1]]
        if rule == _REPEAT:
            numbers = self.numbers
            period = next(p for p in range(2, LONGEST + 1) if numbers[-p:] == numbers[-2 * p : -p])
            while True:
                yield from numbers[-period:]
        differences = self.differences[: rule + 1]
        while True:
            for order in range(rule - 1, -1, -1):
                differences[order] += differences[order + 1]
            if abs(differences[0]) > FARTHEST:
                return
            yield differences[0]
