"""Pool: add up what many contexts say, each with a weight that is learned on the way.

A logarithmic opinion pool (Genest & Zidek 1986) over hashed contexts and the longest match, weights by
online gradient descent on the loss (Zinkevich 2003; for sequences: Mattern 2012), calibrated on the way.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from seqmix.keep import Kept
from seqmix.kernels import contexts as kernel
from seqmix.kernels import view
from seqmix.models.clock import DAY, MINUTE, phase
from seqmix.models.context import ASK, Contexts, Table
from seqmix.models.dwell import stages
from seqmix.models.history import ChunkPast, Codes, Fork, History, Keys, Past, stir
from seqmix.models.match import TRUSTS, Follower
from seqmix.models.protocol import Floats, Setting, StatesModel

_LEVELS = 10  # contexts at the most
_CURVES, _CELLS = 4096, 24  # calibration curves; cells of one, a nat of log-odds each


def _of_bytes(past: Past) -> list[Keys]:
    word = stir(past.word(0), np.full(past.size, 101))
    return [past.order(k) for k in range(7)] + [past.order(8), word, stir(word, past.word(1).view(np.int64))]


def _of_states(past: Past) -> list[Keys]:
    run, last = stages(past.run), past.order(1)
    by_run = stir(stir(last, np.full(past.size, 102)), run)
    earlier = stir(stir(last, np.full(past.size, 103)), past.earlier(1))
    keys = [past.order(k) for k in range(6)]
    keys += [by_run, stir(by_run, past.earlier(1)), stir(earlier, past.earlier(2))]
    if past.times is not None:
        keys.append(stir(stir(last, np.full(past.size, 104)), phase(past, DAY, 10 * MINUTE)))
    return keys


class _Pool(Setting):
    kept = ("by_seen", "by_node", "by_trust", "curves")

    def __init__(self, contexts: Contexts, alphabet: int) -> None:
        self.label = ""
        self._contexts = contexts
        self._table = Table(alphabet, 20)
        self._follower = Follower(6)
        self.by_seen = np.full((_LEVELS, 14), 0.2)
        self.by_node = np.zeros((_LEVELS, 1024))
        length = np.arange(TRUSTS) // 4
        self.by_trust = np.stack([np.minimum((length + 1) / (length + 2), 0.98), np.full(TRUSTS, 0.3)], axis=1)
        centres = np.arange(_CELLS) - (_CELLS - 1) / 2
        self.curves = np.tile((1.0 / (1.0 + np.exp(-centres))).astype(np.float32), (_CURVES, 1))

    def parts(self) -> dict[str, Kept]:
        return {"table": self._table, "follower": self._follower}

    def learn(
        self, past: Past, codes: Codes, want: npt.NDArray[np.int32], laws: Floats, frozen: bool = False
    ) -> Floats:
        assert isinstance(past, ChunkPast)
        guess, trust = self._follower.follow(past, codes, frozen)
        return self._run(np.stack(list(self._contexts(past)), axis=1), guess, trust, codes, want, laws, frozen)

    def laws(self, fork: Fork, place: npt.NDArray[np.int64], states: int) -> Floats:
        guess, trust = self._follower.guesses(fork, place)
        contexts = self._contexts(fork)
        if fork.size == 1:
            one = np.zeros((1, max(states, 1)))
            nothing, want = np.full(1, ASK, dtype=np.int32), np.zeros(1, dtype=np.int32)
            self._run(np.stack(contexts, axis=1), guess, trust, nothing, want, one)
            return one[:, :states]
        whole = stir(stir(fork.order(0), guess), trust)
        for key in contexts:
            whole = stir(whole, key.view(np.int64))
        _, first, which = np.unique(whole, return_index=True, return_inverse=True)
        keys = np.stack([key[first] for key in contexts], axis=1)
        laws = np.zeros((len(keys), max(states, 1)))
        nothing = np.full(len(keys), ASK, dtype=np.int32)
        want = np.arange(len(keys), dtype=np.int32)
        self._run(keys, guess[first], trust[first], nothing, want, laws)
        return laws[which.reshape(-1), :states]

    def _run(
        self,
        keys: npt.NDArray[np.uint64],
        guess: Codes,
        trust: Codes,
        codes: Codes,
        want: npt.NDArray[np.int32],
        laws: Floats,
        frozen: bool = False,
    ) -> Floats:
        table = self._table
        table.admit(codes)
        bits = np.empty(len(codes))
        keys = np.ascontiguousarray(keys)
        levels = keys.shape[1]
        nodes = np.zeros(96, dtype=np.int32)
        seen, odds = np.zeros((96, levels), dtype=np.int32), np.empty((96, levels + 3))
        heap, mass = np.empty(16), np.zeros(len(table.mask))

        def call(start: int, lines: tuple[object, ...], size: tuple[object, ...], work: tuple[object, ...]) -> int:
            return kernel.pool(
                start, view(codes), view(keys), view(guess), view(trust), *lines, view(self.by_seen),
                view(self.by_node), view(self.by_trust), view(self.curves), *size, 1 / 250, 0.0015, frozen, *work,
                view(nodes), view(seen), view(odds), view(heap), view(mass), view(want), view(laws), view(bits),
            )  # fmt: skip

        table.run(call, len(codes))
        return bits

    def start(self, paths: int) -> npt.NDArray[np.int64]:
        return self._follower.start(paths)

    def move(self, place: npt.NDArray[np.int64], fork: Fork, codes: Codes) -> npt.NDArray[np.int64]:
        return self._follower.move(place, fork, codes)


class Pool(StatesModel):
    name = "pool"
    prior_cost = 5.0
    summary = "log-odds of many contexts and the longest match, added up with learned weights"
    source = "Genest & Zidek 1986; Zinkevich 2003; Mattern 2012"

    def bank(self, alphabet: int) -> tuple[list[Setting], History]:
        if alphabet:
            return [_Pool(_of_bytes, alphabet)], History(8, words=True)
        return [_Pool(_of_states, alphabet)], History(6, runs=True)
