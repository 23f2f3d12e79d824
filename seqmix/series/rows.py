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
        first appear in the log; a byte is its own code, 0 to 255; every number has the code 0.
    times: (n,) int64, microseconds since 1970 (UTC if the log gives an offset, else as written); None in a
        log without times.
    first: row number of `codes[0]`, from 0; missing rows put into gaps count.
    values: (n,) float64, the numbers of a log of numbers, NaN where a row has none; None for other kinds.
    cells: (n,) float64, the width of the cell of the grid that each number lies in; None as they are read,
        found by a `Grid`.
    """

    codes: np.ndarray
    times: np.ndarray | None
    first: int
    values: np.ndarray | None = None
    cells: np.ndarray | None = None

    @classmethod
    def of(cls, held: np.ndarray, times: np.ndarray | None, first: int) -> Rows:
        """Rows of codes (int32) or of numbers (float64)."""
        if held.dtype != np.float64:
            return cls(held, times, first)
        return cls(np.where(np.isnan(held), np.int32(MISSING), np.int32(0)), times, first, held)

    def __len__(self) -> int:
        return len(self.codes)

    def __getitem__(self, part: slice) -> Rows:
        start, _, step = part.indices(len(self.codes))
        if step != 1:
            raise ValueError("rows are consecutive: a slice of them has no step")
        times, values, cells = (
            None if array is None else array[part] for array in (self.times, self.values, self.cells)
        )
        return Rows(self.codes[part], times, self.first + start, values, cells)


Piece = tuple[np.ndarray, "np.ndarray | None"]
"""Codes (int32), or numbers (float64), and times of some rows, not yet cut into chunks."""


def cut(pieces: Iterable[Piece], first: int = 0) -> Iterator[Rows]:
    """`pieces` of any lengths as chunks: `CHUNK` rows each, the last one perhaps fewer, none empty."""
    parts: list[Piece] = []
    count = 0
    for piece in pieces:
        parts.append(piece)
        count += len(piece[0])
        if count >= CHUNK:
            held, times = join(parts)
            whole = count - count % CHUNK
            for start in range(0, whole, CHUNK):
                stop = start + CHUNK
                yield Rows.of(held[start:stop], None if times is None else times[start:stop], first + start)
            parts = [(held[whole:], None if times is None else times[whole:])]
            first += whole
            count -= whole
    if count:
        held, times = join(parts)
        yield Rows.of(held, times, first)


def joined(parts: list[Rows]) -> Rows | None:
    """Consecutive rows as one; None of none."""
    if len(parts) < 2:
        return parts[0] if parts else None
    times, values, cells = (
        None if getattr(parts[0], name) is None else np.concatenate([getattr(part, name) for part in parts])
        for name in ("times", "values", "cells")
    )
    return Rows(np.concatenate([part.codes for part in parts]), times, parts[0].first, values, cells)


def join(pieces: list[Piece]) -> Piece:
    """Some pieces, at least one, as one."""
    if len(pieces) == 1:
        return pieces[0]
    held = np.concatenate([held for held, _ in pieces])
    times = [times for _, times in pieces if times is not None]
    return held, np.concatenate(times) if times else None
