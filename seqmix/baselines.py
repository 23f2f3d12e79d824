"""Baselines to hold a score against: each a proper law that knows one simple thing."""

from __future__ import annotations

from abc import abstractmethod

import numpy as np
import numpy.typing as npt

from seqmix.kernels import repeats as kernel
from seqmix.kernels import view
from seqmix.models.history import Codes, Fork, History, Past
from seqmix.models.protocol import Floats, Setting, StatesModel


class _Guess(Setting):
    """Names one state a row, trusted as far as it proved right; the other states by their counts."""

    kept = ("events", "counts", "counters")

    def __init__(self, alphabet: int) -> None:
        self.label = ""
        self.events = np.zeros((1, 2))
        self.counts = np.zeros(max(alphabet, 1))
        self.counters = np.array([alphabet, 0], dtype=np.int64)

    @abstractmethod
    def guess(self, past: Past, codes: Codes) -> Codes:
        """The state named for each row, (n,), -1 for none."""

    def learn(
        self, past: Past, codes: Codes, want: npt.NDArray[np.int32], laws: Floats, frozen: bool = False
    ) -> Floats:
        more = int(codes.max(initial=-1)) + 1 - len(self.counts)
        if more > 0:
            self.counts = np.concatenate([self.counts, np.zeros(more)])
        guess = np.ascontiguousarray(self.guess(past, codes), dtype=np.int32)
        trust, bits = np.zeros(len(codes), dtype=np.int32), np.empty(len(codes))
        kernel.bet(
            view(codes), view(guess), view(trust), view(self.events), view(self.counts), view(self.counters),
            frozen, view(want), view(laws), view(bits),
        )  # fmt: skip
        return bits

    def laws(self, fork: Fork, place: npt.NDArray[np.int64], states: int) -> Floats:
        raise NotImplementedError("baselines are scored, they do not forecast")


class _MostFrequent(_Guess):
    def guess(self, past: Past, codes: Codes) -> Codes:
        counts = self.counts.tolist()
        best = int(np.argmax(self.counts)) if self.counters[1] else -1
        out = []
        for code in codes.tolist():
            out.append(best)
            if code >= 0:
                counts[code] += 1
                if best < 0 or counts[code] > counts[best]:
                    best = code
        return np.array(out, dtype=np.int32)


class _LastState(_Guess):
    def guess(self, past: Past, codes: Codes) -> Codes:
        return np.maximum(past.lag(1), -1)


class _Even(_Guess):
    """Every state seen so far alike."""

    def guess(self, past: Past, codes: Codes) -> Codes:
        return np.full(len(codes), -1, dtype=np.int32)

    def learn(
        self, past: Past, codes: Codes, want: npt.NDArray[np.int32], laws: Floats, frozen: bool = False
    ) -> Floats:
        before = np.maximum.accumulate(np.concatenate([[self.counters[0] - 1], codes]))
        seen = np.full(len(codes), self.counters[0]) if frozen else before[:-1] + 1
        if not frozen:
            self.counters[0] = before[-1] + 1
        return np.where((codes >= 0) & (codes < seen), np.log2(np.maximum(seen, 1)), 0.0)


_GUESSES: dict[str, type[_Guess]] = {
    "uniform": _Even,
    "most frequent so far": _MostFrequent,
    "last state repeats": _LastState,
}


class Baseline(StatesModel):
    """One named guess as a model."""

    def __init__(self, name: str, alphabet: int) -> None:
        self._guess = _GUESSES[name]
        super().__init__(alphabet)

    def bank(self, alphabet: int) -> tuple[list[Setting], History]:
        return [self._guess(alphabet)], History(1)


def baselines(kind: str) -> dict[str, Baseline]:
    """Blank baselines by name, for a log of `kind`."""
    return {name: Baseline(name, 256 if kind == "bytes" else 0) for name in _GUESSES}
