"""Score of a log of numbers: bits, and how far and how sure the forecasts were."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass
from itertools import repeat
from typing import Any

import numpy as np

from seqmix.mixture.numbers import LIGHT, NumberMixture
from seqmix.models.laws import Floats, NumberLaw
from seqmix.number_baselines import NumberBaseline, number_baselines
from seqmix.scoring import mark, summed_up
from seqmix.series import Rows

LAWS_ASKED = 400
"""Errors, CRPS and coverage need the whole law of a row. All rows are asked for it until so many were; after that
every second row, every fourth, and so on, each time the rows have doubled."""

CENTRAL = (0.5, 0.8, 0.9)
"""Central intervals whose coverage is counted."""

PINBALL = (0.05, 0.1, 0.25, 0.5, 0.75, 0.9, 0.95)
"""Levels whose quantile loss is averaged."""


@dataclass(frozen=True)
class NumberScore:
    """Cumulative log loss of held-out rows of numbers, and what to hold it against.

    rows: scored rows that have a value. bits: their loss under the mixture. mae: mean absolute error of the median;
    rmse: root mean square error of the median; crps: mean continuous ranked probability score; pinball: mean
    quantile loss; all in the unit of the log. coverage: share of rows inside the central intervals. pit: in how
    many rows the value fell into each tenth of its law. law_rows: rows that these rest on. The rest is as in `Score`.
    ahead: the same, but bits, for each step of forecasts from a moving origin; empty unless asked for.
    """

    rows: int
    bits: float
    bits_per_row: float
    mae: float | None
    rmse: float | None
    crps: float | None
    pinball: float | None
    coverage: dict[str, float] | None
    pit: list[int]
    law_rows: int
    best_model: str | None
    regret_bits: float | None
    bound_bits: float | None
    models: list[dict[str, Any]]
    baselines: list[dict[str, Any]]
    ahead: list[dict[str, Any]]

    def record(self) -> dict[str, Any]:
        """JSON-ready."""
        record = dict(vars(self))
        if not self.ahead:
            del record["ahead"]
        return record


class _Measures:
    """Running means over rows, each standing for `weight` rows."""

    def __init__(self) -> None:
        self.rows = 0
        self.total = 0.0
        self.sums = np.zeros(4 + len(CENTRAL))
        self.pit = np.zeros(10)

    def learn(self, law: NumberLaw, value: float, width: float, weight: float) -> None:
        with np.errstate(over="ignore"):  # a measure too large for a float is infinite
            self._learn(law, value, width, weight)

    def _learn(self, law: NumberLaw, value: float, width: float, weight: float) -> None:
        sides = [(1 - share) / 2 for share in CENTRAL] + [(1 + share) / 2 for share in CENTRAL]
        quantiles = law.quantile([*PINBALL, *sides])
        spots, low, high = np.split(quantiles, [len(PINBALL), len(PINBALL) + len(CENTRAL)])
        levels = np.array(PINBALL)
        error = value - spots[PINBALL.index(0.5)]
        pinball = np.mean(np.where(value < spots, 1 - levels, -levels) * (spots - value))
        half = 0.5 * width  # a recorded value may have been anything in its cell: the share of it inside counts
        inside = np.clip((np.minimum(high, value + half) - np.maximum(low, value - half)) / width, 0.0, 1.0)
        measured = np.concatenate([[abs(error), error**2, law.crps(value), pinball], inside])
        self.sums += weight * measured
        low_mass, high_mass = law.cdf([value - half, value + half])
        self.pit[min(int(5 * (low_mass + high_mass)), 9)] += weight
        self.total += weight
        self.rows += 1

    def fields(self) -> dict[str, Any]:
        """mae, rmse, crps, pinball and coverage; None where there is no row."""
        if not self.rows:
            return dict.fromkeys(("mae", "rmse", "crps", "pinball", "coverage"))
        mean = (self.sums / self.total).tolist()
        coverage = {f"{share:g}": inside for share, inside in zip(CENTRAL, mean[4:], strict=True)}
        return {"mae": mean[0], "rmse": mean[1] ** 0.5, "crps": mean[2], "pinball": mean[3], "coverage": coverage}


class NumberRun:
    """A mixture of numbers and the baselines going along a log, first unscored, then scored (see `scoring`)."""

    def __init__(
        self,
        make: Callable[[Rows | None], NumberMixture],
        frozen: bool,
        on_row: Callable[[Rows, Floats], None] | None,
        steps: int | None,
        mixture: NumberMixture | None,
    ) -> None:
        self._make, self._frozen, self._on_row, self._steps = make, frozen, on_row, steps
        self._mixture = mixture
        self._baselines: list[NumberBaseline] = []
        self._base_bits: list[float] = []
        self._measures = _Measures()
        self._ahead = [_Measures() for _ in range(steps or 0)]
        self._waiting: list[tuple[int, int, NumberLaw, int]] = []  # row, step, law of it, rows it stands for
        self._scored = 0  # rows, missing ones too
        self._rows = 0
        self._bits = 0.0
        self._before: tuple[Floats, ...] | None = None

    def _ready(self, rows: Rows | None) -> NumberMixture:
        if self._mixture is None:
            self._mixture = self._make(rows)
        if not self._baselines:
            self._baselines = number_baselines(self._mixture.context.periods)
            self._base_bits = [0.0] * len(self._baselines)
        return self._mixture

    def learn(self, rows: Rows) -> None:
        if len(rows):
            mixture = self._ready(rows)
            mixture.absorb(rows)
            self._follow(mixture)

    def _follow(self, mixture: NumberMixture) -> list[Floats]:
        """Losses of the baselines on the rows that the mixture absorbed last."""
        cells = mixture.latest
        assert cells is not None
        return [baseline.absorb(cells) + mixture.latest_events for baseline in self._baselines]

    def score(self, rows: Rows) -> None:
        if not len(rows):
            return
        mixture = self._ready(rows)
        self._mark(mixture)
        done = 0
        while done < len(rows):
            stride = _stride(self._scored)
            asked = self._scored % stride == 0
            stop = done + 1
            if stride == 1 and not self._steps:
                stop = min(len(rows), done + LAWS_ASKED - self._scored)
            elif not asked:
                stop = min(len(rows), done + stride - self._scored % stride)
            self._score(mixture, rows[done:stop], stride if asked else 0)
            done = stop

    def _score(self, mixture: NumberMixture, rows: Rows, stands_for: int) -> None:
        """Score rows; their laws are looked at if each stands for some."""
        laws: Iterable[NumberLaw | None] = repeat(None)
        if stands_for:
            if self._steps:
                self._look_ahead(mixture, None if rows.times is None else int(rows.times[0]), stands_for)
            losses, laws = mixture.tell(rows, self._frozen)
        else:
            losses = mixture.absorb(rows, frozen=self._frozen)
        base = self._follow(mixture)
        for at, (value, width, law) in enumerate(zip(*mixture.latest_cells.tolist(), laws, strict=False)):
            if np.isnan(value):
                continue
            if law is not None:
                self._measures.learn(law.lighter(LIGHT), value, width, stands_for)
            for _, step, ahead, weight in (one for one in self._waiting if one[0] == self._scored + at):
                self._ahead[step].learn(ahead, value, width, weight)
        self._scored += len(rows)
        self._waiting = [one for one in self._waiting if one[0] >= self._scored]
        self._rows += int((rows.codes >= 0).sum())
        self._bits = _added(self._bits, losses)
        self._base_bits = [_added(total, more) for total, more in zip(self._base_bits, base, strict=True)]
        if self._on_row is not None:
            self._on_row(rows, losses)

    def _look_ahead(self, mixture: NumberMixture, time: int | None, stands_for: int) -> None:
        steps = len(self._ahead)
        cadence = mixture.context.cadence or 0
        times = None if time is None else [time + step * cadence for step in range(steps)]
        for step, law in enumerate(mixture.walk(steps, times)):
            self._waiting.append((self._scored + step, step, law, stands_for))

    def _mark(self, mixture: NumberMixture) -> None:
        """Remember where the scored rows start."""
        if self._before is None:
            self._before = mark(mixture)

    def result(self) -> NumberScore:
        mixture = self._ready(None)
        self._mark(mixture)
        assert self._before is not None
        summary = summed_up(mixture, self._before, self._rows, self._bits, self._frozen)
        names = [baseline.name for baseline in self._baselines]
        return NumberScore(
            rows=self._rows,
            bits=self._bits,
            bits_per_row=self._bits / max(self._rows, 1),
            **self._measures.fields(),
            pit=[round(count) for count in self._measures.pit.tolist()],
            law_rows=self._measures.rows,
            **summary,
            baselines=[
                {"name": name, "bits": loss, "bits_per_row": loss / max(self._rows, 1)}
                for name, loss in zip(names, self._base_bits, strict=True)
            ],
            ahead=[
                {"step": step, "rows": measures.rows, **measures.fields()}
                for step, measures in enumerate(self._ahead, 1)
            ],
        )


def _added(total: float, losses: Floats) -> float:
    """A sum with more terms, one after the other: no cut into chunks changes it."""
    return float(np.add.accumulate(np.append(total, losses))[-1])


def _stride(scored: int) -> int:
    """Every how many rows a law is asked for, after so many scored rows."""
    return 1 << max(scored // LAWS_ASKED, 0).bit_length()
