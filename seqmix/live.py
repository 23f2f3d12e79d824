"""Lines of a live log as they arrive: from a pipe, or from a file that grows, is moved away or cut short."""

from __future__ import annotations

import os
import select
import signal
import sys
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from errno import EISDIR
from types import FrameType, TracebackType
from typing import Any

from seqmix.errors import DataError

PAUSE = 0.02
"""Seconds between two looks at a file that has nothing new."""

STUCK = 0.5
"""Seconds that a reader of answers has after a signal that asks to end."""

_BLOCK = 1 << 16
_MAX_LINE = 16 << 20
_AT_ONCE = 64  # lines handed over together


class Stuck(Exception):
    """Nobody takes an answer, and the end is asked for."""


class Arrivals:
    """Whole lines, handed over as soon as they are there; a part of a line waits for its rest.

    A signal that asks to end is noted in `stopped`, its number, and ends the lines: work at hand is not torn, but for
    an answer that nobody takes, see `handing`. ended: no line comes after those handed over last. A file is followed
    under its name: where another takes its place, or it gets shorter, it is read from the start.
    """

    def __init__(self, place: str, from_end: bool = False) -> None:
        """place: a path, or "-" for standard input, or another pipe. from_end: leave out what a file holds now."""
        self.name = "<stdin>" if place == "-" else place
        self.stopped: int | None = None
        self.ended = False
        self._place, self._from_end = place, from_end
        self._rest = b""
        self._handlers: dict[int, Any] = {}
        self._handing = False
        self._woken, self._wake = os.pipe()
        os.set_blocking(self._wake, False)
        try:
            if os.path.isdir(place):
                raise IsADirectoryError(EISDIR, os.strerror(EISDIR))
            self._file = sys.stdin.fileno() if place == "-" else os.open(place, os.O_RDONLY)
        except OSError as error:
            raise DataError(f"cannot be opened: {error.strerror}", self.name) from None
        self._grows = os.path.isfile(place) and place != "-"
        if self._grows and from_end:
            os.lseek(self._file, 0, os.SEEK_END)

    def __enter__(self) -> Arrivals:
        for number in (signal.SIGINT, signal.SIGTERM):
            if signal.getsignal(number) is not signal.SIG_IGN:
                self._handlers[number] = signal.signal(number, self._note)
        self._handlers[signal.SIGALRM] = signal.signal(signal.SIGALRM, self._cut)
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        signal.setitimer(signal.ITIMER_REAL, 0.0)
        for number, handler in self._handlers.items():
            signal.signal(number, handler)
        for file in (self._woken, self._wake, *([] if self._place == "-" else [self._file])):
            os.close(file)

    def _note(self, number: int, frame: FrameType | None) -> None:
        self.stopped = number
        with suppress(BlockingIOError):
            os.write(self._wake, b"!")
        signal.setitimer(signal.ITIMER_REAL, STUCK, STUCK)

    def _cut(self, number: int, frame: FrameType | None) -> None:
        if self._handing:
            raise Stuck

    @contextmanager
    def handing(self) -> Iterator[None]:
        """While an answer is written. Raises Stuck where that does not end and a signal asks to."""
        self._handing = True
        try:
            yield
        finally:
            self._handing = False

    def __iter__(self) -> Iterator[list[bytes]]:
        """Lines that arrived, some at a time; an empty list now and then while none does."""
        while self.stopped is None:
            block = self._read()
            if block is None:
                yield []
                continue
            if not block:
                self.ended = True
                yield [self._rest] if self._rest else []
                return
            *whole, self._rest = (self._rest + block).split(b"\n")
            if len(self._rest) > _MAX_LINE:
                raise DataError(f"a line of more than {_MAX_LINE >> 20} MiB; is this a text log?", self.name)
            for start in range(0, len(whole), _AT_ONCE):
                yield [line + b"\n" for line in whole[start : start + _AT_ONCE]]
                if self.stopped is not None:
                    return

    def _read(self) -> bytes | None:
        """The next block; None if there is nothing new yet, empty at the end of a pipe."""
        if not self._grows:
            ready, _, _ = select.select([self._file, self._woken], [], [], 1.0)
            return os.read(self._file, _BLOCK) if self._file in ready else None
        block = os.read(self._file, _BLOCK)
        if block:
            return block
        if not self._moved():
            select.select([self._woken], [], [], PAUSE)
        return None

    def _moved(self) -> bool:
        """Whether the file was cut short, or another has its name: then it is read from the start."""
        here = os.fstat(self._file)
        if here.st_size < os.lseek(self._file, 0, os.SEEK_CUR):
            os.lseek(self._file, 0, os.SEEK_SET)
            self._rest = b""
            return True
        try:
            if os.path.samestat(os.stat(self._place), here):
                return False
            file = os.open(self._place, os.O_RDONLY)
        except OSError:
            return False  # moved away, and no other there yet
        os.close(self._file)
        self._file, self._rest = file, b""
        return True
