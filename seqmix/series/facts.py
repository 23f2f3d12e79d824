"""What is known about a log besides its rows."""

from __future__ import annotations

from dataclasses import dataclass, field

from ..errors import OptionError, visible
from .alphabet import Alphabet
from .clock import Clock
from .columns import Options, Wanted


@dataclass(kw_only=True, eq=False)
class Facts:
    """What a log is, and how it was read.

    name: as shown in messages ("line.csv", "<stdin>").
    kind: "states", "numbers" or "bytes". alphabet: its labels, none of numbers.
    format: "lines", "csv", "tsv", "jsonl", "bytes" or, for values from Python, "values".
    column, time_column: name, or without a header the number from 1; None without columns, or without times.
    places: the numbers of both, from 1; None where there is none.
    separator: of the columns. header: whether the first line names them.
    compression: "gzip", "zstandard", "brotli" or None.
    clock: how the log writes its times.
    cadence: microseconds from row to row, found from the first `CHUNK` rows when they are read; None if they are
        not regular.
    gaps: gaps met so far. filled: missing rows put into them.
    notes: what was assumed and what was met on the way, a sentence each.
    """

    name: str
    kind: str
    alphabet: Alphabet
    format: str
    column: str | None = None
    time_column: str | None = None
    places: tuple[int | None, int | None] = (None, None)
    separator: str | None = None
    header: bool = False
    compression: str | None = None
    clock: Clock = field(default_factory=Clock)
    cadence: int | None = None
    gaps: int = 0
    filled: int = 0
    notes: list[str] = field(default_factory=list)

    def agree(self, options: Options) -> None:
        """Raises OptionError where something else is asked for than what this log is."""
        wanted: list[tuple[str, Wanted, str | None, int | None]] = [
            ("kind", options.kind, self.kind, None),
            ("column", options.column, self.column, self.places[0]),
            ("time column", options.time, self.time_column, self.places[1]),
        ]
        for what, asked, known, place in wanted:
            if asked is not None and str(asked) not in (known, str(place)):
                has = "none" if known is None else f"'{visible(known)}'"
                raise OptionError(f"{visible(self.name)} has as its {what} {has}, not '{visible(str(asked))}'")
