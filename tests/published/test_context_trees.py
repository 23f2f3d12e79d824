"""Context-tree weighting against the published example and against the sum over all trees, exactly."""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from fractions import Fraction

import pytest
from exact import context_tree, mass
from hypothesis import given, settings
from hypothesis import strategies as st
from logs import decisions

Tree = tuple[tuple[int, ...], ...]
"""The leaves of a tree, each the states back from the row: the last one first."""


def trees(symbols: Sequence[int], depth: int, at: tuple[int, ...] = ()) -> list[tuple[Tree, Fraction]]:
    """All complete trees from `at` down, each with its prior: a bit for every node that is not at full depth."""
    if not depth:
        return [((at,), Fraction(1))]
    found: list[tuple[Tree, Fraction]] = [((at,), Fraction(1, 2))]
    for parts in itertools.product(*(trees(symbols, depth - 1, (*at, symbol)) for symbol in symbols)):
        prior = Fraction(1, 2)
        leaves: Tree = ()
        for part, share in parts:
            leaves += part
            prior *= share
        found.append((leaves, prior))
    return found


def estimated(bits: Sequence[int], alpha: Fraction) -> Fraction:
    """Mass of a sequence of bits under the estimator that adds alpha to both counts."""
    counts = [alpha, alpha]
    total = Fraction(1)
    for bit in bits:
        total *= counts[bit] / sum(counts)
        counts[bit] += 1
    return total


def over_all_trees(
    codes: Sequence[int], given: int, depth: int, symbols: Sequence[int], states: int, alpha: Fraction
) -> Fraction:
    """Sum over all trees of prior x mass, for each binary decision of the alphabet, multiplied."""
    every = trees(symbols, depth)
    before = [-3] * depth + list(codes)  # -3 stands for rows before the first
    total = Fraction(1)
    for under in decisions(states):
        ones = under_one(under, states)
        mixed = Fraction(0)
        for leaves, prior in every:
            bits: dict[tuple[int, ...], list[int]] = {leaf: [] for leaf in leaves}
            for t in range(given, len(codes)):
                if codes[t] in under:
                    back = before[t : t + depth][::-1]
                    leaf = next(leaf for leaf in leaves if tuple(back[: len(leaf)]) == leaf)
                    bits[leaf].append(int(codes[t] in ones))
            for met in bits.values():
                prior *= estimated(met, alpha)
            mixed += prior
        total *= mixed
    return total


def under_one(under: list[int], states: int) -> list[int]:
    """Of the states under a decision, those that one of its two bits leads to."""
    smaller = [other for other in decisions(states) if set(other) < set(under)]
    sides = [side for side in smaller if not any(set(side) < set(other) for other in smaller)]
    return sides[0] if sides else under[:1]


def test_decisions_split_the_alphabet() -> None:
    assert decisions(2) == [[0, 1]]
    assert sorted(map(sorted, decisions(3))) == [[0, 1, 2], [1, 2]]


# Willems, Shtarkov & Tjalkens 1995, the example of depth 3, from memory; recomputed exactly.
def test_published_example() -> None:
    codes = [0, 1, 0, 0, 1, 1, 0, 1, 0, 0]
    assert over_all_trees(codes, 3, 3, (0, 1), 2, Fraction(1, 2)) == Fraction(95, 32768)
    assert mass(context_tree(3), codes, 3) == pytest.approx(95 / 32768, rel=1e-6)


# The weighted mass at the root is the sum over all trees (same paper): short sequences, by brute force.
@given(st.integers(0, 3), st.lists(st.integers(0, 1), min_size=3, max_size=14), st.sampled_from([(1, 2), (1, 10)]))
@settings(max_examples=60, deadline=None)
def test_sum_over_all_trees(depth: int, codes: list[int], alpha: tuple[int, int]) -> None:
    share = Fraction(*alpha)
    expected = over_all_trees(codes, 3, depth, (0, 1), 2, share)
    assert mass(context_tree(depth, alpha=float(share)), codes, 3) == pytest.approx(float(expected), rel=1e-5)


@given(st.integers(0, 2), st.lists(st.integers(0, 2), min_size=2, max_size=10))
@settings(max_examples=40, deadline=None)
def test_sum_over_all_trees_of_three_states(depth: int, codes: list[int]) -> None:
    """Three states are two binary decisions, each with a weighting of its own (Tjalkens, Willems & Shtarkov 1994)."""
    expected = over_all_trees(codes, 2, depth, (0, 1, 2), 3, Fraction(1, 2))
    assert mass(context_tree(depth, states=3), codes, 2) == pytest.approx(float(expected), rel=1e-5)


@given(st.integers(1, 2), st.lists(st.integers(0, 1), min_size=1, max_size=10))
@settings(max_examples=30, deadline=None)
def test_before_the_first_row_stands_a_symbol_of_its_own(depth: int, codes: list[int]) -> None:
    expected = over_all_trees(codes, 0, depth, (-3, 0, 1), 2, Fraction(1, 2))
    assert mass(context_tree(depth), codes) == pytest.approx(float(expected), rel=1e-5)


@pytest.mark.parametrize(("states", "rows"), [(2, 8), (3, 5), (8, 3)])
def test_masses_of_all_sequences_add_to_one(states: int, rows: int) -> None:
    total = sum(mass(context_tree(3, states), codes) for codes in itertools.product(range(states), repeat=rows))
    assert total == pytest.approx(1, abs=1e-6)
