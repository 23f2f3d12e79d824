"""Weights: which models explain a log, and how their weights moved along it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from seqmix.errors import OptionError
from seqmix.mixture.mixture import Mixture
from seqmix.models.protocol import Model
from seqmix.reading import begun, mixture_for, with_last

_POINTS = 20  # of the history, where the caller does not say how often


@dataclass(frozen=True)
class Weights:
    """Weights along a log.

    history: (row, time, {model: weight}) after so many rows; the last entry is after all of them.
    models: name, weight, bits, bits_per_row, prior_cost_bits, rows_awake and leading setting of each, heaviest first.
    """

    history: list[tuple[int, str | None, dict[str, float]]]
    models: list[dict[str, Any]]


def weights(
    log: Any,
    *,
    every: int | None = None,
    models: Sequence[str] | Sequence[Model] | None = None,
    period: int | Sequence[int] | None = None,
    resolution: float | None = None,
    compressor_share: float | None = None,
    state: Any = None,
    **reading: Any,
) -> Weights:
    """The weights of all models along a log, every so many rows (None: about twenty times).

    log, models, period, resolution, compressor_share, state, reading: as for `seqmix.forecast`. Raises OptionError,
    DataError or StateError.
    """
    if every is not None and every < 1:
        raise OptionError("weights can be noted every row at the most")
    history: list[tuple[int, str | None, dict[str, float]]] = []
    step = every or 1
    with begun(log, state, models, period, resolution, compressor_share, **reading) as (source, mixture, before):
        last = None if before is None else source.clock.text(before)

        def note(mixture: Mixture) -> None:
            now = dict(zip(mixture.names, mixture.weights.now().tolist(), strict=True))
            history.append((mixture.rows, last, now))

        for rows, left in with_last(source.chunks()):
            if mixture is None:
                mixture = mixture_for(source, rows, models, period, resolution, compressor_share)
            if left >= 0:
                mixture.rouse(left)
            done = 0
            while done < len(rows):
                stop = min(len(rows), done + step - mixture.rows % step)
                mixture.absorb(rows[done:stop])
                done = stop
                last = None if rows.times is None else source.clock.text(int(rows.times[done - 1]))
                if mixture.rows % step == 0:
                    note(mixture)
                if every is None and len(history) == 2 * _POINTS:
                    # too many: keep every second one, and go on in steps twice as long
                    history = history[1::2]
                    step *= 2
        if mixture is None:
            mixture = mixture_for(source, None, models, period, resolution, compressor_share)
        if not history or history[-1][0] != mixture.rows:
            note(mixture)
    settings = mixture.settings()
    order = np.argsort(-mixture.weights.now(), kind="stable")
    return Weights(
        history,
        [
            {
                "name": mixture.names[i],
                "weight": float(mixture.weights.now()[i]),
                "bits": float(mixture.model_bits[i]),
                "bits_per_row": float(mixture.model_bits[i]) / max(mixture.present, 1),
                "prior_cost_bits": float(mixture.weights.costs[i]),
                "rows_awake": int(mixture.awake[i]),
                "setting": settings[mixture.names[i]],
            }
            for i in order
        ],
    )
