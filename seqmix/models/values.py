"""Few values: a log of numbers that knows only some hundred values is also a log of states."""

from __future__ import annotations

from collections.abc import Sequence
from functools import cached_property
from math import isnan, nan
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from seqmix.keep import Kept
from seqmix.models.history import Codes
from seqmix.models.laws import Floats, NumberLaw
from seqmix.models.novelty import Novelty
from seqmix.models.numbers import Laws, Looking
from seqmix.models.protocol import Ask, Context
from seqmix.series.rows import Rows

if TYPE_CHECKING:
    from seqmix.mixture.mixture import Mixture

MOST = 256
"""Distinct values, up to which a log of numbers is one of states too."""

_STATES = ("markov", "pool")  # models of the states; all others together bring nothing more, at twice the cost


class Values(Looking):
    """A mixture of models of states over the values as they first appeared, and a chance of a value never seen.

    With P the law of the states, u the chance of a new one and B the broad law, the mass of a cell is
    (1 - u) P(values in the cell) + u B(cell). At rows 1, 2, 4, 8, ... the model falls asleep until the next of
    them if more than a third of the rows brought a new value (or one whose cell held others too: states are then the
    wrong view); from the row after the 257th value it sleeps for good.
    """

    name = "values"
    prior_cost = 4.0
    summary = f"at most {MOST} distinct values, taken as states: the last ones, the clock, the pool"
    source = "Good 1953; Krichevsky & Trofimov 1981; Mattern 2012"

    kept = ("rows", "observed", "shared", "known", "awake", "begun", "ended", "_codes", "_times")

    def __init__(self, context: Context) -> None:
        super().__init__(context)
        self.observed = 0  # rows with a value
        self.shared = 0  # rows whose cell held more than one value known
        self.known: Floats = np.zeros(0)  # values by code
        self.awake = False
        self.begun = False  # the states are being learned; before, the rows are put by
        self.ended = False
        self._codes: Codes = np.zeros(0, dtype=np.int32)  # rows put by
        self._times: npt.NDArray[np.int64] | None = None
        self._novelty = Novelty(0)
        self._code: dict[float, int] = {}

    @cached_property
    def _states(self) -> Mixture:
        # made only where it is needed, and the library of models lists this one: hence imported here
        from seqmix.mixture.mixture import Mixture

        timed = self.context.timed
        return Mixture([*_STATES, "clock"] if timed else _STATES, kind="states", timed=timed)

    def parts(self) -> dict[str, Kept]:
        own: dict[str, Kept] = {"base": self._base, "novelty": self._novelty}
        return own | ({"states": self._states} if self.begun and not self.ended else {})

    def restore(self, state: dict[str, object]) -> None:
        super().restore(state)
        self._code = {value: code for code, value in enumerate(self.known.tolist())}

    def _look(self) -> None:
        if self.ended:
            return
        self.awake = 0 < 3 * (len(self.known) + self.shared) <= self.observed
        if self.awake and not self.begun:
            self.begun = True
            self._novelty.absorb(self._codes)
            self._states.absorb(Rows(self._codes, self._times, 0))
            self._codes, self._times = self._codes[:0], None

    def _learn(self, rows: Rows, laws: Laws | None, frozen: bool) -> Floats:
        assert rows.values is not None and rows.cells is not None
        bits = np.full(len(rows), nan)
        if laws is not None and not self.awake:
            laws += [None] * len(rows)
            laws = None
        if self.ended:
            return bits
        broad = [] if laws is None else self._base.laws(rows.values)
        base = self._base.absorb(rows.values, rows.cells)
        before = len(self.known)
        codes = self._encode(rows.values, frozen)
        if len(self.known) > MOST:
            self.ended = True
            rows = rows[: int(np.argmax(codes == MOST)) + 1]
            codes = codes[: len(rows)]
        self.observed += int((codes >= 0).sum())
        if self.begun:
            losses, masses = self._losses(rows, codes, before, base[: len(rows)], laws is not None, frozen)
            if laws is not None:
                laws += [self._law(line, law) for line, law in zip(masses, broad, strict=False)]
                laws += [None] * (len(bits) - len(rows))
            if self.awake:
                bits[: len(rows)] = losses
        elif not frozen:
            self._codes = np.concatenate([self._codes, codes])
            if rows.times is not None:
                held = np.zeros(0, dtype=np.int64) if self._times is None else self._times
                self._times = np.concatenate([held, rows.times])
        if self.ended:
            self.__dict__.pop("_states", None)
            self.awake = False
        return bits

    def _encode(self, values: Floats, frozen: bool) -> Codes:
        """Codes (n,), -1 where missing; frozen, all new values have the first code not in use."""
        distinct, first, which = np.unique(values, return_index=True, return_inverse=True)
        code = np.full(len(distinct), -1, dtype=np.int32)
        for i in np.argsort(first, kind="stable"):
            value = float(distinct[i])
            if not isnan(value):
                code[i] = self._code.get(value, len(self._code))
                if code[i] == len(self._code) <= MOST and not frozen:
                    self._code[value] = int(code[i])
        if len(self._code) > len(self.known):
            self.known = np.array(list(self._code))
        return code[which.reshape(-1)]

    def _losses(
        self, rows: Rows, codes: Codes, before: int, base: Floats, told: bool, frozen: bool
    ) -> tuple[Floats, Floats]:
        """Loss of each row, and, if `told`, its law of the states, (n, states + 1)."""
        assert rows.values is not None and rows.cells is not None
        there = codes >= 0
        # states known before each row
        seen = np.maximum.accumulate(np.concatenate([[before], codes[:-1] + 1]))
        if frozen:
            seen[:] = before
        with np.errstate(invalid="ignore"):
            low, high = rows.values - 0.5 * rows.cells, rows.values + 0.5 * rows.cells
        order = np.sort(self.known)
        held = np.searchsorted(order, high) - np.searchsorted(order, low)
        mates = {}  # of the rows whose cell holds other values too: all known ones in it
        for row in np.flatnonzero(there & (held > (codes < len(self.known)))).tolist():
            some = np.flatnonzero((self.known[: seen[row]] >= low[row]) & (self.known[: seen[row]] < high[row]))
            if len(some) > (codes[row] < seen[row]):
                mates[row] = some
        asked = range(len(rows)) if told else list(mates)
        ask = Ask.of(len(rows), asked, len(self.known))
        _, unseen = self._novelty.absorb(codes, frozen)
        inner = self._states.absorb(Rows(codes, rows.times, self.rows), ask, frozen)
        with np.errstate(divide="ignore"):
            mixed = np.logaddexp2(-inner, np.log2(unseen) - base)
        bits = np.where(codes < seen, -mixed, inner + base)
        for row, some in mates.items():
            law = ask.laws[ask.want[row]]
            bits[row] = -np.logaddexp2(np.log2(law[some].sum()), np.log2(unseen[row]) - base[row])
        if not frozen:
            self.shared += len(mates)
        return np.where(there, bits, 0.0), ask.laws if told else bits[:, None]

    def _law(self, masses: Floats, base: NumberLaw) -> NumberLaw:
        """Atoms at the values with masses (states + 1,), the last one for the broad law."""
        some = np.flatnonzero(masses[:-1])
        return NumberLaw.of(
            np.concatenate([self.known[some], base.centres]),
            np.concatenate([np.zeros(len(some)), base.scales]),
            np.concatenate([np.zeros(len(some)), base.shapes]),
            np.concatenate([masses[some], masses[-1:]]),
        )

    def predict(self, time: int | None = None) -> NumberLaw | None:
        if not self.awake:
            return None
        law = self._states.predict(time)
        return self._law(np.append(law.masses, law.unseen), self._base.law())

    def walk(self, steps: int, paths: int, times: Sequence[int | None] | None = None) -> list[NumberLaw] | None:
        if not self.awake:
            return None
        base = self._base.law()
        return [self._law(masses, base) for masses in self._states.walk(steps, times, paths).laws]

    def sample(
        self, steps: int, paths: int, rng: np.random.Generator, times: Sequence[int | None] | None = None
    ) -> Floats:
        """Along a path values never seen come from the broad law; asleep, all do."""
        out = self._base.law().draw(rng, paths * steps).reshape(paths, steps)
        if self.awake:
            codes = self._states.sample(steps, paths, rng, times)
            old = codes < len(self.known)
            out[old] = self.known[codes[old]]
        return out

    def setting(self) -> str:
        """The leading model of states."""
        if not self.awake:
            return ""
        name = self._states.names[int(np.argmax(self._states.weights.now()))]
        return f"{name} {self._states.settings()[name]}".strip()
