"""A mixture that fits a log, made at its first chunk."""

from __future__ import annotations

from collections.abc import Sequence

from seqmix.mixture.mixture import Mixture
from seqmix.models.protocol import Model
from seqmix.series import Log, Rows, Series


def mixture_for(
    source: Log | Series,
    rows: Rows | None,
    models: Sequence[str] | Sequence[Model] | None,
    period: int | Sequence[int] | None = None,
    resolution: float | None = None,
) -> Mixture:
    """A blank mixture for a log whose first chunk is `rows` (None: it has none).

    period, resolution: of a log of numbers; None: the clock's, or what the rows show.
    """
    timed = rows is not None and rows.times is not None
    if source.kind != "numbers":
        return Mixture(models, kind=source.kind, timed=timed)
    from seqmix.mixture.numbers import NumberMixture
    from seqmix.models.calendar import periods_of
    from seqmix.models.numbers import Context

    given = () if period is None else (period,) if isinstance(period, int) else tuple(period)
    context = Context(given or periods_of(source.cadence), source.cadence, timed)
    return NumberMixture(models, context=context, resolution=resolution)
