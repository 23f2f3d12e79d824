"""The one writer of answers: a table for people, CSV and JSON Lines for programs; to stdout or a file.

Everything is UTF-8 with "\\n" line ends, in any locale. CSV and JSON carry the values of a log untouched; a
table, and anything sent to a terminal, makes their control characters visible. A file given with --output
appears whole or not at all.
"""

from __future__ import annotations

import csv
import io
import json
import os
import stat
import sys
import unicodedata
from collections.abc import Iterable, Iterator, Mapping, Sequence
from contextlib import contextmanager, suppress
from math import isfinite
from typing import Any, BinaryIO

from seqmix.beside import beside, failing, failure
from seqmix.errors import OutputError, SeqmixError, visible

FORMATS = ("table", "csv", "jsonl")

Columns = Sequence[tuple[str, str]]  # heading and alignment: "<" for names, ">" for numbers


class Writer:
    """Writes an answer in `format`; a command calls the methods of that format.

    All raise OutputError if the answer cannot be written, BrokenPipeError if nobody reads it any more.
    """

    def __init__(self, file: BinaryIO, name: str, format: str | None) -> None:
        self._file = file
        self._name = name
        self._terminal = file.isatty()
        self.format = format or ("table" if self._terminal else "csv")
        self._styled = self._terminal and not (os.environ.get("NO_COLOR") or os.environ.get("TERM", "dumb") == "dumb")
        self._blocks = 0
        self._line = io.StringIO(newline="")
        # Ends its lines with "\r\n", so that a lone "\r" in a value is quoted in every version of Python.
        self._csv = csv.writer(self._line)

    def write(self, text: str) -> None:
        """Text as it stands."""
        try:
            # A lone surrogate, which only a JSON log can bring, becomes the escape that JSON has for it.
            self._file.write(text.encode("utf-8", "backslashreplace"))
        except BrokenPipeError:
            raise
        except OSError as error:
            raise failure(self._name, error) from error

    def flush(self) -> None:
        with failing(self._name):
            self._file.flush()

    def record(self, record: Mapping[str, object]) -> None:
        """One JSON object on a line of its own; keys in the order given, floats that read back the same.

        JSON has no word for numbers that are not finite; they become null.
        """
        record = finite(record)
        line = json.dumps(record, ensure_ascii=False, allow_nan=False)
        if self._terminal and not line.isprintable():
            line = json.dumps(record, allow_nan=False)
        self.write(line + "\n")

    def row(self, cells: Iterable[object]) -> None:
        """One CSV record; None is an empty cell, and so is a number that is not finite."""
        cells = map(finite, cells)
        if self._terminal:
            cells = (visible(cell, sys.maxsize) if isinstance(cell, str) else cell for cell in cells)
        self._csv.writerow(cells)
        self.write(self._line.getvalue().removesuffix("\r\n") + "\n")
        self._line.seek(0)
        self._line.truncate()

    def table(self, columns: Columns, rows: Iterable[Sequence[str]]) -> None:
        """A block of a table: a line of headings, then the rows, each column padded to its widest cell."""
        head = [heading for heading, _ in columns]
        self._block([side for _, side in columns], rows, head)

    def fields(self, fields: Mapping[str, str]) -> None:
        """A block of names and values."""
        self._block("<>", fields.items())

    def lines(self, lines: Iterable[str]) -> None:
        """A block of sentences, if there are any."""
        self._block("<", ([line] for line in lines), limit=1000)

    def _block(
        self, sides: Sequence[str], rows: Iterable[Sequence[str]], head: Sequence[str] = (), limit: int = 80
    ) -> None:
        cells = [[visible(cell, limit) for cell in row] for row in rows]
        if head:
            cells.insert(0, list(head))
        if not cells:
            return
        widths = [max(map(_width, column)) for column in zip(*cells, strict=True)]
        if self._blocks:
            self.write("\n")
        self._blocks += 1
        for number, row in enumerate(cells):
            padded = (_pad(*cell) for cell in zip(row, sides, widths, strict=True))
            line = "  ".join(padded).rstrip()
            self.write(f"\x1b[2m{line}\x1b[0m\n" if self._styled and head and number == 0 else line + "\n")


def percent(probability: float) -> str:
    """A probability as a table shows it: never 0 or 100 % unless it is."""
    if 0 < probability < 0.0005:
        return "<0.1%"
    if 0.9995 <= probability < 1:
        return ">99.9%"
    return f"{100 * probability:.1f}%"


def bits(value: float) -> str:
    """A loss, or another number with a fraction, as a table shows it."""
    return f"{value:.3f}"


def finite(value: Any) -> Any:
    """`value`, a cell or the record of an answer, with None for every number that is infinite or NaN."""
    if isinstance(value, dict):
        return {key: finite(part) for key, part in value.items()}
    if isinstance(value, list | tuple):
        return [finite(part) for part in value]
    return None if isinstance(value, float) and not isfinite(value) else value


@contextmanager
def writing(path: str | None, format: str | None) -> Iterator[Writer]:
    """A writer to the file `path`, or to stdout without one or for "-".

    `format` is table, csv or jsonl; None takes a table for a terminal and CSV for all else. The file is
    written beside its place, and moved there when the answer is whole. Raises OutputError.
    """
    if path is None or path == "-":
        if sys.stdout is None:
            raise OutputError("cannot write stdout: it is closed")
        writer = Writer(sys.stdout.buffer, "stdout", format)
        try:
            yield writer
        except SeqmixError:
            writer.flush()  # what was printed before the error ends with a whole line
            raise
        writer.flush()
    else:
        with _opened(path) if _is_special(path) else beside(path) as file:
            writer = Writer(file, path, format)
            yield writer
            writer.flush()


@contextmanager
def _opened(path: str) -> Iterator[BinaryIO]:
    with failing(path):
        file = open(path, "wb")  # noqa: SIM115
    try:
        yield file
    finally:
        with suppress(OSError):  # what could not be written on purpose cannot be written now
            file.close()


def _is_special(path: str) -> bool:
    """Whether `path` is there but no regular file: a device or a pipe is written to, not replaced."""
    with suppress(OSError):
        return not stat.S_ISREG(os.stat(path).st_mode)
    return False


def _width(text: str) -> int:
    """Columns `text` takes on a terminal."""
    return sum(
        0 if unicodedata.combining(char) else 2 if unicodedata.east_asian_width(char) in "WF" else 1 for char in text
    )


def _pad(text: str, side: str, width: int) -> str:
    space = " " * (width - _width(text))
    return space + text if side == ">" else text + space
