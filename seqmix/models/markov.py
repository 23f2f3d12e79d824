"""Markov: the next state depends on the last k states, and on nothing else."""

from __future__ import annotations

from seqmix.models.context import Contexts, ContextTree
from seqmix.models.history import History, Keys, Past
from seqmix.models.protocol import Setting, StatesModel

ORDERS = (1, 2, 3, 4)


def _last(k: int) -> Contexts:
    def contexts(past: Past) -> list[Keys]:
        return [past.order(k)]

    return contexts


class Markov(StatesModel):
    name = "markov"
    prior_cost = 3.0
    summary = "the last 1 to 4 states decide"
    source = "Krichevsky & Trofimov 1981"

    def bank(self, alphabet: int) -> tuple[list[Setting], History]:
        settings: list[Setting] = [
            ContextTree(f"order {k}, prior count {text}", _last(k), alphabet=alphabet, alpha=alpha, most=18)
            for k in ORDERS
            for alpha, text in ((1 / 2, "1/2"), (1 / 16, "1/16"))
            if text == "1/16" or not alphabet  # a byte has few successors: a half for each of 256 is too much
        ]
        return settings, History(max(ORDERS))
