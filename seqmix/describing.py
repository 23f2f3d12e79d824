"""Describe: what a log holds, and what was assumed while reading it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from seqmix.inputs import opened

_MOST = 1000  # states listed


@dataclass(frozen=True)
class Description:
    """A log at a glance.

    rows: with missing and filled ones. states: count of each state or byte that occurs, most frequent first, at most
    1,000. alphabet: how many there are. cadence_seconds: None where the rows come without a regular clock.
    entropy_bits: of the states as they occur, their order aside, in bits a row. notes: what was assumed.
    """

    name: str
    kind: str
    format: str
    compression: str | None
    column: str | None
    rows: int
    missing: int
    states: dict[str, int]
    alphabet: int
    first_time: str | None
    last_time: str | None
    cadence_seconds: float | None
    gaps: int
    filled: int
    entropy_bits: float
    notes: list[str]

    def record(self) -> dict[str, Any]:
        """JSON-ready."""
        return dict(vars(self))


def describe(log: Any, **reading: Any) -> Description:
    """Read a log to its end and say what it holds. log, reading: as for `seqmix.forecast`."""
    with opened(log, **reading) as source:
        counts = np.zeros(256, dtype=np.int64)
        total = missing = 0
        first: int | None = None
        last: int | None = None
        for rows in source.chunks():
            seen = np.bincount(rows.codes[rows.codes >= 0], minlength=len(counts))
            counts = np.concatenate([counts, np.zeros(max(len(seen) - len(counts), 0), dtype=np.int64)]) + seen
            missing += int((rows.codes < 0).sum())
            total += len(rows)
            if rows.times is not None:
                first = int(rows.times[0]) if first is None else first
                last = int(rows.times[-1])
        order = [int(code) for code in np.argsort(-counts, kind="stable") if counts[code]]
        shares = counts[order] / max(total - missing, 1)
        cadence = source.cadence
        return Description(
            name=source.name,
            kind=source.kind,
            format=source.format,
            compression=source.compression,
            column=source.column,
            rows=total,
            missing=missing,
            states={source.alphabet.labels[code]: int(counts[code]) for code in order[:_MOST]},
            alphabet=len(order),
            first_time=None if first is None else source.clock.text(first),
            last_time=None if last is None else source.clock.text(last),
            cadence_seconds=None if cadence is None else cadence / 1e6,
            gaps=source.gaps,
            filled=source.filled,
            entropy_bits=abs(float((shares * np.log2(shares)).sum())),
            notes=list(source.notes),
        )
