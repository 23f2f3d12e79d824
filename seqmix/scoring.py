"""Score: what the probabilities were worth on rows that were predicted before they were read."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from seqmix.baselines import baselines
from seqmix.errors import OptionError, visible
from seqmix.inputs import Held, opened
from seqmix.mixture.mixture import Mixture
from seqmix.models.protocol import Ask, Model
from seqmix.models.registry import SHARE
from seqmix.reading import begun, mixture_for
from seqmix.series import Log, Rows, Series
from seqmix.series.clock import TimeTextError

if TYPE_CHECKING:
    from seqmix.mixture.numbers import NumberMixture
    from seqmix.number_scoring import NumberRun, NumberScore

LAWS_ASKED = 1 << 16
"""Accuracy and Brier score need the whole law of a row. All rows are asked for it until so many masses were
looked at; after that every second row, every fourth, and so on, each time the rows have doubled."""


@dataclass(frozen=True)
class Score:
    """Cumulative log loss of held-out rows, and what to hold it against.

    rows: scored rows that have a value. bits: their loss under the mixture. accuracy: share of rows whose most
    probable state came. brier: mean of sum over states (mass - 1 if it came)^2, 0 to 2. law_rows: rows that both
    rest on. best_model: least bits here. regret_bits: bits more than it. bound_bits: most that the regret can be
    (None when frozen). All three are None where no row was scored. models, baselines: a dict each, as in `record`.
    """

    rows: int
    bits: float
    bits_per_row: float
    accuracy: float | None
    brier: float | None
    law_rows: int
    best_model: str | None
    regret_bits: float | None
    bound_bits: float | None
    models: list[dict[str, Any]]
    baselines: list[dict[str, Any]]

    def record(self) -> dict[str, Any]:
        """JSON-ready."""
        return dict(vars(self))


class _Laws:
    """Running accuracy and Brier score, over a thinning choice of rows that depends on row numbers alone."""

    def __init__(self) -> None:
        self.scored = 0
        self.rows = 0
        self.total = 0.0
        self.hits = 0.0
        self.squares = 0.0

    def ask(self, rows: int, states: int) -> tuple[Ask, np.ndarray]:
        """The rows of the next chunk to ask for, and how many rows each stands for, (rows,)."""
        numbers = self.scored + np.arange(rows)
        crowd = np.maximum(numbers * (states + 1) // LAWS_ASKED, 0)
        stride = np.exp2(np.ceil(np.log2(crowd + 1))).astype(np.int64)
        self.scored += rows
        return Ask.of(rows, np.flatnonzero(numbers % stride == 0), states), stride

    def learn(self, ask: Ask, stride: np.ndarray, codes: np.ndarray) -> None:
        at = ask.at
        there = codes[at] >= 0
        laws, came, weight = ask.laws[: len(at)][there], codes[at][there], stride[at][there].astype(float)
        if not len(came):
            return
        # a state that was new at its row stands in the last column there: its own mass was still 0
        lines = np.arange(len(came))
        unseen = laws.shape[1] - 1
        came = np.where(laws[lines, np.minimum(came, unseen)] > 0, np.minimum(came, unseen), unseen)
        self.rows += len(came)
        self.total += float(weight.sum())
        self.hits += float(weight @ (laws.argmax(axis=1) == came))
        self.squares += float(weight @ ((laws**2).sum(axis=1) - 2 * laws[lines, came] + 1))


def score(
    log: Any,
    *,
    last: int | str | None = None,
    start: str | None = None,
    against: Any = None,
    frozen: bool = False,
    models: Sequence[str] | Sequence[Model] | None = None,
    on_row: Callable[[Rows, np.ndarray], None] | None = None,
    steps: int | None = None,
    period: int | Sequence[int] | None = None,
    resolution: float | None = None,
    compressor_share: float | None = None,
    state: Any = None,
    **reading: Any,
) -> Score | NumberScore:
    """Score held-out rows: each is predicted before it is learned, and its loss in bits added up.

    log, models, state, reading: as for `seqmix.forecast`. Scored are the last N rows of the log or "N%" of them (20 %
    unless said otherwise), or "all" rows, from a blank start or from a state (with one, all unless said otherwise);
    or with start=TIME those from that time on; or with `against` (a path, or a log opened with the alphabet of this
    one) the rows of that log after all of this one. frozen: nothing is learned from scored rows. on_row: called with
    each scored chunk and its losses (n,). Raises OptionError, DataError or StateError.

    compressor_share: as for `seqmix.forecast`.

    Numbers only: steps scores forecasts so many rows ahead too, from a moving origin; period, resolution: as for
    `seqmix.forecast`. A number or share of rows keeps the log in memory; the other choices do not.
    """
    if last is None:
        last = "20%" if state is None else "all"
    with begun(log, state, models, period, resolution, compressor_share, True, **reading) as (source, mixture, _):
        run: _Run | NumberRun
        if source.kind == "numbers":
            from seqmix.number_scoring import NumberRun

            def make(rows: Rows | None) -> NumberMixture:
                return mixture_for(source, rows, models, period, resolution, compressor_share)  # type: ignore[return-value]

            run = NumberRun(make, frozen, on_row, steps, mixture)  # type: ignore[arg-type]
        else:
            run = _Run(source.kind, frozen, models, compressor_share, on_row, mixture)
        if against is not None:
            for rows in source.chunks():
                run.learn(rows)
            with opened(against, **{**reading, "kind": source.kind, "alphabet": source.alphabet}) as other:
                for rows in other.chunks():
                    run.score(rows)
        else:
            held, first_scored = _held_out(source, last, start)
            for rows in held.chunks():
                at = first_scored(rows)
                run.learn(rows[:at])
                run.score(rows[at:])
        return run.result()


def _held_out(
    source: Log | Series, last: int | str, start: str | None
) -> tuple[Log | Series | Held, Callable[[Rows], int]]:
    """Where to read the rows from, and a function: how many rows of the next chunk are not scored yet."""
    if start is not None:
        try:
            (moment,) = source.clock.parse([start])
        except TimeTextError as error:
            raise OptionError(f"{visible(start)!r} is {error.reason}") from None
        begun = False

        def from_moment(rows: Rows) -> int:
            nonlocal begun
            if rows.times is None:
                raise OptionError("a score from a time on needs a log with times; --time names their column")
            late = rows.times >= moment
            at = 0 if begun else int(np.argmax(late)) if late.any() else len(rows)
            begun = begun or at < len(rows)
            return at

        return source, from_moment
    if last == "all":
        return source, lambda rows: 0
    count = _count(last)
    held = Held(source)
    left = held.rows - count(held.rows)

    def after_the_first(rows: Rows) -> int:
        nonlocal left
        at = min(left, len(rows))
        left -= at
        return at

    return held, after_the_first


def _count(last: int | str) -> Callable[[int], int]:
    """How many rows of a log `last` means, as a function of all its rows."""
    text = str(last)
    number = text.removesuffix("%")
    share = number != text
    if not number.isdecimal() or int(number) == 0 or (share and int(number) > 100):
        raise OptionError(f"cannot score the last {visible(text)!r} rows; give a number, a share like 20%, or all")
    return lambda rows: -(-rows * int(number) // 100) if share else min(int(number), rows)


class _Run:
    """A mixture and the baselines going along a log, first unscored, then scored."""

    def __init__(
        self,
        kind: str,
        frozen: bool,
        models: Sequence[str] | Sequence[Model] | None,
        share: float | None,
        on_row: Callable[[Rows, np.ndarray], None] | None,
        mixture: Mixture | None,
    ) -> None:
        self._kind, self._frozen, self._models, self._share, self._on_row = kind, frozen, models, share, on_row
        self._mixture = mixture
        self._baselines = baselines(kind)
        self._base_bits = dict.fromkeys(self._baselines, 0.0)
        self._laws = _Laws()
        self._rows = 0
        self._bits = 0.0
        self._before: tuple[np.ndarray, ...] | None = None

    def _ready(self, timed: bool) -> Mixture:
        if self._mixture is None:
            share = SHARE if self._share is None else self._share
            self._mixture = Mixture(self._models, kind=self._kind, timed=timed, share=share)
        return self._mixture

    def learn(self, rows: Rows) -> None:
        if len(rows):
            self._ready(rows.times is not None).absorb(rows)
            for baseline in self._baselines.values():
                baseline.absorb(rows)

    def score(self, rows: Rows) -> None:
        if not len(rows):
            return
        mixture = self._ready(rows.times is not None)
        self._mark(mixture)
        ask, stride = self._laws.ask(len(rows), max(mixture.seen, int(rows.codes.max()) + 1))
        losses = mixture.absorb(rows, ask, frozen=self._frozen)
        self._laws.learn(ask, stride, rows.codes)
        self._rows += int((rows.codes >= 0).sum())
        self._bits += float(losses.sum())
        for name, baseline in self._baselines.items():
            self._base_bits[name] += float(baseline.absorb(rows, frozen=self._frozen).sum())
        if self._on_row is not None:
            self._on_row(rows, losses)

    def _mark(self, mixture: Mixture) -> None:
        """Remember where the scored rows start."""
        if self._before is None:
            self._before = mark(mixture)

    def result(self) -> Score:
        mixture = self._ready(False)
        self._mark(mixture)
        assert self._before is not None
        laws = self._laws
        return Score(
            rows=self._rows,
            bits=self._bits,
            bits_per_row=self._bits / max(self._rows, 1),
            accuracy=laws.hits / laws.total if laws.rows else None,
            brier=laws.squares / laws.total if laws.rows else None,
            law_rows=laws.rows,
            **summed_up(mixture, self._before, self._rows, self._bits, self._frozen),
            baselines=[
                {"name": name, "bits": loss, "bits_per_row": loss / max(self._rows, 1)}
                for name, loss in self._base_bits.items()
            ],
        )


def mark(mixture: Mixture) -> tuple[np.ndarray, ...]:
    """Where a mixture stands at the first scored row: bits, weights, static_bits and rows awake of each model."""
    weights = mixture.weights
    return mixture.model_bits.copy(), weights.now(), weights.static_bits(), mixture.awake.copy()


def summed_up(mixture: Mixture, before: tuple[np.ndarray, ...], rows: int, bits: float, frozen: bool) -> dict[str, Any]:
    """best_model, regret_bits, bound_bits and models of a score.

    before: see `mark`; rows, bits: scored since.
    """
    bits_before, weights_before, bound, awake_before = before
    lost = mixture.model_bits - bits_before
    # a model that slept all along was charged what the mixture lost: it leads nothing
    best = int(np.argmin(np.where(mixture.awake > awake_before, lost, np.inf)))
    columns = zip(
        mixture.names,
        lost.tolist(),
        mixture.weights.costs.tolist(),
        weights_before.tolist(),
        mixture.weights.now().tolist(),
        (mixture.awake - awake_before).tolist(),
        strict=True,
    )
    return {
        "best_model": mixture.names[best] if rows else None,
        "regret_bits": bits - float(lost[best]) if rows else None,
        "bound_bits": float(bound[best]) if rows and not frozen else None,
        "models": [
            {
                "name": name,
                "bits": loss,
                "bits_per_row": loss / max(rows, 1),
                "prior_cost_bits": cost,
                "weight_before": weight_before,
                "weight_after": weight_after,
                "rows_awake": awake,
            }
            for name, loss, cost, weight_before, weight_after, awake in columns
        ],
    }
