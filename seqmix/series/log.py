"""Log: an opened log, read once, forward, in bounded memory."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from types import TracebackType

from ..errors import SeqmixError, visible
from .facts import Facts
from .gaps import GapFiller
from .rows import Piece, Rows, cut


@dataclass(kw_only=True, eq=False)
class Log(Facts):
    """An opened log; `open_log` makes one. Its alphabet grows, and gaps are counted, while it is read.

    Use it as a context manager, or `close` it.
    pieces: the rows as they are logged. filler: puts missing rows between them. first: row number of the first.
    before: rows that were read before these and are to be learned first.
    """

    pieces: Iterator[Piece] = field(repr=False)
    close: Callable[[], None] = field(repr=False)
    filler: GapFiller = field(default_factory=GapFiller, repr=False)
    first: int = 0
    before: Rows | None = field(default=None, repr=False)
    _begun: bool = field(default=False, init=False, repr=False)

    def chunks(self) -> Iterator[Rows]:
        """The rows in chunks of `CHUNK`, the last one perhaps shorter; none if the log is empty.

        The chunks depend on the log alone, not on how its bytes arrive. Raises DataError at the first row
        that cannot be read, SeqmixError when called a second time.
        """
        if self._begun:
            raise SeqmixError(f"{visible(self.name)} was read before; seqmix.read keeps a log in memory")
        self._begun = True
        return self._chunks()

    def _chunks(self) -> Iterator[Rows]:
        filler = self.filler
        if self.before is not None:
            yield self.before
        for rows in cut(filler.fill(self.pieces), self.first):
            self.cadence, self.gaps, self.filled = filler.cadence, filler.gaps, filler.filled
            yield rows
        self.notes += filler.notes()
        self.close()

    def __enter__(self) -> Log:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.close()
