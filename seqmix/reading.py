"""A mixture that fits a log, made at its first chunk."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from seqmix.mixture.mixture import Mixture
from seqmix.models.protocol import Model
from seqmix.models.registry import SHARE
from seqmix.series import Log, Rows, Series


def mixture_for(
    source: Log | Series,
    rows: Rows | None,
    models: Sequence[str] | Sequence[Model] | None,
    period: int | Sequence[int] | None = None,
    resolution: float | None = None,
    compressor_share: float = SHARE,
) -> Mixture:
    """A blank mixture for a log whose first chunk is `rows` (None: it has none).

    period, resolution: of a log of numbers; None: the clock's, or what the rows show. compressor_share: of the run
    time, for the models made of compressors.
    """
    timed = rows is not None and rows.times is not None
    if source.kind != "numbers":
        return Mixture(models, kind=source.kind, timed=timed, share=compressor_share)
    from seqmix.mixture.numbers import NumberMixture
    from seqmix.models.calendar import periods_of
    from seqmix.models.numbers import Context

    given = () if period is None else (period,) if isinstance(period, int) else tuple(period)
    context = Context(given or periods_of(source.cadence), source.cadence, timed)
    return NumberMixture(models, context=context, resolution=resolution, share=compressor_share)


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
