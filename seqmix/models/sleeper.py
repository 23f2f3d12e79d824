"""Models that sleep for long stretches, so that they cost next to nothing there."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np

from seqmix.keep import Kept
from seqmix.models.protocol import Ask, Floats
from seqmix.series.rows import Rows, joined


class Sleeper(Kept):
    """Stands before the class of a model: rows slept through are put by, and followed all at once when the model
    wakes or is asked for anything, which costs less than one by one.
    """

    _slept: list[Rows] | None = None  # and not followed yet
    _rows_slept = 0

    def sleeps(self, rows: int) -> bool:
        """Whether the next `rows` rows can be slept through, after those put by."""
        raise NotImplementedError

    def absorb(self, rows: Rows, ask: Ask | None = None, frozen: bool = False) -> Floats:
        if not frozen and self.sleeps(len(rows)):
            self._slept = self._slept or []
            self._slept.append(rows)
            self._rows_slept += len(rows)
            # a missing number costs nothing, asleep too
            return np.where((rows.codes < 0) & (rows.values is not None), 0.0, np.nan)
        self._follow()
        return super().absorb(rows, ask, frozen)  # type: ignore[misc]

    def _follow(self) -> None:
        slept = joined(self._slept or [])
        self._slept, self._rows_slept = None, 0
        if slept is not None:
            super().absorb(slept)  # type: ignore[misc]

    def predict(self, time: int | None = None) -> Any:
        if self.sleeps(1):
            return None
        self._follow()
        return super().predict(time)  # type: ignore[misc]

    def walk(self, steps: int, paths: int, times: Sequence[int | None] | None = None) -> Any:
        self._follow()
        return super().walk(steps, paths, times)  # type: ignore[misc]

    def sample(
        self, steps: int, paths: int, rng: np.random.Generator, times: Sequence[int | None] | None = None
    ) -> Any:
        self._follow()
        return super().sample(steps, paths, rng, times)  # type: ignore[misc]

    def state(self, copy: bool = True) -> dict[str, Any]:
        self._follow()
        return super().state(copy)

    def restore(self, state: dict[str, Any]) -> None:
        self._slept, self._rows_slept = None, 0
        super().restore(state)
