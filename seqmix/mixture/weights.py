"""Posterior weights over models: static Bayes and fixed share, half and half.

Static Bayes loses at most the prior cost more than any model, on any log. Fixed share (Herbster & Warmuth 1998)
follows a log whose best model changes. Mixed half and half they lose at most one bit more than the better one.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import numpy.typing as npt

from seqmix.keep import Kept
from seqmix.kernels import view
from seqmix.kernels import weights as kernel

Floats = npt.NDArray[np.float64]

RATES = (0.05, 0.005, 0.0005)
"""Chances, a row, that another model takes over; each rate starts with an equal part of the switching half."""


class Weights(Kept):
    """Weights of models with prior 2^-cost, normalised; `rates` = () is static Bayes alone."""

    kept = ("prior", "costs", "behind", "shares", "camps")

    def __init__(self, costs: Sequence[float] | Floats, rates: Sequence[float] = RATES) -> None:
        """costs (models,): prior costs in bits, up to a constant."""
        if not all(0.0 < rate < 1.0 for rate in rates):
            raise ValueError("fixed-share rates lie between 0 and 1")
        prior = np.exp2(-np.asarray(costs, dtype=np.float64))
        self.prior: Floats = prior / prior.sum()
        self.costs: Floats = -np.log2(self.prior)  # bits, normalised
        self._rates = np.array(rates, dtype=np.float64)
        self.behind: Floats = self.costs.copy()
        self.shares: Floats = np.tile(self.prior, (len(rates), 1))
        halves = [1.0] + [1.0 + np.log2(len(rates))] * len(rates) if rates else [0.0]
        self.camps: Floats = np.array(halves, dtype=np.float64)

    def mix(self, losses: Floats, want: npt.NDArray[np.int32], frozen: bool = False) -> tuple[Floats, Floats]:
        """Learn losses (n, models) in bits, NaN = asleep; `frozen` leaves the weights as they are.

        Returns the loss of the mixture (n,), NaN where all sleep, and the weights before the rows with want[t] >= 0 of
        the models awake there, (asked, models).
        """
        rows, models = losses.shape
        before = np.empty((max(int(want.max(initial=-1)) + 1, 1), models))
        if models == 1:
            before[:] = 1.0
            return losses[:, 0].copy(), before
        bits = np.empty(rows)
        # a memoryview cannot have zero rows: without rates, pass one line that no rate reads
        shares = self.shares if len(self._rates) else np.zeros((1, models))
        kernel.update(
            view(np.ascontiguousarray(losses)), view(self.prior), len(self._rates),
            view(self._rates if len(self._rates) else np.zeros(1)), view(self.behind), view(shares),
            view(self.camps), frozen, view(np.empty(models + 1 + len(self._rates))),
            view(want), view(before), view(bits),
        )  # fmt: skip
        return bits, before

    def now(self) -> Floats:
        """Weights (models,) after all rows so far; they add to 1."""
        return self.of(np.ones(len(self.behind), dtype=bool))

    def of(self, awake: npt.NDArray[np.bool_]) -> Floats:
        """The same where only some models are awake: in every camp, these share its weight; the others have none."""
        rows = np.where(awake, 0.0, np.nan)[None, :]
        before: Floats = self.mix(rows, np.zeros(1, dtype=np.int32), frozen=True)[1][0]
        return before

    def ahead(self, steps: int) -> Floats:
        """Weights (steps, models) of the models that will be in force at each of the next rows.

        Static Bayes holds on to its weights; under fixed share a model may take over at every row between.
        """
        camps = np.exp2(-self.camps)
        held = (1.0 - self._rates) ** np.arange(steps)[:, None]  # (steps, rates)
        weights = camps[0] * np.exp2(-self.behind) + (held * camps[1:]) @ self.shares
        weights += ((1.0 - held) @ camps[1:])[:, None] * self.prior
        return weights / weights.sum(axis=1, keepdims=True)

    def keep(self, which: npt.NDArray[np.intp]) -> None:
        """Forget all models but these; their weights are made to add to 1 again."""
        behind = self.behind[which] - self.behind[which].min()
        self.behind = behind + np.log2(np.exp2(-behind).sum())
        shares = self.shares[:, which]
        self.shares = np.ascontiguousarray(shares / shares.sum(axis=1, keepdims=True))
        self.prior = self.prior[which] / self.prior[which].sum()
        self.costs = -np.log2(self.prior)

    def static_bits(self) -> Floats:
        """Minus log2 of the weight of each model within the static half, (models,), that half's own weight in it.

        From here on the mixture loses at most so many bits more than the model.
        """
        return self.behind + self.camps[0]
