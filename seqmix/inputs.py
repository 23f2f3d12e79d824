"""What the questions of this package accept as a log, and how they read it."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import replace
from os import PathLike
from typing import Any

import numpy as np

from seqmix.series import Log, Rows, Series, open_log


@contextmanager
def opened(log: Any, **reading: Any) -> Iterator[Log | Series]:
    """`log` ready to be read: a Log or a Series as it is, a path or a file opened, values as a Series.

    reading: column, time, kind, header, as for `seqmix.read`; kind alone for values.
    """
    if isinstance(log, Log | Series):
        yield log
    elif isinstance(log, str | PathLike) or hasattr(log, "read"):
        with open_log(log, **reading) as source:
            yield source
    else:
        yield Series.of(log, kind=reading.get("kind"))


class Held:
    """A log read to its end and kept, for questions that must know how many rows there are.

    It takes 1 byte a row of bytes, 4 a row of states, 12 of numbers, and 8 more with times; a Series is kept as it is.
    """

    def __init__(self, log: Log | Series) -> None:
        self._series = log if isinstance(log, Series) else None
        self._chunks: list[Rows] = []
        if self._series is None:
            kept = np.uint8 if log.alphabet.fixed else np.int32
            for rows in log.chunks():
                rows.codes = rows.codes.astype(kept)
                self._chunks.append(rows)
        self.rows = sum(map(len, self._chunks)) if self._series is None else len(self._series)

    def chunks(self) -> Iterator[Rows]:
        if self._series is not None:
            return self._series.chunks()
        return (replace(rows, codes=rows.codes.astype(np.int32)) for rows in self._chunks)
