"""What a question starts from: a mixture that fits a log, made at its first chunk, or one that a state holds."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from typing import Any

from seqmix.errors import OptionError
from seqmix.inputs import opened
from seqmix.mixture.mixture import Mixture
from seqmix.models.protocol import Model
from seqmix.series import Log, Rows, Series
from seqmix.series.facts import Facts


def mixture_for(
    source: Facts,
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


@contextmanager
def begun(
    log: Any,
    state: Any,
    models: Sequence[str] | Sequence[Model] | None,
    period: int | Sequence[int] | None,
    resolution: float | None,
    **reading: Any,
) -> Iterator[tuple[Log | Series, Mixture | None, int | None]]:
    """A log ready to be read, the mixture that has learned the rows before it, and the time of the last of them.

    state: path of a state file, or what `seqmix.learned.load` made of it, which is then used up; None: there is nothing
    before the log, and no mixture yet. Without a log, None, there is nothing after the state.
    """
    if state is None:
        if log is None:
            raise OptionError("neither a log nor a state to go on from")
        with opened(log, **reading) as source:
            yield source, None, None
        return
    from seqmix.learned import Learned, load

    learned = state if isinstance(state, Learned) else load(state)
    learned.agree(models, period, resolution)
    with learned.go_on(log, **reading) as following:
        yield following, learned.mixture, learned.filler.last
