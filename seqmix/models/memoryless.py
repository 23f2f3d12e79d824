"""Memoryless: each state comes as often as it has so far, or as it has lately."""

from __future__ import annotations

from seqmix.models.context import ContextTree
from seqmix.models.history import History, Keys, Past
from seqmix.models.protocol import Setting, StatesModel


def _nothing(past: Past) -> list[Keys]:
    return [past.order(0)]


class Memoryless(StatesModel):
    name = "memoryless"
    prior_cost = 2.0
    summary = "each state as often as so far, or as lately"
    source = "Krichevsky & Trofimov 1981"

    def bank(self, alphabet: int) -> tuple[list[Setting], History]:
        settings: list[Setting] = [
            ContextTree("all rows", _nothing, alphabet=alphabet, most=12),
            ContextTree("last few hundred rows", _nothing, alphabet=alphabet, limit=250, most=12),
            ContextTree("last few dozen rows", _nothing, alphabet=alphabet, limit=25, alpha=0.1, most=12),
        ]
        return settings, History(1)
