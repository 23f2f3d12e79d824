"""An example of a plug-in for seqmix: one model of states, and one compressor that becomes a model by itself.

    pip install ./examples/plugin
    seqmix models                                            # lists them last, with package and version
    seqmix forecast line.csv --models default,shift,pieces   # used only where they are named

`pyproject.toml` beside this file names both as entry points, the first in the group `seqmix.models`, the second in
`seqmix.compressors`. The name of an entry point is the name of the model. `seqmix.testing.check_model(Shift)` runs the
contract that the models of the library keep.
"""

from collections.abc import Sequence

from seqmix.models.clock import DAY, HOUR, phase
from seqmix.models.context import ContextTree
from seqmix.models.history import History, Keys, Past
from seqmix.models.protocol import Setting, StatesModel


def contexts(past: Past) -> list[Keys]:
    """Nested, shortest first: none; the last state; the shift, as they change at 6, 14 and 22; its hour."""
    hour = (phase(past, DAY, HOUR) - 6) % 24
    return past.nested(past.lag(1), hour // 8, hour)


class Shift(StatesModel):
    name = "shift"
    kinds = ("states",)
    prior_cost = 4.0  # bits
    summary = "the last state, the shift and its hour"
    source = "an example"
    needs_times = True

    def bank(self, alphabet: int) -> tuple[list[Setting], History]:
        return [ContextTree("hour of the shift", contexts, alphabet=alphabet, alpha=1 / 10, most=16)], History(1)


class Pieces:
    name = "pieces"
    summary = "what is made of few pieces of the last 4,096 rows"
    source = "an example"
    cost = 10.0  # microseconds a candidate
    reach = 4096  # bytes of history
    informed = False

    def code_length(self, history: bytes, candidates: Sequence[bytes]) -> list[float]:
        """12 bits for each piece that the history has, the longest first; or for a byte that it has not."""
        return [12.0 * self.pieces(history, candidate) for candidate in candidates]

    def pieces(self, history: bytes, text: bytes) -> int:
        count, at = 0, 0
        while at < len(text):
            end = len(text)
            while end > at + 1 and text[at:end] not in history:
                end -= 1
            count, at = count + 1, end
        return count
