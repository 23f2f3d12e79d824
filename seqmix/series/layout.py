"""How rows lie in a text log: what the three layouts have in common."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field
from typing import Protocol

from .columns import Options, Sample
from .text import Text


@dataclass
class Beside:
    """What stands beside the cells that are being taken: their times, if there are any, and their lines.

    times, lines: of each cell; no lines where each line holds one row. before: lines before these cells, there.
    """

    times: list[str] = field(default_factory=list)
    lines: list[int] = field(default_factory=list)
    before: int = 0

    def line(self, index: int) -> int:
        """The line, from 1, of one of the cells."""
        return self.lines[index] if self.lines else self.before + index + 1

    def done(self, cells: int) -> None:
        """So many cells were taken; others follow."""
        self.times.clear()
        self.lines.clear()
        self.before += cells


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

    def again(self, log: str, names: tuple[str | None, str | None], header: bool | None) -> Sample:
        """The same of the next part of a log, whose columns have these names.

        header: whether the first line names them; None: it does if they stand there.
        """

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
