"""Numbers: the texts of cells as floats."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from .kinds import is_missing, number_of


class NumberError(ValueError):
    """A text that is no number. index: of the first such text."""

    def __init__(self, index: int) -> None:
        super().__init__("not a number")
        self.index = index


class Numbers:
    """Reads cells as numbers. infinite: the numbers met that are not finite (inf, 1e999), taken as missing."""

    def __init__(self) -> None:
        self.infinite = 0

    def parse(self, cells: Sequence[str]) -> np.ndarray:
        """(n,) float64 of n texts, NaN where one is missing or not finite.

        Raises NumberError for the first text that is neither missing nor a number.
        """
        together = "".join(cells)
        if together.isascii() and "_" not in together:
            try:
                return self.finite(np.array(cells, dtype=np.float64))
            except ValueError:
                pass  # missing cells, nearly always
        values = [np.nan if is_missing(cell) else number_of(cell) for cell in cells]
        if None in values:
            raise NumberError(values.index(None))
        return self.finite(np.array(values, dtype=np.float64))

    def finite(self, values: np.ndarray) -> np.ndarray:
        """(n,) float64 with NaN in place of what is not finite, which is counted."""
        infinite = np.isinf(values)
        if infinite.any():
            self.infinite += int(infinite.sum())
            values = np.where(infinite, np.nan, values)
        return values

    def notes(self) -> list[str]:
        """What was met, a sentence each."""
        return [f"numbers that are not finite, taken as missing: {self.infinite}"] if self.infinite else []
