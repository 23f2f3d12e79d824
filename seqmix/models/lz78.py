"""LZ78: cut the past into phrases, each a known phrase and one state more; predict within the tree of phrases."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from seqmix.kernels import repeats as kernel
from seqmix.kernels import view
from seqmix.models.history import Codes, Fork, History, Past
from seqmix.models.protocol import Floats, Setting, StatesModel

_MOST = 1 << 17  # phrases; then none is added any more


class Phrases(Setting):
    """The tree of phrases: edges (slots, 3) = node, state, child; visits (nodes, 2) = entered, left by a state."""

    kept = ("edges", "visits", "counters")

    def __init__(self, alphabet: int = 0) -> None:
        self.label = ""
        self.edges = np.zeros((1 << 9, 3), dtype=np.int64)
        self.visits = np.zeros((1 << 8, 2), dtype=np.int64)
        self.counters = np.array([alphabet, 1, 0], dtype=np.int64)  # states seen, nodes, node now

    def learn(
        self, past: Past, codes: Codes, want: npt.NDArray[np.int32], laws: Floats, frozen: bool = False
    ) -> Floats:
        bits = np.empty(len(codes))
        done = 0
        while done < len(codes):
            done = kernel.parse(
                done, view(codes), view(self.edges), view(self.visits), 65 - len(self.edges).bit_length(),
                len(self.visits), len(self.visits) >= _MOST, frozen, view(self.counters), view(want), view(laws),
                view(bits),
            )  # fmt: skip
            if done < len(codes):
                larger = np.zeros((2 * len(self.edges), 3), dtype=np.int64)
                kernel.replant(view(self.edges), view(larger), 65 - len(larger).bit_length())
                self.edges = larger
                self.visits = np.concatenate([self.visits, np.zeros_like(self.visits)])
        return bits

    def start(self, paths: int) -> npt.NDArray[np.int64]:
        """(paths, 1): the node where each path is."""
        return np.full((paths, 1), self.counters[2], dtype=np.int64)

    def laws(self, fork: Fork, place: npt.NDArray[np.int64], states: int) -> Floats:
        nodes, which = np.unique(place[:, 0], return_inverse=True)
        laws = np.zeros((len(nodes), max(states, 1)))
        self._at(nodes, np.full(len(nodes), -1, dtype=np.int32), laws)
        return laws[which.reshape(-1), :states]

    def move(self, place: npt.NDArray[np.int64], fork: Fork, codes: Codes) -> npt.NDArray[np.int64]:
        return self._at(place[:, 0].copy(), codes, np.zeros((1, 1)))[:, None]

    def _at(self, nodes: npt.NDArray[np.int64], codes: Codes, laws: Floats) -> npt.NDArray[np.int64]:
        """Laws at `nodes`, or the nodes that the codes lead to from there."""
        kernel.step(
            view(nodes), view(codes), view(self.edges), view(self.visits), 65 - len(self.edges).bit_length(),
            int(self.counters[0]), view(laws),
        )  # fmt: skip
        return nodes


class LZ78(StatesModel):
    name = "lz78"
    prior_cost = 4.0
    summary = "incremental parsing into ever longer phrases"
    source = "Ziv & Lempel 1978; Langdon 1983; Feder, Merhav & Gutman 1992"

    def bank(self, alphabet: int) -> tuple[list[Setting], History]:
        return [Phrases(alphabet)], History(1)
