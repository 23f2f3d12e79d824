"""What the questions of this package accept as a log, and how they read it."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import fields, replace
from os import PathLike
from typing import Any

import numpy as np

from seqmix.errors import OptionError, visible
from seqmix.series import MISSING, Alphabet, Log, Rows, Series, open_log
from seqmix.series.columns import Options
from seqmix.series.facts import Facts
from seqmix.series.rows import Piece


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


@contextmanager
def opened_after(facts: Facts, log: Any, **reading: Any) -> Iterator[Log]:
    """The next rows of the log that `facts` tell of: as `opened`; a Log must know of these facts, None has no rows.

    Raises OptionError where they are of another kind.
    """
    if isinstance(log, str | PathLike) or hasattr(log, "read"):
        with open_log(log, after=facts, **reading) as source:
            yield source
        return
    facts.agree(Options(reading.get("column"), reading.get("time"), reading.get("kind")))
    if log is None:
        yield _log_of(facts, iter(()), facts.name)
    elif isinstance(log, Log):
        if log.alphabet is not facts.alphabet:
            raise OptionError(f"{visible(log.name)} does not go on from {visible(facts.name)}; open it with after=")
        yield log
    else:
        series = log if isinstance(log, Series) else Series.of(log, kind=facts.kind)
        if series.kind != facts.kind:
            raise OptionError(f"{visible(series.name)} holds {series.kind}, and {visible(facts.name)} {facts.kind}")
        yield _log_of(facts, _pieces(series, facts.alphabet), series.name)


def _log_of(facts: Facts, pieces: Iterator[Piece], name: str) -> Log:
    known = {fact.name: getattr(facts, fact.name) for fact in fields(Facts)}
    return Log(**{**known, "name": name, "notes": []}, pieces=pieces, close=lambda: None)


def _pieces(series: Series, alphabet: Alphabet) -> Iterator[Piece]:
    """The rows of a series, its states numbered as in `alphabet`, to which new ones are added as they come."""
    number = np.full(len(series.alphabet) + 1, MISSING, dtype=np.int32)  # the last is for missing rows
    for rows in series.chunks():
        if series.kind == "states":
            known, first = np.unique(rows.codes[rows.codes >= 0], return_index=True)
            for code in known[np.argsort(first)].tolist():
                number[code] = alphabet.encode(series.alphabet.labels[code])
        held = rows.values if rows.values is not None else rows.codes if alphabet.fixed else number[rows.codes]
        yield held, rows.times


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
