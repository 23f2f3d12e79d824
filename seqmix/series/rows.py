"""Rows: one run of consecutive rows of a log, as arrays."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass

import numpy as np

CHUNK = 4096
"""Rows in one chunk; all chunks of a log but the last have exactly this many."""

MISSING = -1
"""The code of a row with no value."""


@dataclass(slots=True, eq=False)
class Rows:
    """Consecutive rows of a log.

    codes: (n,) int32, `MISSING` where a row has no value. States are numbered in the order in which they
        first appear in the log; a byte is its own code, 0 to 255.
    times: (n,) int64, microseconds since 1970 (UTC if the log gives an offset, else as written); None in a
        log without times.
    first: row number of `codes[0]`, from 0; missing rows put into gaps count.
    """

    codes: np.ndarray
    times: np.ndarray | None
    first: int

    def __len__(self) -> int:
        return len(self.codes)

    def __getitem__(self, part: slice) -> Rows:
        start, _, step = part.indices(len(self.codes))
        if step != 1:
            raise ValueError("rows are consecutive: a slice of them has no step")
        times = None if self.times is None else self.times[part]
        return Rows(self.codes[part], times, self.first + start)


Piece = tuple[np.ndarray, "np.ndarray | None"]
"""Codes and times of some rows, not yet cut into chunks."""


def cut(pieces: Iterable[Piece], first: int = 0) -> Iterator[Rows]:
    """`pieces` of any lengths as chunks: `CHUNK` rows each, the last one perhaps fewer, none empty."""
    held: list[Piece] = []
    count = 0
    for piece in pieces:
        held.append(piece)
        count += len(piece[0])
        if count >= CHUNK:
            codes, times = join(held)
            whole = count - count % CHUNK
            for start in range(0, whole, CHUNK):
                stop = start + CHUNK
                yield Rows(codes[start:stop], None if times is None else times[start:stop], first + start)
            held = [(codes[whole:], None if times is None else times[whole:])]
            first += whole
            count -= whole
    if count:
        codes, times = join(held)
        yield Rows(codes, times, first)


def join(pieces: list[Piece]) -> Piece:
    """Some pieces, at least one, as one."""
    if len(pieces) == 1:
        return pieces[0]
    codes = np.concatenate([codes for codes, _ in pieces])
    times = [times for _, times in pieces if times is not None]
    return codes, np.concatenate(times) if times else None
