"""Settings that learn in hashed contexts: the table of lines they share, and context-tree weighting over it."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Any

import numpy as np
import numpy.typing as npt

from seqmix.keep import Kept
from seqmix.kernels import contexts as kernel
from seqmix.kernels import view
from seqmix.models.digits import BYTES, SIDES, STATES, Digits
from seqmix.models.history import Codes, Fork, Keys, Past
from seqmix.models.protocol import Floats, Setting

Contexts = Callable[[Past], Sequence[Keys]]
"""The contexts of every row, as hashes (n,), for nested contexts the shortest first."""

ASK = -2  # as a code: give the law, learn nothing
_ASK_ONE, _FIRST_LINE = np.full(1, ASK, dtype=np.int32), np.zeros(1, dtype=np.int32)

_DEEPEST = 32  # digits of a state: enough for 8^16 states


class Table(Kept):
    """Lines of decisions found by hash (see kernels/contexts_cy.py): doubles when half full, up to 2^most lines.

    At that size a new line takes the place of the least visited of the eight it may stand in.
    """

    kept = ("lines", "mask", "counters")

    def __init__(self, alphabet: int, most: int) -> None:
        self.digits: Digits = BYTES if alphabet else STATES
        self._most = most
        self.lines = np.zeros((1 << 9, 8), dtype=np.uint64)
        self.mask = np.zeros(self.digits.lines, dtype=np.uint8)  # digits in use, for each place of a digit
        self.counters = np.array([alphabet, 0], dtype=np.int64)  # states seen, lines used
        for line, digit in self.digits.path:
            if alphabet:
                self.mask[line] |= np.uint8(1 << digit)
        self._slots = np.zeros(_DEEPEST, dtype=np.int64)
        self._known = np.zeros(_DEEPEST, dtype=np.int32)

    def state(self, copy: bool = True) -> dict[str, Any]:
        """The mask as far as it is used: how far the digits reach depends on what else the process has read."""
        return super().state(copy) | {"mask": np.trim_zeros(self.mask, "b").copy()}

    def restore(self, state: dict[str, Any]) -> None:
        super().restore(state)
        self.digits.grow(int(self.counters[0]))
        used, self.mask = self.mask, np.zeros(self.digits.lines, dtype=np.uint8)
        self.mask[: len(used)] = used

    def admit(self, codes: Codes) -> None:
        """Make room for the digits of all these states."""
        self.digits.grow(int(codes.max(initial=-1)) + 1)
        if len(self.mask) < self.digits.lines:
            self.mask = np.concatenate([self.mask, np.zeros(self.digits.lines - len(self.mask), dtype=np.uint8)])

    def run(self, call: Callable[..., int], rows: int, *middle: object) -> None:
        """Run a kernel over `rows` rows; it stops wherever the table must grow first."""
        done = 0
        while done < rows:
            size = len(self.lines)
            most = size >= 1 << self._most
            done = call(
                done,
                (view(self.digits.path_start), view(self.digits.path), view(self.digits.child), view(SIDES),
                 view(self.mask), view(self.lines), view(self.lines.view(np.uint16)),
                 view(self.lines.view(np.float32))),
                (view(self.counters), 1 << 62 if most else size // 2, 65 - size.bit_length()),
                (view(self._slots), view(self._known)),
            )  # fmt: skip
            if done < rows:
                # in place, so that no memory is touched twice; no view of the lines outlives a call
                self.lines.resize((2 * size, 8), refcheck=False)
                held = np.empty((17, 8), dtype=np.uint64)
                self.counters[1] = kernel.spread(view(self.lines), size, view(held), 64 - size.bit_length())


class ContextTree(Setting):
    """Context-tree weighting (Willems, Shtarkov & Tjalkens 1995) over any nested contexts.

    alpha: what the estimator adds to each count (1/2: Krichevsky & Trofimov 1981); limit: the count at which
    both counts of a decision are halved; fresh: how many new context levels one row may add (all of them:
    the exact method); most: log2 of the lines kept. One context only is a plain estimator in that context.
    """

    def __init__(
        self,
        label: str,
        contexts: Contexts,
        *,
        alphabet: int = 0,
        alpha: float = 0.5,
        limit: int = 60000,
        fresh: int = 2,
        most: int = 20,
    ) -> None:
        self.label = label
        self._contexts = contexts
        self._alpha = alpha
        self._limit = limit
        self._fresh = fresh
        self._table = Table(alphabet, most)

    def parts(self) -> dict[str, Kept]:
        return {"table": self._table}

    def learn(
        self, past: Past, codes: Codes, want: npt.NDArray[np.int32], laws: Floats, frozen: bool = False
    ) -> Floats:
        return self._run(np.stack(list(self._contexts(past)), axis=1), codes, want, laws, frozen)

    def laws(self, fork: Fork, place: npt.NDArray[np.int64], states: int) -> Floats:
        contexts = self._contexts(fork)
        if fork.size == 1:
            one = np.zeros((1, max(states, 1)))
            self._run(np.stack(contexts, axis=1), _ASK_ONE, _FIRST_LINE, one)
            return one[:, :states]
        _, first, which = np.unique(contexts[-1], return_index=True, return_inverse=True)  # the longest tells all
        keys = np.stack([key[first] for key in contexts], axis=1)
        laws = np.zeros((len(keys), max(states, 1)))
        self._run(keys, np.full(len(keys), ASK, dtype=np.int32), np.arange(len(keys), dtype=np.int32), laws)
        return laws[which.reshape(-1), :states]

    def _run(
        self,
        keys: npt.NDArray[np.uint64],
        codes: Codes,
        want: npt.NDArray[np.int32],
        laws: Floats,
        frozen: bool = False,
    ) -> Floats:
        table = self._table
        table.admit(codes)
        bits = np.empty(len(codes))
        keys = np.ascontiguousarray(keys)
        own = np.empty(max(keys.shape[1], 16))
        mass = np.zeros(len(table.mask))

        def call(start: int, lines: tuple[object, ...], size: tuple[object, ...], work: tuple[object, ...]) -> int:
            return kernel.tree(
                start, view(codes), view(keys), *lines, *size, self._alpha, self._limit,
                min(self._fresh, keys.shape[1]), frozen, *work, view(own), view(mass),
                view(want), view(laws), view(bits),
            )  # fmt: skip

        table.run(call, len(codes))
        return bits
