"""Estimators of a coin and of the unseen, against published values and against scipy."""

from __future__ import annotations

import numpy as np
import pytest
from exact import context_tree, losses, mass
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats
from scipy.special import comb

from seqmix.models import registry
from seqmix.models.novelty import Novelty
from seqmix.series.rows import Rows


# Willems, Shtarkov & Tjalkens 1995, table of the KT estimator, from memory; recomputed.
@pytest.mark.parametrize(
    ("zeros", "ones", "expected"),
    [(2, 0, 3 / 8), (3, 0, 5 / 16), (1, 1, 1 / 8), (2, 1, 1 / 16), (2, 2, 3 / 128), (3, 2, 3 / 256)],
)
def test_krichevsky_trofimov(zeros: int, ones: int, expected: float) -> None:
    codes = np.array([0] * zeros + [1] * ones)
    for seed in range(3):  # the order of the rows does not matter
        assert mass(context_tree(0), np.random.default_rng(seed).permutation(codes)) == pytest.approx(expected)


# Laplace's rule of succession: after s of n, the chance is (s + 1) / (n + 2). From memory (Laplace 1774).
@given(st.lists(st.booleans(), min_size=1, max_size=60))
@settings(max_examples=40, deadline=None)
def test_rule_of_succession(rows: list[bool]) -> None:
    bits = losses(context_tree(0, alpha=1.0), rows)
    for n, row in enumerate(rows):
        same = sum(earlier == row for earlier in rows[:n])
        assert np.exp2(-bits[n]) == pytest.approx((same + 1) / (n + 2))


# The estimator that adds alpha to both counts is the beta-binomial law with parameters alpha, alpha (scipy).
@pytest.mark.parametrize("alpha", [1 / 2, 1.0, 1 / 10, 1 / 16])
@pytest.mark.parametrize(("rows", "ones"), [(1, 0), (7, 3), (40, 0), (40, 11), (200, 150), (1000, 999)])
def test_beta_binomial(alpha: float, rows: int, ones: int) -> None:
    codes = np.random.default_rng(rows).permutation([1] * ones + [0] * (rows - ones))
    bits = float(losses(context_tree(0, alpha=alpha), codes).sum())
    expected = (np.log(comb(rows, ones)) - stats.betabinom(rows, alpha, alpha).logpmf(ones)) / np.log(2)
    assert bits == pytest.approx(expected, abs=1e-8)


# Good 1953 puts the share of rows whose state came once on the unseen. As documented here: after n rows, s of
# them of states seen once, (s + 1/2) / (n + 1); before the first row, all of it.
@given(st.lists(st.integers(0, 12), min_size=1, max_size=80))
@settings(max_examples=60, deadline=None)
def test_chance_of_the_unseen(labels: list[int]) -> None:
    numbers: dict[int, int] = {}
    codes = np.array([numbers.setdefault(label, len(numbers)) for label in labels], dtype=np.int32)
    losses, chances = Novelty(0).absorb(codes)
    for n in range(len(codes)):
        earlier = codes[:n].tolist()
        singles = sum(earlier.count(code) == 1 for code in set(earlier))
        expected = (singles + 0.5) / (n + 1) if n else 1.0
        assert chances[n] == pytest.approx(expected, rel=1e-12)
        new = codes[n] not in earlier
        assert losses[n] == pytest.approx(-np.log2(expected if new else 1 - expected), abs=1e-12)


@pytest.mark.parametrize("model", [model for model in registry.MODELS if not model.needs_times])
def test_every_model_keeps_that_mass_for_the_unseen(model: type) -> None:
    one = model(0)
    assert one.predict().unseen == 1.0
    one.absorb(Rows(np.array([0, 1, 0, 2, 3, 0], dtype=np.int32), None, 0))
    assert one.predict().unseen == pytest.approx((3 + 0.5) / (6 + 1))
