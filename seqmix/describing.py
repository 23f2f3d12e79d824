"""Describe: what a log holds, and what was assumed while reading it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from seqmix.inputs import opened
from seqmix.series import Alphabet
from seqmix.series.grid import Grid

_MOST = 1000  # states listed, different numbers counted
_HELD = 1_000_000  # numbers that the median is taken of

_OF_STATES = ("states", "alphabet", "entropy_bits")
_OF_NUMBERS = ("minimum", "maximum", "mean", "median", "resolution", "distinct")


@dataclass(frozen=True)
class Description:
    """A log at a glance. What does not apply to its kind, or cannot be known, is None.

    rows: with missing and filled ones. cadence_seconds: None where the rows come without a regular clock.
    notes: what was assumed.

    Of states and bytes: states: count of each that occurs, most frequent first, at most 1,000. alphabet: how many
    there are. entropy_bits: as they occur, their order aside, in bits a row.

    Of numbers: minimum, maximum, mean. median: of the first 1,000,000. resolution: of the grid at the end of the
    log. distinct: how many different ones there are, None if more than 1,000.
    """

    name: str
    kind: str
    format: str
    compression: str | None
    column: str | None
    rows: int
    missing: int
    states: dict[str, int] | None
    alphabet: int | None
    minimum: float | None
    maximum: float | None
    mean: float | None
    median: float | None
    resolution: float | None
    distinct: int | None
    first_time: str | None
    last_time: str | None
    cadence_seconds: float | None
    gaps: int
    filled: int
    entropy_bits: float | None
    notes: list[str]

    def record(self) -> dict[str, Any]:
        """JSON-ready: what applies to the kind."""
        others = _OF_STATES if self.kind == "numbers" else _OF_NUMBERS
        return {name: value for name, value in vars(self).items() if name not in others}


def describe(log: Any, **reading: Any) -> Description:
    """Read a log to its end and say what it holds. log, reading: as for `seqmix.forecast`."""
    with opened(log, **reading) as source:
        numbers = _Numbers()
        states = _States()
        total = missing = 0
        first: int | None = None
        last: int | None = None
        for rows in source.chunks():
            if rows.values is None:
                states.add(rows.codes[rows.codes >= 0])
            else:
                numbers.add(rows.values)
            missing += int((rows.codes < 0).sum())
            total += len(rows)
            if rows.times is not None:
                first = int(rows.times[0]) if first is None else first
                last = int(rows.times[-1])
        found = dict.fromkeys(_OF_STATES + _OF_NUMBERS)
        found.update(numbers.found() if source.kind == "numbers" else states.found(source.alphabet))
        cadence = source.cadence
        return Description(
            name=source.name,
            kind=source.kind,
            format=source.format,
            compression=source.compression,
            column=source.column,
            rows=total,
            missing=missing,
            first_time=None if first is None else source.clock.text(first),
            last_time=None if last is None else source.clock.text(last),
            cadence_seconds=None if cadence is None else cadence / 1e6,
            gaps=source.gaps,
            filled=source.filled,
            notes=list(source.notes),
            **found,
        )


class _States:
    """How often each code occurs."""

    def __init__(self) -> None:
        self.counts = np.zeros(256, dtype=np.int64)

    def add(self, codes: np.ndarray) -> None:
        seen = np.bincount(codes, minlength=len(self.counts))
        self.counts = np.pad(self.counts, (0, len(seen) - len(self.counts))) + seen

    def found(self, alphabet: Alphabet) -> dict[str, Any]:
        order = [int(code) for code in np.argsort(-self.counts, kind="stable") if self.counts[code]]
        shares = self.counts[order] / max(self.counts.sum(), 1)
        return {
            "states": {alphabet.labels[code]: int(self.counts[code]) for code in order[:_MOST]},
            "alphabet": len(order),
            "entropy_bits": abs(float((shares * np.log2(shares)).sum())),
        }


class _Numbers:
    """Where the numbers lie."""

    def __init__(self) -> None:
        self.grid = Grid()
        self.rows = 0
        self.low, self.high = np.inf, -np.inf
        self.sum = np.longdouble(0)  # exact to the last digit of a float, and beyond their range
        self.held: list[np.ndarray] = []
        self.different = np.zeros(0)

    def add(self, values: np.ndarray) -> None:
        self.grid.cells(values)
        values = values[~np.isnan(values)]
        if self.rows < _HELD:
            self.held.append(values[: _HELD - self.rows])
        if len(self.different) <= _MOST:
            self.different = np.unique(np.concatenate([self.different, values]))
        self.rows += len(values)
        self.low = min(self.low, values.min(initial=np.inf))
        self.high = max(self.high, values.max(initial=-np.inf))
        self.sum += values.sum(dtype=np.longdouble)

    def found(self) -> dict[str, Any]:
        if not self.rows:
            return {"distinct": 0}
        held = np.sort(np.concatenate(self.held))
        lower, upper = held[(len(held) - 1) // 2], held[len(held) // 2]
        return {
            "minimum": float(self.low),
            "maximum": float(self.high),
            "mean": float(self.sum / self.rows),
            "median": float(lower if lower == upper else lower / 2 + upper / 2),
            "resolution": self.grid.resolution,
            "distinct": len(self.different) if len(self.different) <= _MOST else None,
        }
