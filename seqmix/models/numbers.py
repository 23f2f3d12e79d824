"""What the models of numbers share: cells on two scales, and banks of settings."""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Callable, Iterable, Sequence
from functools import cached_property
from typing import Any, ClassVar

import numpy as np
import numpy.typing as npt

from seqmix.keep import Kept
from seqmix.mixture.weights import Weights
from seqmix.models.broad import Broad
from seqmix.models.laws import FIRST, Floats, NumberLaw
from seqmix.models.protocol import Ask, Context, leading, split
from seqmix.series.rows import Rows

LOOKS = tuple(1 << k for k in range(4, 40))
"""Rows after which banks drop what is far behind: 16, 32, 64, 128, ..."""

STRAY = 2.0**-12
"""Mass that a bank of sharp laws leaves to a broad one, so that no value can ruin it."""


def with_stray(bits: Floats, broad: Floats) -> Floats:
    """Losses (n,) of a law with a broad one mixed in."""
    return -np.logaddexp2(np.log2(1.0 - STRAY) - bits, np.log2(STRAY) - broad)


class Cells:
    """The cells of n rows on the plain (0) and the log (1) scale."""

    _latest: ClassVar[tuple[Rows, Cells] | None] = None

    def __init__(self, values: Floats, widths: Floats) -> None:
        self.values = values
        self.widths = widths

    @classmethod
    def of(cls, rows: Rows) -> Cells:
        """Those of the same rows are made once, for all models."""
        assert rows.values is not None and rows.cells is not None
        shared = cls._latest
        if shared is None or shared[0] is not rows:
            shared = cls._latest = rows, cls(rows.values, rows.cells)
        return shared[1]

    def __len__(self) -> int:
        return len(self.values)

    def __getitem__(self, part: slice) -> Cells:
        return self if part.indices(len(self)) == (0, len(self), 1) else Cells(self.values[part], self.widths[part])

    @cached_property
    def usable(self) -> npt.NDArray[np.uint8]:
        """(2, n): 0 where there is no value, 1 where the scale knows it, 2 where it knows a part of its cell only
        (nothing is learned from that), 3 where it holds it impossible."""
        there = ~np.isnan(self.values)
        with np.errstate(invalid="ignore"):
            logs = np.where(self.values > 0, 1, np.where(self.values + 0.5 * self.widths > 0, 2, 3))
        return np.stack([there, np.where(there, logs, 0)]).astype(np.uint8)

    @cached_property
    def seen(self) -> Floats:
        """(2, n): the values on both scales, 0 where there is none."""
        plain = np.where(self.usable[0], self.values, 0.0)
        return np.stack([plain, np.log(np.where(self.usable[1] == 1, self.values, 1.0))])

    @cached_property
    def spans(self) -> Floats:
        """(2, n, 2): middle and width, as `laws.span` has them."""
        values, half = self.seen[0], 0.5 * self.widths
        inside = values > half
        share = np.where(inside, half / np.where(inside, values, 1.0), 0.0)
        upper = np.where((self.usable[1] % 3 > 0) & ~inside, values + half, 1.0)
        middle = np.where(inside, np.log(np.where(inside, values, 1.0)) + 0.5 * np.log1p(-share * share), np.log(upper))
        width = np.where(inside, np.log1p(share) - np.log1p(-share), np.inf)
        return np.ascontiguousarray(
            np.stack([np.stack([values, self.widths], axis=1), np.stack([middle, width], axis=1)])
        )


class NumbersModel(Kept, ABC):
    """One explanation of a log of numbers. Shapes: n rows; centres and scales in the log's own unit.

    Any chunking of the rows gives the same losses to the last bit. The loss of a row is minus log2 of the mass of its
    cell, rows.cells[t] wide, under the law that `predict` gave before it.
    """

    name: str
    kinds: tuple[str, ...] = ("numbers",)
    prior_cost: float  # bits
    summary: str  # one line
    source: str  # the paper

    def __init__(self, context: Context) -> None:
        self.context = context

    @classmethod
    def fits(cls, context: Context) -> bool:
        """Whether the model has anything to say about such a log."""
        return True

    @abstractmethod
    def absorb(self, rows: Rows, ask: Ask | None = None, frozen: bool = False) -> Floats:
        """Loss of each row in bits, (n,), predicted before it is learned; 0 where missing, NaN while asleep.

        frozen: weights stand still; what follows the rows (levels, slopes, coefficients) goes on doing so.
        """

    def tell(self, rows: Rows, frozen: bool = False) -> tuple[Floats, Iterable[NumberLaw | None]]:
        """`absorb` rows that all have a value, and the law of each before it, equal to what `predict` gives there."""
        return one_by_one(self, rows, frozen)

    @abstractmethod
    def predict(self, time: int | None = None) -> NumberLaw | None:
        """Law of the next row, at `time` (microseconds) where the log has times; None while asleep."""

    @abstractmethod
    def walk(self, steps: int, paths: int, times: Sequence[int | None] | None = None) -> list[NumberLaw] | None:
        """Law of each of the next steps; None while asleep. `paths`: most continuations to look at, if it must."""

    @abstractmethod
    def sample(
        self, steps: int, paths: int, rng: np.random.Generator, times: Sequence[int | None] | None = None
    ) -> Floats:
        """Joint continuations, (paths, steps)."""

    def setting(self) -> str:
        """The leading setting, in a few words; empty where there is one only."""
        return ""

    def rouse(self, left: int) -> None:
        """A forecast comes after `left` more rows: a model that sleeps may wake for it."""


