"""Where a log comes from: a path, standard input, a FIFO or an open file, as plain blocks of bytes."""

from __future__ import annotations

import os
import sys
from collections.abc import Iterator
from itertools import chain
from typing import IO, Any

from ..errors import DataError
from .compressed import BLOCK, DECOMPRESSORS, compression_of

MAX_PLAIN = 16 << 30
"""Bytes that a compressed log may unfold to: 16 GiB."""

LogFile = str | os.PathLike[str] | IO[Any]


class Source:
    """The bytes of a log, read forward once, never sought in.

    name: as shown in messages. compression: "gzip", "zstandard", "brotli" or None.
    Raises DataError when the file cannot be opened.
    """

    def __init__(self, log: LogFile) -> None:
        self._file, self.name, self._owned = _open(log)
        blocks = self._read()
        head: list[bytes] = []
        while sum(map(len, head)) < 4 and (block := next(blocks, b"")):
            head.append(block)
        self.compression = compression_of(b"".join(head), self.name)
        self._blocks = chain(head, blocks)

    def __iter__(self) -> Iterator[bytes]:
        """Blocks of the plain log, none empty, as soon as they arrive.

        Raises DataError when reading fails, when compressed data are damaged or cut short, and when they
        unfold to more than 16 GiB.
        """
        return self._blocks if self.compression is None else self._unfold(self.compression)

    def close(self) -> None:
        """Close the file, if it was opened here."""
        if self._owned:
            self._file.close()

    def _read(self) -> Iterator[bytes]:
        # read1 hands over what a pipe has; read on a buffered file would wait for a full block.
        read = getattr(self._file, "read1", self._file.read)
        try:
            while block := read(BLOCK):
                yield block.encode("utf-8", "surrogatepass") if isinstance(block, str) else block
        except OSError as error:
            raise DataError(f"cannot be read: {error.strerror or error}", self.name) from None

    def _unfold(self, compression: str) -> Iterator[bytes]:
        size = 0
        try:
            for block in DECOMPRESSORS[compression](self._blocks):
                size += len(block)
                if size > MAX_PLAIN:
                    message = f"unfolds to more than {MAX_PLAIN >> 30} GiB; decompress it and pipe it in"
                    raise DataError(message, self.name)
                if block:
                    yield block
        except ValueError as error:
            raise DataError(f"damaged {compression} data: {error}; get the file again", self.name) from None


def _open(log: LogFile) -> tuple[IO[Any], str, bool]:
    """The open file, its name, and whether it is ours to close."""
    if isinstance(log, (str, os.PathLike)):
        path = os.fspath(log)
        if path == "-":
            if sys.stdin is None:
                raise DataError("standard input is closed; name a file", "<stdin>")
            return getattr(sys.stdin, "buffer", sys.stdin), "<stdin>", False
        try:
            return open(path, "rb", buffering=0), path, True
        except OSError as error:
            raise DataError(f"cannot be opened: {error.strerror}", path) from None
        except ValueError as error:
            raise DataError(f"cannot be opened: {error}", path) from None
    name = getattr(log, "name", None)
    return getattr(log, "buffer", log), name if isinstance(name, str) else "<file>", False
