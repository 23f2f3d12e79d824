"""One value a line."""

from __future__ import annotations

from collections.abc import Iterator
from itertools import chain, islice

from .columns import Options, Sample
from .layout import Beside, split_lines
from .text import Text


class Lines:
    """A log of one value a line; a blank line is a missing row. The layout of whatever has no other."""

    name = "lines"
    separator = None
    typed = False

    def __init__(self, start: str) -> None:
        self._lines = split_lines(start)

    def sample(self, log: str, options: Options, notes: list[str]) -> Sample:
        """The lines. The first is a header only for a caller who asks for a column by its text."""
        lines = self._lines
        header = options.header
        if header is None:
            header = bool(lines) and options.column == lines[0].strip()
        names = [lines[0].strip()] if header and lines else None
        return Sample(log, names, [lines[header:]], single=True)

    def again(self, log: str, names: tuple[str | None, str | None], header: bool | None) -> Sample:
        """As for a caller who asks for a column by name."""
        return self.sample(log, Options(names[0], header=header), [])

    def cells(self, text: Text, sample: Sample, value: int, time: int | None, beside: Beside) -> Iterator[str]:
        """The lines after the header."""
        beside.before = len(sample.names or ())
        lines = chain.from_iterable(map(split_lines, text.lines()))
        return islice(lines, beside.before, None)
