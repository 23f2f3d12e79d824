"""What a compressor must do to become a model."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Protocol


class Compressor(Protocol):
    """Tells how many bits candidates take after a history. Made without arguments; one object serves one thread.

    name: that of the model too. summary: what it knows, in one line. source: the paper or standard.
    cost: microseconds that one candidate of some ten bytes takes, about; decides how often the model can be awake.
    reach: most bytes of history that it looks at. informed: it was built knowing some text, so that even a candidate
    that the history never showed may be cheap.
    """

    name: str
    summary: str
    source: str
    cost: float
    reach: int
    informed: bool

    def code_length(self, history: bytes, candidates: Sequence[bytes]) -> Sequence[float]:
        """Bits that each candidate takes after `history`, up to a constant: only differences count.

        The same history object comes many times in a row, so what was prepared for it may be kept.
        """