def one_by_one(model: Any, rows: Rows, frozen: bool) -> tuple[Floats, list[NumberLaw | None]]:
    """What `NumbersModel.tell` gives, of any model of numbers."""
    bits, laws = np.empty(len(rows)), []
    for t in range(len(rows)):
        laws.append(model.predict(None if rows.times is None else int(rows.times[t])))
        bits[t : t + 1] = model.absorb(rows[t : t + 1], None, frozen)
    return bits, laws


Laws = list["NumberLaw | Callable[[], NumberLaw] | None"]
"""Laws of rows, or what makes them when they are taken; None where asleep."""


def wanted(rows: int, laws: Laws | None) -> npt.NDArray[np.int32]:
    """For `Weights.mix`: the weights before every row, if laws are told, or before none."""
    return np.arange(rows, dtype=np.int32) if laws is not None else np.full(rows, -1, dtype=np.int32)


class Telling(NumbersModel):
    """A model that learns rows and tells their laws in one go."""

    def absorb(self, rows: Rows, ask: Ask | None = None, frozen: bool = False) -> Floats:
        return self._absorb(rows, None, frozen)

    def tell(self, rows: Rows, frozen: bool = False) -> tuple[Floats, Iterable[NumberLaw | None]]:
        laws: Laws = []
        return self._absorb(rows, laws, frozen), (law() if callable(law) else law for law in laws)

    @abstractmethod
    def _absorb(self, rows: Rows, laws: Laws | None, frozen: bool) -> Floats:
        """`absorb`; adds the law of each row to `laws`, if there are."""


class Looking(Telling):
    """A model that looks at what it has learned after rows 1, 2, 4, 8, ...; beside it a broad law."""

    kept: tuple[str, ...] = ("rows",)

    def __init__(self, context: Context) -> None:
        super().__init__(context)
        self.rows = 0
        self._base = Broad()

    def _absorb(self, rows: Rows, laws: Laws | None, frozen: bool) -> Floats:
        assert rows.values is not None
        bits = np.empty(len(rows))
        done = 0
        while done < len(rows):
            look = 1 << self.rows.bit_length()
            stop = min(len(rows), done + look - self.rows)
            bits[done:stop] = self._learn(rows[done:stop], laws, frozen)
            self.rows += stop - done
            done = stop
            if self.rows == look:
                self._base.refit()
                if not frozen:
                    self._look()
        bits[np.isnan(rows.values)] = 0.0
        return bits

    @abstractmethod
    def _learn(self, rows: Rows, laws: Laws | None, frozen: bool) -> Floats:
        """Loss of each row, NaN where asleep; adds the law of each to `laws`, if there are."""

    def _look(self) -> None:
        """After a power of two of rows."""


