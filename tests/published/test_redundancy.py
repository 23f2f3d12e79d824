"""What context-tree weighting loses more than who knows the source, against the published bound.

Willems, Shtarkov & Tjalkens 1995, from memory: on every sequence, the code length is at most that of a tree source
with L leaves + 2 L - 1 + sum over leaves of (log2(rows there) / 2 + 1). `Source.bound` says how an alphabet of more
than two states is accounted for. Rows are held against the loss of who knows the source, whose mean is the entropy:
the noise of a drawn log, some hundreds of bits, is in both.
"""

from __future__ import annotations

import numpy as np
import pytest
from exact import context_tree, losses
from logs import Source, chain, tree_source

ROWS = 20_000
SOURCES = {
    "binary, order 0": (chain(2, 0, seed=11), 8),
    "binary, order 1": (chain(2, 1, seed=12), 8),
    "binary, order 3": (chain(2, 3, seed=13), 8),
    "binary, order 5, all laws near even": (chain(2, 5, seed=14, evenness=50.0), 8),
    "binary tree of 4 leaves": (tree_source(2, 5, 4, seed=15), 8),
    "binary tree of 20 leaves": (tree_source(2, 8, 20, seed=16), 10),
    "3 states, order 2": (chain(3, 2, seed=17), 5),
    "8 states, order 1": (chain(8, 1, seed=18), 4),
    "8 states, order 2": (chain(8, 2, seed=19), 4),
    "4 states, tree of 25 leaves": (tree_source(4, 5, 25, seed=20), 6),
}


@pytest.mark.parametrize(("source", "depth"), SOURCES.values(), ids=SOURCES)
@pytest.mark.parametrize("seed", [1, 2])
def test_redundancy_stays_under_the_bound(source: Source, depth: int, seed: int) -> None:
    codes, contexts = source.draw(ROWS, seed)
    # the rows before the first are given, as in the paper
    given = np.concatenate([np.zeros(depth - source.order, dtype=np.int32), codes])
    bits = float(losses(context_tree(depth, source.states), given, depth).sum())
    assert bits - source.bits(codes, contexts) <= source.bound(codes, contexts)


@pytest.mark.parametrize(("source", "depth"), SOURCES.values(), ids=SOURCES)
def test_known_entropy_is_what_the_source_loses(source: Source, depth: int) -> None:
    """Over 200,000 rows the loss of who knows the source comes near the entropy (six standard errors)."""
    codes, contexts = source.draw(200_000, seed=3)
    each = -np.log2(source.laws[contexts, codes[source.order :]])
    error = each.reshape(-1, 1000).mean(axis=1).std() / np.sqrt(200)
    assert source.entropy() == pytest.approx(each.mean(), abs=6 * error)
