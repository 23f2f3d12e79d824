"""Learn: what a log teaches, kept in a state file."""

from __future__ import annotations

import os
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from os import PathLike, fspath
from typing import Any

from seqmix.errors import DataError
from seqmix.inputs import opened
from seqmix.learned import Learned, facts_of, load
from seqmix.series import Alphabet, Series
from seqmix.state import lock


@dataclass(frozen=True)
class Lesson:
    """What was learned.

    learned: rows of this log, with those put into its gaps. rows: in all. bits: loss of all rows under the mixture,
    each predicted before it was learned; bits_per_row: of a row with a value. leading: the model with the largest
    weight in a forecast from here; weight: that one.
    """

    learned: int
    rows: int
    bits: float
    bits_per_row: float
    leading: str
    weight: float

    def record(self) -> dict[str, Any]:
        """JSON-ready."""
        return dict(vars(self))


def learn(
    log: Any,
    *,
    into: str | PathLike[str],
    models: Sequence[str] | None = None,
    period: int | Sequence[int] | None = None,
    resolution: float | None = None,
    compressor_share: float | None = None,
    **reading: Any,
) -> Lesson:
    """Learn a log into the state file `into`: a new one, or one that holds what was before this log.

    log, period, resolution, compressor_share, reading: as for `seqmix.forecast`. models: names, None for all that fit.
    With a state that is there its own hold; kind, layout and columns are those of its first log. A log learned in any
    number of pieces gives the same state as in one. The file changes when all is learned, or not at all.
    Raises OptionError, DataError, StateError or OutputError.
    """
    with held(into) as known:
        options: dict[str, Any] = {
            "models": models,
            "period": period,
            "resolution": resolution,
            "compressor_share": compressor_share,
        }
        return learn_held(known, log, into, **options, **reading)


@contextmanager
def held(path: str | PathLike[str]) -> Iterator[Learned | None]:
    """What a state file holds, None if it is not there; no other writer gets at it meanwhile. Raises StateError."""
    with lock(fspath(path)):
        yield load(path) if os.path.lexists(path) else None


def learn_held(
    known: Learned | None,
    log: Any,
    into: str | PathLike[str],
    *,
    models: Sequence[str] | None = None,
    period: int | Sequence[int] | None = None,
    resolution: float | None = None,
    compressor_share: float | None = None,
    **reading: Any,
) -> Lesson:
    """As `learn`, for a state file that is `held`."""
    if known is not None:
        known.agree(models, period, resolution, compressor_share)
        return _learn(known, log, into, **reading)
    with opened(log, **reading) as source:
        facts = facts_of(source, fspath(into))
        if isinstance(source, Series) and source.kind == "states":
            facts.alphabet = Alphabet()  # a series may know states that none of its rows has
        return _learn(Learned(facts, models, period, resolution, compressor_share), source, into)


def _learn(known: Learned, log: Any, into: str | PathLike[str], **reading: Any) -> Lesson:
    before = 0
    with known.go_on(log, **reading) as source:
        before = 0 if source.before is None else len(source.before)
        learned = known.learn(source.chunks()) - before
        name = source.name
    if not known.rows:
        raise DataError("no rows in it, so there is nothing to keep", name)
    if learned:
        known.save(into)
    known.finish()
    mixture = known.mixture
    leading, weight = next(iter(mixture.in_force().items()))
    return Lesson(learned, mixture.rows, mixture.bits, mixture.bits / max(mixture.present, 1), leading, weight)
