"""Dwell: how long the present state has lasted decides when it ends, and the states before it, what follows."""

from __future__ import annotations

import numpy as np

from seqmix.models.context import ContextTree
from seqmix.models.history import History, Keys, Past
from seqmix.models.protocol import Setting, StatesModel


def stages(run: np.ndarray) -> np.ndarray:
    """Run lengths, exact up to 64 rows, then in steps of an eighth of their size."""
    top = np.maximum(np.log2(np.maximum(run, 1)).astype(np.int64) - 3, 3)
    return np.where(run <= 64, run, (run >> top) + (top << 8))


def _coarse_first(past: Past) -> list[Keys]:
    coarse = np.log2(np.maximum(past.run, 1)).astype(np.int64)
    return past.nested(past.lag(1), coarse, stages(past.run), past.earlier(1), past.earlier(2))


def _origin_first(past: Past) -> list[Keys]:
    return past.nested(past.lag(1), past.earlier(1), past.earlier(2), stages(past.run))


class Dwell(StatesModel):
    name = "dwell"
    kinds = ("states",)
    prior_cost = 4.0
    summary = "how long the state has lasted, and the states before it"
    source = "renewal process (Cox 1962), weighed as a context tree"

    def bank(self, alphabet: int) -> tuple[list[Setting], History]:
        settings: list[Setting] = [
            ContextTree("duration first", _coarse_first, alphabet=alphabet, alpha=1 / 10, most=18),
            ContextTree("states before it first", _origin_first, alphabet=alphabet, alpha=1 / 10, most=18),
        ]
        return settings, History(1, runs=True)
