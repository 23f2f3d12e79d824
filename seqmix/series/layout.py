"""How rows lie in a text log: what the three layouts have in common."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field
from typing import Protocol

from .columns import Options, Sample
from .text import Text


@dataclass
class Beside:
    """What stands beside the cells read so far: their times, if there are any, and the line of each row.

    Whoever takes the cells empties both lists when done with them.
    """

    times: list[str] = field(default_factory=list)
    lines: list[int] = field(default_factory=list)


class Layout(Protocol):
    """One layout, made from the start of a log.

    name: "lines", "csv", "tsv" or "jsonl". separator: of the columns of csv and tsv.
    typed: whether the log itself tells texts from numbers, as JSON does.
    """

    @property
    def name(self) -> str: ...

    @property
    def separator(self) -> str | None: ...

    @property
    def typed(self) -> bool: ...

    def sample(self, log: str, options: Options, notes: list[str]) -> Sample:
        """The start of the log as columns; adds to `notes` what was assumed about a header."""

    def cells(self, text: Text, sample: Sample, value: int, time: int | None, beside: Beside) -> Iterator[str]:
        """The cells of the column `value`; their times, from the column `time`, and lines go `beside`.

        Raises DataError at the first row that cannot be read.
        """


def split_lines(block: str) -> list[str]:
    """The lines of `block`, without their ends. What follows the last end is a line if it is not empty."""
    lines = block.split("\n")
    if not lines[-1]:
        lines.pop()
    return lines
