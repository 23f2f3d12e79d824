"""Forecast: the law of each of the next rows, with the weight of every model."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from seqmix.errors import OptionError
from seqmix.models.protocol import Model
from seqmix.reading import begun, mixture_for, with_last
from seqmix.series import Log, Series

if TYPE_CHECKING:
    from seqmix.number_forecasting import NumberForecast

UNSEEN = "?"
"""Stands for a state never seen, in joint continuations."""


@dataclass(frozen=True)
class Step:
    """The law of one row ahead.

    probabilities: of every state seen so far, the most probable first; with `unseen` they add to 1.
    top: the most probable state; None before the first row. entropy_bits: of the law, in bits.
    """

    step: int
    time: str | None
    probabilities: dict[str, float]
    unseen: float
    top: str | None
    entropy_bits: float


@dataclass(frozen=True)
class Forecast:
    """What comes next.

    steps: one `Step` a row ahead. weights: posterior probability of each model, largest first; they add to 1.
    settings: leading setting of each model. exact: so many steps follow every continuation, later ones the bulk
    of them. rows: rows read. paths: joint continuations when asked for, else None.
    """

    steps: list[Step]
    weights: dict[str, float]
    settings: dict[str, str]
    exact: int
    rows: int
    paths: list[list[str]] | None

    def records(self) -> Iterator[dict[str, Any]]:
        """One JSON-ready object a step."""
        for step in self.steps:
            yield {
                "step": step.step,
                "time": step.time,
                "probabilities": step.probabilities,
                "unseen": step.unseen,
                "top": step.top,
                "entropy_bits": step.entropy_bits,
                "weights": self.weights,
            }


def forecast(
    log: Any,
    steps: int = 5,
    *,
    models: Sequence[str] | Sequence[Model] | None = None,
    seed: int = 0,
    paths: int | None = None,
    period: int | Sequence[int] | None = None,
    resolution: float | None = None,
    quantiles: Sequence[float] = (0.05, 0.1, 0.25, 0.5, 0.75, 0.9, 0.95),
    above: float | Sequence[float] | None = None,
    below: float | Sequence[float] | None = None,
    compressor_share: float | None = None,
    state: Any = None,
    **reading: Any,
) -> Forecast | NumberForecast:
    """The law of each of the next `steps` rows of a log: a Forecast of states or bytes, a NumberForecast of numbers.

    log: a path, an open file, a Log, a Series, or values (strings, bytes, numbers); reading: column, time, kind,
    header, as for `seqmix.read`. models: names or objects, None for all that fit. paths: return so many joint
    continuations too, drawn with `seed`. compressor_share: of the run time, for the models made of compressors, 0.1
    unless said otherwise; 0 leaves them out. state: path of a state file that the log goes on from; the log may then be
    None, and the file stays as it is. Raises OptionError, DataError or StateError.
    Numbers only: period, rows per repeat, one or several, instead of what the clock tells; resolution of the grid;
    quantiles, levels in (0, 1); above, below: thresholds.
    """
    if steps < 1 or (paths is not None and paths < 1):
        raise OptionError("a forecast takes at least one step, and one path")
    with begun(log, state, models, period, resolution, compressor_share, **reading) as (source, mixture, last):
        for rows, left in with_last(source.chunks()):
            if mixture is None:
                mixture = mixture_for(source, rows, models, period, resolution, compressor_share)
            if left >= 0:
                mixture.rouse(left)
            mixture.absorb(rows)
            last = None if rows.times is None else int(rows.times[-1])
        if mixture is None:
            mixture = mixture_for(source, None, models, period, resolution, compressor_share)
        # without a cadence, the clock models take the rows ahead to come at the time of the last one
        ahead = None if last is None else [last + (source.cadence or 0) * (i + 1) for i in range(steps)]
        times = _texts(source, ahead, steps)
        if source.kind == "numbers":
            from seqmix.number_forecasting import NumberMixture, number_forecast

            assert isinstance(mixture, NumberMixture)
            return number_forecast(
                mixture, steps, times, ahead, seed=seed, paths=paths, quantiles=quantiles, above=above, below=below
            )
        labels = source.alphabet.labels
        walk = mixture.walk(steps, ahead)
        drawn = None
        if paths is not None:
            codes = mixture.sample(steps, paths, np.random.default_rng(seed), ahead)
            drawn = [[labels[c] if c < mixture.seen else UNSEEN for c in path] for path in codes.tolist()]
        return Forecast(
            steps=[_step(i + 1, times[i], walk.laws[i], labels) for i in range(steps)],
            weights=mixture.in_force(),
            settings=mixture.settings(),
            exact=walk.exact,
            rows=mixture.rows,
            paths=drawn,
        )


def _texts(source: Log | Series, ahead: list[int] | None, steps: int) -> list[str | None]:
    if ahead is None or source.cadence is None:
        return [None] * steps
    return [source.clock.text(time) for time in ahead]


def _step(number: int, time: str | None, law: np.ndarray, labels: Sequence[str]) -> Step:
    order = np.argsort(-law[:-1], kind="stable")
    probabilities = {labels[code]: float(law[code]) for code in order}
    some = law[law > 0]
    entropy = abs(float((some * np.log2(some)).sum()))
    top = labels[order[0]] if len(order) else None
    return Step(number, time, probabilities, float(law[-1]), top, entropy)
