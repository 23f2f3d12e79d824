"""Compressors as models of numbers: the steps, cut into bins, are the letters."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np

from seqmix.compressors.protocol import Compressor
from seqmix.models.bins import Bins
from seqmix.models.compressed import Allowance, Compressed
from seqmix.models.compressed import model_of as states_model_of
from seqmix.models.history import Codes
from seqmix.models.laws import Floats, NumberLaw
from seqmix.models.protocol import Ask, Context
from seqmix.series.rows import Rows


class CompressedBins(Bins):
    """`Bins` with a compressor in place of the pool: see there, and `Compressed`. Sleeps where that one does."""

    prior_cost = 6.0
    fewest_paths = 32
    of_states: type[Compressed]

    def __init__(self, context: Context, allowance: Allowance | None = None) -> None:
        """allowance None: always awake."""
        self._allowance = allowance
        self._slept: list[Rows] = []  # through, and not followed yet
        self._rows_slept = 0
        super().__init__(context)

    def _first(self) -> Compressed:
        return self.of_states(0, self._allowance)

    def _taught(self, codes: Codes) -> Compressed:
        assert isinstance(self._states, Compressed)
        return self._states.again(codes)

    def absorb(self, rows: Rows, ask: Ask | None = None, frozen: bool = False) -> Floats:
        assert rows.values is not None
        if not frozen and self._sleeps_through(len(rows)):
            self._slept.append(rows)
            self._rows_slept += len(rows)
            return np.where(np.isnan(rows.values), 0.0, np.nan)
        self._follow()
        return super().absorb(rows, ask, frozen)

    def tell(self, rows: Rows, frozen: bool = False) -> tuple[Floats, list[NumberLaw | None]]:
        if not frozen and self._sleeps_through(len(rows)):
            return self.absorb(rows), [None] * len(rows)
        self._follow()
        return super().tell(rows, frozen)

    def _sleeps_through(self, rows: int) -> bool:
        """Whether none of the next `rows` is predicted, nor are bins cut anew at one."""
        slept = self._rows_slept + rows
        return self.rows + slept < 1 << self.rows.bit_length() and (not self.awake or self._states.sleeps(slept))

    def _follow(self) -> None:
        """Follow the rows slept through: all at once costs less than one by one."""
        slept, self._slept, self._rows_slept = self._slept, [], 0
        if slept:
            parts = [(rows.codes, rows.values, rows.cells) for rows in slept]
            codes, values, cells = (np.concatenate(some) for some in zip(*parts, strict=True))
            super().absorb(Rows(codes, None, slept[0].first, values, cells))

    def predict(self, time: int | None = None) -> NumberLaw | None:
        if self._slept and (not self.awake or self._states.sleeps(self._rows_slept + 1)):
            return None
        self._follow()
        return super().predict(time)

    def walk(self, steps: int, paths: int, times: Sequence[int | None] | None = None) -> list[NumberLaw] | None:
        self._follow()
        return super().walk(steps, paths, times)

    def sample(
        self, steps: int, paths: int, rng: np.random.Generator, times: Sequence[int | None] | None = None
    ) -> Floats:
        self._follow()
        return super().sample(steps, paths, rng, times)

    def rouse(self, left: int) -> None:
        self._follow()
        self._states.rouse(left)

    def state(self, copy: bool = True) -> dict[str, Any]:
        self._follow()
        return super().state(copy)

    def restore(self, state: dict[str, Any]) -> None:
        self._slept, self._rows_slept = [], 0
        super().restore(state)

    def setting(self) -> str:
        return ""


def model_of(compressor: type[Compressor]) -> type[CompressedBins]:
    """The model of numbers that a compressor makes."""
    facts = {"name": compressor.name, "summary": compressor.summary, "source": compressor.source}
    return type(
        f"{compressor.__name__}Bins",
        (CompressedBins,),
        {**facts, "compressor": compressor, "of_states": states_model_of(compressor), "__module__": __name__},
    )
