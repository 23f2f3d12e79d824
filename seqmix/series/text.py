"""A log as text: a sample of its start, and blocks of whole lines, checked to be UTF-8."""

from __future__ import annotations

from collections.abc import Iterator
from itertools import chain

from ..errors import DataError
from .compressed import BLOCK
from .rows import CHUNK
from .source import Source

MAX_LINE = 16 << 20
"""Bytes that a line, or a record with line ends inside quotes, may have: 16 MiB."""

_BOM = b"\xef\xbb\xbf"


class Text:
    """The blocks of a source, gathered into whole lines.

    sample: the bytes of the first `CHUNK` lines, or of those that end within the first MiB. It depends on the
        log alone, not on how its bytes arrive, and is all that is ever used to find out what a log holds.
    whole: whether the sample is all of the log.
    """

    def __init__(self, source: Source) -> None:
        self.name = source.name
        blocks = iter(source)
        head: list[bytes] = []
        lines = size = 0
        self.whole = False
        while lines < CHUNK and size < BLOCK:
            block = next(blocks, b"")
            if not block:
                self.whole = True
                break
            head.append(block)
            lines += block.count(b"\n")
            size += len(block)
        start = b"".join(head)
        self.sample = start if self.whole else _whole_lines(start[:BLOCK])
        self._blocks = chain([start] if start else [], blocks)

    def raw(self) -> Iterator[bytes]:
        """All blocks, untouched."""
        return self._blocks

    def sample_text(self) -> str:
        """The sample decoded. Raises DataError where it is not text."""
        return self._decode(self.sample, 1)

    def lines(self) -> Iterator[str]:
        """The log decoded, some whole lines at a time, each ended by "\\n" save perhaps the very last.

        Raises DataError where the log is not text and for a line of more than 16 MiB.
        """
        parts: list[bytes] = []
        size = ends = 0
        line = 1
        for block in self._blocks:
            if not ends:
                length = size + (block.find(b"\n") if b"\n" in block else len(block))
                if length > MAX_LINE:
                    message = f"a line of more than {MAX_LINE >> 20} MiB; is this a text log?"
                    raise DataError(message, self.name, line)
            parts.append(block)
            size += len(block)
            ends += block.count(b"\n")
            if ends >= CHUNK or (ends and size >= BLOCK):
                data = b"".join(parts)
                cut = data.rfind(b"\n") + 1
                yield self._decode(data[:cut], line)
                parts, size = [data[cut:]], len(data) - cut
                line += ends
                ends = 0
        if size:
            yield self._decode(b"".join(parts), line)

    def _decode(self, data: bytes, line: int) -> str:
        if line == 1 and data.startswith(_BOM):
            data = data[len(_BOM) :]
        try:
            text = data.decode("utf-8")
            bad = data.find(b"\0")
        except UnicodeDecodeError as error:
            bad = error.start
        if bad >= 0:
            start = data.rfind(b"\n", 0, bad) + 1
            message = f"the byte \\x{data[bad]:02x} is not UTF-8 text; --as bytes reads the log as bytes"
            column = len(data[start:bad].decode("utf-8")) + 1
            raise DataError(message, self.name, line + data.count(b"\n", 0, bad), column)
        return text.replace("\r\n", "\n") if "\r" in text else text


def _whole_lines(start: bytes) -> bytes:
    """At most `CHUNK` lines, and no part of a line unless there is no whole one."""
    *lines, rest = start.split(b"\n", CHUNK)
    return start[: len(start) - len(rest)] if lines else start
