"""What a question starts from: a mixture that fits a log, made at its first chunk, or one that a state holds."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from typing import Any

from seqmix.errors import OptionError
from seqmix.inputs import opened
from seqmix.mixture.mixture import Mixture
from seqmix.models.protocol import Model
from seqmix.models.registry import SHARE
from seqmix.series import Log, Rows, Series
from seqmix.series.facts import Facts


def mixture_for(
    source: Facts,
    rows: Rows | None,
    models: Sequence[str] | Sequence[Model] | None,
    period: int | Sequence[int] | None = None,
    resolution: float | None = None,
    compressor_share: float | None = None,
) -> Mixture:
    """A blank mixture for a log whose first chunk is `rows` (None: it has none).

    period, resolution: of a log of numbers; None: the clock's, or what the rows show. compressor_share: of the run
    time, for the models made of compressors; None: a tenth.
    """
    share = SHARE if compressor_share is None else compressor_share
    timed = rows is not None and rows.times is not None
    if source.kind != "numbers":
        return Mixture(models, kind=source.kind, timed=timed, share=share)
    from seqmix.mixture.numbers import NumberMixture
    from seqmix.models.calendar import periods_of
    from seqmix.models.numbers import Context

    given = () if period is None else (period,) if isinstance(period, int) else tuple(period)
    context = Context(given or periods_of(source.cadence), source.cadence, timed)
    return NumberMixture(models, context=context, resolution=resolution, share=share)


LAST = 64
"""Rows before a forecast for which models that sleep may wake."""


def with_last(chunks: Iterator[Rows]) -> Iterator[tuple[Rows, int]]:
    """The chunks again, the last `LAST` rows apart; each with the rows left before a forecast, or -1 for many."""
    held: list[Rows] = []
    for rows in chunks:
        held.append(rows)
        while sum(map(len, held[1:])) >= LAST:
            yield held.pop(0), -1
    left = sum(map(len, held))
    for rows in held:
        if left > LAST and left - len(rows) < LAST:
            yield rows[: left - LAST], -1
            rows, left = rows[left - LAST :], LAST
        if len(rows):
            yield rows, left if left <= LAST else -1
        left -= len(rows)


@contextmanager
def begun(
    log: Any,
    state: Any,
    models: Sequence[str] | Sequence[Model] | None,
    period: int | Sequence[int] | None,
    resolution: float | None,
    compressor_share: float | None,
    finished: bool = False,
    **reading: Any,
) -> Iterator[tuple[Log | Series, Mixture | None, int | None]]:
    """A log ready to be read, the mixture that has learned the rows before it, and the time of the last of them.

    state: path of a state file, or what `seqmix.learned.load` made of it, which is then used up; None: there is nothing
    before the log, and no mixture yet. Without a log, None, there is nothing after the state. The last rows of a state
    come once more, before those of the log, unless it is to be `finished`: the mixture has then learned all of them.
    """
    if state is None:
        if log is None:
            raise OptionError("neither a log nor a state to go on from")
        with opened(log, **reading) as source:
            yield source, None, None
        return
    from seqmix.learned import Learned, load

    learned = state if isinstance(state, Learned) else load(state)
    learned.agree(models, period, resolution, compressor_share)
    if finished:
        learned.finish()
    with learned.go_on(log, **reading) as following:
        yield following, learned.mixture, learned.filler.last