class NumberBank(Telling):
    """A bank of settings, each with a standard law of the next row, mixed inside by Bayes.

    At rows 16, 32, 64, ... settings more than `_FAR` bits behind the leading one are dropped, and all but
    the `_CROWD[0]`, then `_CROWD[1]`, ... heaviest.
    """

    _FAR = 30.0
    _CROWD = (400, 256, 160, 96, 48, 32)

    kept: tuple[str, ...] = ("rows", "observed", "alive", "_first")

    def __init__(self, context: Context, costs: Floats) -> None:
        super().__init__(context)
        self.rows = 0
        self.observed = 0  # rows with a value
        self.alive = np.arange(len(costs))  # settings not dropped
        self._first = 0.0  # the first value
        self._weights = Weights(costs, rates=(0.002,))
        self._broad = Broad()

    def parts(self) -> dict[str, Kept]:
        return {"weights": self._weights, "broad": self._broad}

    @abstractmethod
    def _begin(self, value: float) -> None:
        """Take up the first value of the log; the scale of errors is not known yet."""

    @abstractmethod
    def _size_up(self, least: Floats) -> None:
        """The second value was learned: its error is all that is known of the scale, if at least `least` (2,)."""

    @abstractmethod
    def _learn(self, cells: Cells) -> tuple[Floats, Floats, Floats, Floats]:
        """Each row under each living setting, (n, settings): loss, predicted before it is learned, and the centre,
        scale and shape of that law, on the scale of the setting."""

    @abstractmethod
    def _keep(self, which: npt.NDArray[np.intp]) -> None:
        """Drop all living settings but these, positions among the living."""

    @abstractmethod
    def _next(self) -> tuple[Floats, Floats, Floats]:
        """Centre, scale and shape of the next row, (1, settings), to the last bit as `_learn` gives them."""

    @abstractmethod
    def _logs(self) -> npt.NDArray[np.bool_]:
        """Which living settings are on the log scale."""

    @abstractmethod
    def _ahead(self, which: npt.NDArray[np.intp], weights: Floats, steps: int) -> list[NumberLaw]:
        """Laws of the next steps under some living settings, mixed by `weights`."""

    @abstractmethod
    def _paths(self, at: int, steps: int, paths: int, rng: np.random.Generator) -> Floats:
        """Joint continuations under one living setting, (paths, steps)."""

    def _absorb(self, rows: Rows, laws: Laws | None, frozen: bool) -> Floats:
        bits = np.zeros(len(rows))
        cells = Cells.of(rows)
        done = 0
        while self.observed < 2 and done < len(rows):
            law = self._early_law()
            count = self._early(cells[done:], bits[done:])
            done += count
            if laws is not None:
                laws += [law] * count
        while done < len(rows):
            look = next(look for look in LOOKS if look > self.rows)
            stop = min(len(rows), done + look - self.rows)
            part = cells[done:stop]
            losses, *standard = self._learn(part)
            mixed, weights = self._weights.mix(losses, wanted(stop - done, laws), frozen)
            if laws is not None:
                laws += self._laws(standard, weights, self._broad.laws(part.values))
            mixed = with_stray(mixed, self._broad.absorb(part.values, part.widths))
            bits[done:stop] = np.where(part.usable[0], mixed, 0.0)
            self.observed += int(part.usable[0].sum())
            self.rows += stop - done
            done = stop
            if self.rows == look and not frozen:
                self._broad.refit()
                self._drop(self._CROWD[min(LOOKS.index(look), len(self._CROWD) - 1)])
        return bits

    def _laws(self, standard: Sequence[Floats], weights: Floats, broad: Sequence[NumberLaw]) -> list[NumberLaw]:
        """Laws of rows, from what all living settings say, their weights (n, settings), and the broad laws."""
        logs = self._logs()
        return [
            NumberLaw.combine([1.0 - STRAY, STRAY], [NumberLaw.of(centre, scale, shape, heavy, logs), stray])
            for centre, scale, shape, heavy, stray in zip(*standard, weights, broad, strict=True)
        ]

    def _early(self, cells: Cells, bits: Floats) -> int:
        """Learn up to and with the first or the second value, by laws that all settings share; rows done."""
        there = np.flatnonzero(cells.usable[0])
        stop = int(there[0]) + 1 if len(there) else len(cells)
        if self.observed:
            self._learn(cells[:stop])
        self.rows += stop
        if len(there):
            value, width = float(cells.values[stop - 1]), float(cells.widths[stop - 1])
            self._broad.absorb(cells.values[:stop], cells.widths[:stop])
            bits[stop - 1] = self._early_law().bits(value, width)
            if self.observed:
                self._size_up(np.array([width, width / max(abs(value), width)]) / 4)
            else:
                self._begin(value)
                self._first = value
            self.observed += 1
        return stop

    def _early_law(self) -> NumberLaw:
        """Cauchy around nothing for the first value, around the first for the second."""
        if not self.observed:
            return FIRST
        return NumberLaw.of(self._first, 0.1 * abs(self._first) or FIRST.scales[0], 1.0)

    def _drop(self, most: int) -> None:
        weights = self._weights.now()
        order = np.argsort(-weights, kind="stable")[:most]
        which = np.sort(order[weights[order] >= weights.max() * 2.0**-self._FAR])
        if len(which) < len(weights):
            self._keep(which)
            self._weights.keep(which)
            self.alive = self.alive[which]

    def predict(self, time: int | None = None) -> NumberLaw:
        if self.observed < 2:
            return self._early_law()
        return self._laws(self._next(), self._weights.now()[None, :], [self._broad.law()])[0]

    def walk(self, steps: int, paths: int, times: Sequence[int | None] | None = None) -> list[NumberLaw] | None:
        if self.observed < 2:
            return [self._early_law()] * steps
        some = leading(self._weights.now())
        laws = self._ahead(np.array([i for i, _ in some]), np.array([weight for _, weight in some]), steps)
        first = self.predict()
        return [first, *(NumberLaw.combine([1.0 - STRAY, STRAY], [law, self._broad.law()]) for law in laws[1:])]

    def sample(
        self, steps: int, paths: int, rng: np.random.Generator, times: Sequence[int | None] | None = None
    ) -> Floats:
        if self.observed < 2:
            return np.stack([self._early_law().draw(rng, paths) for _ in range(steps)], axis=1)
        shares = split(self._weights.now(), paths, rng)
        drawn = [self._paths(i, steps, int(share), rng) for i, share in enumerate(shares) if share]
        return np.concatenate(drawn)

    def setting(self) -> str:
        return self._label(int(self.alive[int(np.argmax(self._weights.now()))]))

    @abstractmethod
    def _label(self, setting: int) -> str:
        """What the setting with this number (before any was dropped) is, in a few words."""
