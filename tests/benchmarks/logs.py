"""Logs for benchmarks and checks: seeded sources whose entropy is known, and the open data of tests/data."""

from __future__ import annotations

from bisect import bisect_right
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

import numpy as np

import seqmix
from seqmix.models.digits import digits_of

DATA = Path(__file__).parents[1] / "data"
LETTERS = "abcdefgh"

Floats = np.ndarray
Codes = np.ndarray


@dataclass(frozen=True)
class Source:
    """A source whose next state depends on a leaf of a tree over the last `order` states.

    laws (states^order, states): the law after each context; a context is the number that the last `order` states
    write in base `states`, the last state being its last digit. leaves (states^order,): the leaf of each context.
    """

    laws: Floats
    leaves: Codes
    order: int

    @property
    def states(self) -> int:
        return self.laws.shape[1]

    def draw(self, rows: int, seed: int) -> tuple[Codes, Codes]:
        """States of `order` + rows rows, the first `order` of them 0, and the context of each of the last `rows`."""
        contexts, states = self.laws.shape
        edges = [line[:-1] for line in np.cumsum(self.laws, axis=1).tolist()]
        codes = [0] * self.order
        before = []
        context = 0
        for spot in np.random.default_rng(seed).random(rows).tolist():
            code = bisect_right(edges[context], spot)
            codes.append(code)
            before.append(context)
            context = (context * states + code) % contexts
        return np.array(codes, dtype=np.int32), np.array(before)

    def entropy(self) -> float:
        """Bits a row in the long run, by the stationary law of the contexts."""
        contexts, states = self.laws.shape
        share = np.full(contexts, 1.0 / contexts)
        for _ in range(5000):
            # the oldest state of a context goes, the new one comes last
            after = (share[:, None] * self.laws).reshape(states, -1).sum(axis=0) if self.order else share
            moved = float(np.abs(after - share).sum())
            share = after
            if moved < 1e-13:
                break
        return float(-(share[:, None] * self.laws * np.log2(self.laws)).sum())

    def bits(self, codes: Codes, contexts: Codes) -> float:
        """Loss on a drawn log of who knows the source."""
        return float(-np.log2(self.laws[contexts, codes[self.order :]]).sum())

    def bound(self, codes: Codes, contexts: Codes) -> float:
        """Most that context-tree weighting with the KT estimator may lose on a drawn log, in bits.

        Willems, Shtarkov & Tjalkens 1995 (from memory): for a binary tree source with L leaves, at most 2 L - 1
        for the tree, and for each leaf gamma(n) = log2(n) / 2 + 1 for the n rows seen there (0 for none). A larger
        alphabet is a tree of A - 1 binary decisions (Tjalkens, Willems & Shtarkov 1994): each pays for the tree,
        whose (L - 1) / (A - 1) inner nodes and L leaves cost a bit each, and for each leaf gamma of the times the
        decision was met there.
        """
        leaves = int(self.leaves.max()) + 1
        shape = (leaves - 1) // (self.states - 1) + leaves
        counts = np.zeros((leaves, self.states))
        np.add.at(counts, (self.leaves[contexts], codes[self.order :]), 1)
        total = 0.0
        for under in decisions(self.states):
            met = counts[:, under].sum(axis=1)
            total += shape + float((0.5 * np.log2(met[met > 0]) + 1).sum())
        return total


def decisions(states: int) -> list[list[int]]:
    """The states under each binary decision of the digits of `states` states."""
    words = ["".join(f"{digit:03b}" for digit in digits_of(state)) for state in range(states)]
    places = sorted({word[:length] for word in words for length in range(len(word))})
    under = {place: [i for i, word in enumerate(words) if word.startswith(place)] for place in places}
    return [some for place, some in under.items() if len({words[i][len(place)] for i in some}) == 2]


def chain(states: int, order: int, seed: int, evenness: float = 0.3) -> Source:
    """A chain of a given order, the law of each context drawn from a Dirichlet law."""
    contexts = states**order
    return Source(_laws(contexts, states, seed, evenness), np.arange(contexts), order)


def tree_source(states: int, depth: int, leaves: int, seed: int, evenness: float = 0.3) -> Source:
    """A random context tree of about so many leaves and at most this depth, a law of its own at each leaf."""
    rng = np.random.default_rng(seed)
    suffixes: list[tuple[int, ...]] = [()]  # the states of a leaf, the last one first
    while len(suffixes) < leaves:
        short = [suffix for suffix in suffixes if len(suffix) < depth]
        grown = short[int(rng.integers(len(short)))]
        suffixes.remove(grown)
        suffixes += [(*grown, state) for state in range(states)]
    order = max(map(len, suffixes))
    of = np.empty(states**order, dtype=np.int64)
    numbers = np.arange(len(of))
    for leaf, suffix in enumerate(suffixes):
        fits = np.ones(len(of), dtype=bool)
        for back, state in enumerate(suffix):
            fits &= numbers // states**back % states == state
        of[fits] = leaf
    return Source(_laws(len(suffixes), states, seed + 1, evenness)[of], of, order)


def _laws(lines: int, states: int, seed: int, evenness: float) -> Floats:
    laws = np.random.default_rng(seed).dirichlet(np.full(states, evenness), lines) + 1e-4
    return laws / laws.sum(axis=1, keepdims=True)


def noisy_repeats(seed: int, rows: int = 6000, states: int = 6, programs: int = 8, noise: float = 0.01) -> Codes:
    """Programs of 60 to 200 rows, one after the other in random order; some rows are replaced by any state."""
    rng = np.random.default_rng(seed)
    library = [rng.integers(0, states, rng.integers(60, 201)) for _ in range(programs)]
    made: list[Codes] = []
    while sum(map(len, made)) < rows:
        made.append(library[rng.integers(programs)])
    codes = np.concatenate(made)[:rows]
    return by_appearance(np.where(rng.random(rows) < noise, rng.integers(0, states, rows), codes))


def by_appearance(codes: Codes) -> Codes:
    """The same states numbered in the order in which they first appear."""
    _, first, which = np.unique(codes, return_index=True, return_inverse=True)
    rank = np.empty(len(first), dtype=np.int32)
    rank[np.argsort(first)] = np.arange(len(first), dtype=np.int32)
    return rank[which.reshape(-1)]


def write_lines(path: Path, codes: Codes) -> None:
    """One state a line, as letters."""
    path.write_text("".join(LETTERS[code] + "\n" for code in codes.tolist()), encoding="ascii")


def real_logs() -> Iterator[tuple[str, seqmix.Series]]:
    """The open data as logs of states and bytes."""
    yield "alice29, bytes", seqmix.read(DATA / "alice29.txt", kind="bytes")
    yield "phiX174, bases", seqmix.Series.of(list((DATA / "dna_phix174.txt").read_text().strip()))
    yield "births, day of the week", seqmix.read(DATA / "us_births_1969_1988.csv", column="day_of_week", kind="states")
    yield (
        "weather, wind direction",
        seqmix.read(DATA / "weather_jfk_2013.csv", column="wind_dir", time="time", kind="states"),
    )
    yield "sensors, event label", seqmix.read(DATA / "sensor_multihop_labelled.csv", column="label", kind="states")
