"""Columns between separators: CSV, TSV and their kin."""

from __future__ import annotations

import io
from collections import Counter
from collections.abc import Iterable, Iterator, Sequence
from typing import Any

from ..errors import DataError, visible
from .columns import Options, Sample, has_header
from .layout import Beside
from .text import MAX_LINE, Text

SEPARATORS = ("\t", ";", ",", "|")
"""What may separate columns; where two fit equally well, the first of them is taken."""


class Separated:
    """Rows of as many cells each, which quotes may enclose; blank lines are skipped."""

    typed = False

    def __init__(self, separator: str, width: int, rows: list[list[str]]) -> None:
        self.name = "tsv" if separator == "\t" else "csv"
        self.separator = separator
        self._width = width
        self._rows = rows

    @classmethod
    def detect(cls, start: str, whole: bool, separators: Sequence[str] = SEPARATORS) -> Separated | None:
        """The layout in which at least two thirds of the rows have the same number of cells, two or more."""
        best, best_share = None, 2 / 3
        for separator in separators:
            if separator in start:
                rows = _sample_rows(start, separator, whole)
                for width, count in Counter(map(len, rows)).most_common(1):
                    share = count / len(rows)
                    if width >= 2 and (share > best_share or (best is None and share == best_share)):
                        best = cls(separator, width, [row for row in rows if len(row) == width])
                        best_share = share
        return best

    def sample(self, log: str, options: Options, notes: list[str]) -> Sample:
        """The rows turned into columns, the first row as their names if it is a header."""
        header = options.header
        if header is None:
            header = has_header(self._rows, (options.column, options.time))
            notes.append(
                "the first line taken as a header; --no-header takes it as a row"
                if header
                else "no header seen; --header takes the first line as one"
            )
        names = [cell.strip() for cell in self._rows[0]] if header else None
        columns = [[row[index] for row in self._rows[header:]] for index in range(self._width)]
        return Sample(log, names, columns)

    def again(self, log: str, names: tuple[str | None, str | None], header: bool | None) -> Sample:
        """A header is known by the names of the columns that are read."""
        if header is None:
            header = {name for name in names if name is not None} <= {cell.strip() for cell in self._rows[0]}
        return self.sample(log, Options(header=header), [])

    def cells(self, text: Text, sample: Sample, value: int, time: int | None, beside: Beside) -> Iterator[str]:
        """The cells of one column.

        Raises DataError for a row of another width, for quotes that do not match, and for a record of more
        than 16 MiB.
        """
        import csv

        row_line = 1  # where the present record starts
        pending = 0  # how many characters of it were handed to the reader

        def lines() -> Iterator[str]:
            nonlocal pending
            for block in text.lines():
                for line in io.StringIO(block):
                    pending += len(line)
                    if pending > MAX_LINE:
                        message = f"a record of more than {MAX_LINE >> 20} MiB; is a quote never closed?"
                        raise DataError(message, text.name, row_line)
                    yield line

        header = sample.names is not None
        reader = _csv_reader(lines(), self.separator, strict=True)
        try:
            for row in reader:
                pending = 0
                if len(row) != self._width:
                    if not _is_blank(row):
                        found = visible(self.separator.join(row))
                        message = f"{len(row)} cells where {self._width} were expected: '{found}'"
                        raise DataError(message, text.name, row_line)
                elif header:
                    header = False
                else:
                    beside.lines.append(row_line)
                    if time is not None:
                        beside.times.append(row[time])
                    yield row[value]
                row_line = reader.line_num + 1
        except csv.Error as error:
            raise DataError(_explain(str(error)), text.name, row_line) from None


def _sample_rows(start: str, separator: str, whole: bool) -> list[list[str]]:
    """The rows, whatever is wrong with them, without blank lines and without a last one that may be cut."""
    rows = list(_csv_reader(io.StringIO(start.replace("\r", "").rstrip("\n")), separator, strict=False))
    return [row for row in (rows if whole else rows[:-1]) if not _is_blank(row)]


def _csv_reader(lines: Iterable[str], separator: str, strict: bool) -> Any:
    import csv

    csv.field_size_limit(max(MAX_LINE, csv.field_size_limit()))
    return csv.reader(lines, delimiter=separator, strict=strict)


def _is_blank(row: list[str]) -> bool:
    return not row or (len(row) == 1 and not row[0].strip())


def _explain(error: str) -> str:
    """What the csv module says, in words about the log."""
    if error.startswith("new-line"):
        return "a carriage return that no line feed follows; end lines with LF or CRLF"
    if error == "unexpected end of data":
        return "a quote is opened here and never closed"
    return f"quotes that do not match ({error}); double a quote inside quotes"
