"""What goes to stderr: messages, what was assumed about a log, progress."""

from __future__ import annotations

import os
import sys
import time
from collections.abc import Iterable, Iterator
from typing import IO, TYPE_CHECKING

from seqmix.errors import visible

if TYPE_CHECKING:
    from seqmix.series.rows import Rows

LIMIT = 2000  # characters of one message


def say(text: str) -> None:
    """One line on stderr. That stderr is closed or full is nobody's concern."""
    _write(f"seqmix: {visible(text, LIMIT)}\n")


def discard(stream: IO[str] | None) -> None:
    """Send what `stream` still holds, and all that follows, nowhere: the interpreter flushes it once more."""
    if stream is not None:
        nowhere = os.open(os.devnull, os.O_WRONLY)
        os.dup2(nowhere, stream.fileno())
        os.close(nowhere)


class Progress:
    """One line on a terminal, rewritten while rows pass, after a second of work; erased at the end."""

    DELAY = 1.0  # seconds before the first line
    PAUSE = 0.2  # seconds between two lines

    def __init__(self) -> None:
        self._start = time.monotonic()
        self._next = self._start + self.DELAY
        self._rows = 0
        self._width = 0

    def count(self, chunks: Iterable[Rows]) -> Iterator[Rows]:
        """`chunks`, unchanged; their rows are counted as they pass."""
        for rows in chunks:
            yield rows
            self._rows += len(rows)
            if time.monotonic() >= self._next:
                self._show()

    def _show(self) -> None:
        now = time.monotonic()
        self._next = now + self.PAUSE
        line = f"{self._rows} rows read, {self._rows / (now - self._start):.0f} rows a second"
        _write("\r" + line.ljust(self._width))
        self._width = len(line)

    def erase(self) -> None:
        if self._width:
            _write("\r" + " " * self._width + "\r")
            self._width = 0


def _write(text: str) -> None:
    if sys.stderr is not None:
        try:
            sys.stderr.write(text)
            sys.stderr.flush()
        except OSError:
            discard(sys.stderr)
