"""Match: follow the continuation of the longest repeated past, and trust it as far as it proved right."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from seqmix.keep import Kept
from seqmix.kernels import repeats as kernel
from seqmix.kernels import view
from seqmix.models.history import ChunkPast, Codes, Fork, History, Past
from seqmix.models.protocol import Floats, Setting, StatesModel

TRUSTS = 64  # 4 x min(length, 15) + min(wrong guesses lately, 3)
_FIRST, _MOST_ROWS, _MOST_PLACES = 1 << 10, 1 << 19, 1 << 18


class Follower(Kept):
    """The place in the past whose continuation is being followed (kernels/repeats_cy.py).

    Remembers the last 524,288 rows, and where each of 262,144 hashes was seen last.
    """

    kept = ("ring", "places", "counters")

    def __init__(self, least: int) -> None:
        """least: rows that must repeat before a match is followed."""
        self.least = least
        self.ring = np.zeros(_FIRST, dtype=np.int32)
        self.places = np.zeros(_FIRST, dtype=np.int64)
        self.counters = np.array([0, -1, 0, 0], dtype=np.int64)  # rows so far, pointer or -1, length, misses

    def follow(self, past: ChunkPast, codes: Codes, frozen: bool = False) -> tuple[Codes, Codes]:
        """Guess (n,), a state or -1, and trust (n,) for each row; goes on along the rows."""
        guess, trust = np.empty(len(codes), dtype=np.int32), np.empty(len(codes), dtype=np.int32)
        after = past.after(self.least)
        done = 0
        while done < len(codes):
            self._grow()
            room = len(self.ring) - int(self.counters[0])
            stop = len(codes) if room <= 0 else min(len(codes), done + room)
            kernel.follow(
                view(codes[done:stop]), view(after[done:stop]), view(self.ring), view(self.places),
                65 - len(self.places).bit_length(), self.least, view(self.counters), frozen,
                view(guess[done:stop]), view(trust[done:stop]),
            )  # fmt: skip
            done = stop
        return guess, trust

    def _grow(self) -> None:
        """Double the memory at the row that would not fit, so that no cut into chunks can change a guess."""
        rows = int(self.counters[0])
        if rows == len(self.ring) and rows < _MOST_ROWS:
            self.ring = np.concatenate([self.ring, np.zeros_like(self.ring)])
            if rows < _MOST_PLACES:
                # a hash now has one bit more: its place stands in for both, and every match is verified
                self.places = np.repeat(self.places, 2)

    def start(self, paths: int) -> npt.NDArray[np.int64]:
        """(paths, 3): pointer, length, misses. No new match is looked for along a path."""
        return np.tile(self.counters[1:], (paths, 1))

    def guesses(self, fork: Fork, place: npt.NDArray[np.int64]) -> tuple[Codes, Codes]:
        """Guess and trust after each path."""
        pointer, length, misses = place.T
        ahead = pointer - self.counters[0]  # >= 0: the pointer has come to the path itself
        guess = self.ring[pointer & (len(self.ring) - 1)]
        if fork.path.shape[1]:
            own = np.take_along_axis(fork.path, np.maximum(ahead, 0)[:, None], axis=1)[:, 0]
            guess = np.where(ahead >= 0, own, guess)
        guess = np.where(pointer < 0, -1, guess).astype(np.int32)
        trust = np.where(pointer < 0, 0, 4 * np.minimum(length, 15) + np.minimum(misses, 3)).astype(np.int32)
        return guess, trust

    def move(self, place: npt.NDArray[np.int64], fork: Fork, codes: Codes) -> npt.NDArray[np.int64]:
        """`place` after each path has gone on by its state."""
        pointer, length, misses = place.T
        right = self.guesses(fork, place)[0] == codes
        length = np.where(right, length + 1, 0)
        misses = np.where(right, np.where(length >= 16, 0, misses), misses + 1)
        pointer = np.where((pointer < 0) | (misses > 8), -1, pointer + 1)
        return np.stack([pointer, length, misses], axis=1)


class _Bet(Setting):
    kept = ("events", "counts", "counters")

    def __init__(self, least: int, alphabet: int) -> None:
        self.label = f"{least} rows or more"
        self._follower = Follower(least)
        self.events = np.zeros((TRUSTS, 2))
        self.counts = np.zeros(max(alphabet, 1))
        self.counters = np.array([alphabet, 0], dtype=np.int64)

    def parts(self) -> dict[str, Kept]:
        return {"follower": self._follower}

    def learn(
        self, past: Past, codes: Codes, want: npt.NDArray[np.int32], laws: Floats, frozen: bool = False
    ) -> Floats:
        assert isinstance(past, ChunkPast)
        return self._bet(codes, *self._follower.follow(past, codes, frozen), want, laws, frozen)

    def laws(self, fork: Fork, place: npt.NDArray[np.int64], states: int) -> Floats:
        laws = np.zeros((fork.size, max(states, 1)))
        nothing = np.full(fork.size, -1, dtype=np.int32)
        guess, trust = self._follower.guesses(fork, place)
        self._bet(nothing, guess, trust, np.arange(fork.size, dtype=np.int32), laws)
        return laws[:, :states]

    def _bet(
        self,
        codes: Codes,
        guess: Codes,
        trust: Codes,
        want: npt.NDArray[np.int32],
        laws: Floats,
        frozen: bool = False,
    ) -> Floats:
        room = 1 << int(codes.max(initial=0)).bit_length()
        if room > len(self.counts):
            self.counts = np.concatenate([self.counts, np.zeros(room - len(self.counts))])
        bits = np.empty(len(codes))
        kernel.bet(
            view(codes), view(guess), view(trust), view(self.events), view(self.counts), view(self.counters),
            frozen, view(want), view(laws), view(bits),
        )  # fmt: skip
        return bits

    def start(self, paths: int) -> npt.NDArray[np.int64]:
        return self._follower.start(paths)

    def move(self, place: npt.NDArray[np.int64], fork: Fork, codes: Codes) -> npt.NDArray[np.int64]:
        return self._follower.move(place, fork, codes)


class Match(StatesModel):
    name = "match"
    prior_cost = 4.0
    summary = "goes on as the longest repeated past went on"
    source = "Ehrenfeucht & Mycielski 1992; Krichevsky & Trofimov 1981 for the trust"

    def bank(self, alphabet: int) -> tuple[list[Setting], History]:
        lengths = (5, 8, 14) if alphabet else (3, 6, 14)
        return [_Bet(least, alphabet) for least in lengths], History(max(lengths))
