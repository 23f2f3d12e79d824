"""Compressors as models of numbers: the steps, cut into bins, are the letters."""

from __future__ import annotations

from collections.abc import Iterable

from seqmix.compressors.protocol import Compressor
from seqmix.models.bins import Bins
from seqmix.models.compressed import Allowance, Compressed
from seqmix.models.compressed import model_of as states_model_of
from seqmix.models.history import Codes
from seqmix.models.laws import Floats, NumberLaw
from seqmix.models.protocol import Context
from seqmix.models.sleeper import Sleeper
from seqmix.series.rows import Rows


class CompressedBins(Sleeper, Bins):
    """`Bins` with a compressor in place of the pool: see there, and `Compressed`. Sleeps where that one does."""

    prior_cost = 6.0
    fewest_paths = 32
    of_states: type[Compressed]

    def __init__(self, context: Context, allowance: Allowance | None = None) -> None:
        """allowance None: always awake."""
        self._allowance = allowance
        super().__init__(context)

    def _first(self) -> Compressed:
        return self.of_states(0, self._allowance)

    def _taught(self, codes: Codes) -> Compressed:
        assert isinstance(self._states, Compressed)
        return self._states.again(codes)

    def sleeps(self, rows: int) -> bool:
        """Whether none of the next `rows` is predicted, nor are bins cut anew at one, after those put by."""
        slept = self._rows_slept + rows
        return self.rows + slept < 1 << self.rows.bit_length() and (not self.awake or self._states.sleeps(slept))

    def tell(self, rows: Rows, frozen: bool = False) -> tuple[Floats, Iterable[NumberLaw | None]]:
        if not frozen and self.sleeps(len(rows)):
            return self.absorb(rows), [None] * len(rows)
        self._follow()
        return super().tell(rows, frozen)

    def rouse(self, left: int) -> None:
        self._follow()
        self._states.rouse(left)

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
