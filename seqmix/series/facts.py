"""What is known about a log besides its rows."""

from __future__ import annotations

from dataclasses import dataclass, field

from .alphabet import Alphabet
from .clock import Clock


@dataclass(kw_only=True, eq=False)
class Facts:
    """What a log is, and how it was read.

    name: as shown in messages ("line.csv", "<stdin>").
    kind: "states", "numbers" or "bytes". alphabet: its labels, none of numbers.
    format: "lines", "csv", "tsv", "jsonl", "bytes" or, for values from Python, "values".
    column, time_column: name, or without a header the number from 1; None without columns, or without times.
    separator: of the columns. header: whether the first line names them.
    compression: "gzip", "zstandard", "brotli" or None.
    clock: how the log writes its times.
    cadence: microseconds from row to row, found from the first `CHUNK` rows; None if they are not regular.
    gaps: gaps met so far. filled: missing rows put into them.
    notes: what was assumed and what was met on the way, a sentence each.
    """

    name: str
    kind: str
    alphabet: Alphabet
    format: str
    column: str | None = None
    time_column: str | None = None
    separator: str | None = None
    header: bool = False
    compression: str | None = None
    clock: Clock = field(default_factory=Clock)
    cadence: int | None = None
    gaps: int = 0
    filled: int = 0
    notes: list[str] = field(default_factory=list)
