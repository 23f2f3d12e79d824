"""The context-tree setting of the library in the exact form of the papers: all levels at once, states known."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from seqmix.models.context import ContextTree
from seqmix.models.history import History, Keys, Past


def context_tree(depth: int, states: int = 2, alpha: float = 0.5) -> ContextTree:
    """A blank tree over the last `depth` states, of an alphabet of `states` states known beforehand.

    A growing alphabet charges a first appearance to the law of the unseen, outside the tree; the papers know
    no such event, so all states are marked as seen.
    """

    def orders(past: Past) -> list[Keys]:
        return [past.order(k) for k in range(depth + 1)]

    tree = ContextTree("exact", orders, alpha=alpha, fresh=depth + 1)
    table = tree._table
    table.admit(np.arange(states, dtype=np.int32))
    for line, digit in table.digits.path[: table.digits.path_start[states]]:
        table.mask[line] |= np.uint8(1 << digit)
    table.counters[0] = states
    return tree


def losses(tree: ContextTree, codes: Sequence[int] | np.ndarray, given: int = 0) -> np.ndarray:
    """Bits of each row after the first `given`, which are looked back at but neither charged nor learned."""
    codes = np.asarray(codes, dtype=np.int32)
    learned = codes.copy()
    learned[:given] = -1
    past = History(32).ahead(codes, None)
    return tree.learn(past, learned, np.full(len(codes), -1, dtype=np.int32), np.zeros((1, 1)))[given:]


def mass(tree: ContextTree, codes: Sequence[int] | np.ndarray, given: int = 0) -> float:
    """Mass of all rows after the first `given` together."""
    return float(np.exp2(-losses(tree, codes, given).sum()))
