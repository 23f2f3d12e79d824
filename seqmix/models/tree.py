"""Tree: how many of the last states matter depends on what they were; all context trees are weighed at once."""

from __future__ import annotations

from seqmix.models.context import ContextTree
from seqmix.models.history import History, Keys, Past
from seqmix.models.protocol import Setting, StatesModel

DEPTH = 16


def _orders(past: Past) -> list[Keys]:
    return [past.order(k) for k in range(DEPTH + 1)]


class Tree(StatesModel):
    name = "tree"
    prior_cost = 3.0
    summary = f"all context trees down to {DEPTH} rows back, weighed"
    source = "Willems, Shtarkov & Tjalkens 1995; Tjalkens, Willems & Shtarkov 1994"

    def bank(self, alphabet: int) -> tuple[list[Setting], History]:
        most = 20 if alphabet else 17
        settings: list[Setting] = [
            ContextTree("prior count 1/2", _orders, alphabet=alphabet, alpha=1 / 2, most=most),
            ContextTree(
                "prior count 1/10, recent rows", _orders, alphabet=alphabet, alpha=1 / 10, limit=250, most=most
            ),
        ]
        return settings, History(DEPTH)
