"""What a model may look at before a row: the states before it, how long the present one has lasted, the clock.

`History` moves along the log; `ahead` gives the `Past` of each row of the next chunk, `fork` starts many
hypothetical continuations that move on their own. Both give the same contexts for the same rows.
"""

from __future__ import annotations

from functools import cached_property

import numpy as np
import numpy.typing as npt

from seqmix.keep import Kept

Codes = npt.NDArray[np.int32]
Keys = npt.NDArray[np.uint64]

BEFORE_START = -3  # stands in for rows before the first
_STIR = np.uint64(0x9FB21C651E98DF25)
_SHIFT = np.uint64(32)
_FIVE = np.uint64(5)
_EMPTY = np.uint64(0x243F6A8885A308D3)
_LETTER_BASE = 0x2545F4914F6CDD1D
_LETTER_BACK = pow(_LETTER_BASE, -1, 1 << 64)


def stir(key: Keys, value: npt.NDArray[np.generic]) -> Keys:
    """The hash of context `key` made longer by one `value`, elementwise."""
    mixed = (key + value.astype(np.int64).view(np.uint64) + _FIVE) * _STIR  # an array goes round without a warning
    mixed ^= mixed >> _SHIFT
    return mixed


class Past:
    """What was known before each of n rows. All arrays have shape (n,)."""

    def __init__(self, size: int, times: npt.NDArray[np.int64] | None) -> None:
        self.size = size
        self.times = times  # of the rows themselves; microseconds
        self._orders: list[Keys] = [np.full(size, _EMPTY, dtype=np.uint64)]

    def lag(self, k: int) -> Codes:
        """The state k >= 1 rows before; -1 where that row is missing."""
        raise NotImplementedError

    @property
    def run(self) -> npt.NDArray[np.int64]:
        """How many rows the present state has lasted."""
        raise NotImplementedError

    def earlier(self, i: int) -> Codes:
        """The state of the run before the present one (i = 1), or the one before that (i = 2)."""
        raise NotImplementedError

    def word(self, i: int) -> Keys:
        """Bytes: hash of the letters since the last non-letter (i = 0), or of the word before (i = 1)."""
        raise NotImplementedError

    def order(self, k: int) -> Keys:
        """Hash of the last k states."""
        while len(self._orders) <= k:
            self._orders.append(stir(self._orders[-1], self.lag(len(self._orders))))
        return self._orders[k]

    def nested(self, *values: npt.NDArray[np.generic]) -> list[Keys]:
        """Hashes of the contexts (), (values[0],), (values[0], values[1]), ..."""
        keys = [self.order(0)]
        for value in values:
            keys.append(stir(keys[-1], value))
        return keys


class ChunkPast(Past):
    def __init__(self, history: History, codes: Codes, times: npt.NDArray[np.int64] | None) -> None:
        super().__init__(len(codes), times)
        self._history = history
        self.codes = codes
        self._joined = np.concatenate([history.tail, codes])

    def lag(self, k: int) -> Codes:
        end = len(self._joined) - k
        return self._joined[end - self.size : end]

    def after(self, k: int) -> Keys:
        """Hash of the last k states up to and with each row."""
        end = len(self._joined)
        key = np.full(self.size, _EMPTY, dtype=np.uint64)
        for lag in range(k):
            key = stir(key, self._joined[end - lag - self.size : end - lag])
        return key

    @cached_property
    def _runs(self) -> tuple[npt.NDArray[np.int64], list[Codes]]:
        """(n + 1,) run length and earlier states before each row, and after the last."""
        history, codes, n = self._history, self.codes, self.size
        starts = np.flatnonzero(codes != self._joined[len(history.tail) - 1 : -1])  # rows that start a run
        which = np.zeros(n + 1, dtype=np.int64)  # run of the row before, counted from the one before the chunk
        which[starts + 1] = 1
        np.cumsum(which, out=which)
        begun = np.concatenate([[-history.run], starts])
        run = np.arange(n + 1) - begun[which]
        # the states of the runs, oldest first: two remembered ones, the present one, those of the chunk
        states = np.concatenate([history.earlier[::-1], history.tail[-1:], codes[starts]]).astype(np.int32)
        return run, [states[which + 1], states[which]]

    @property
    def run(self) -> npt.NDArray[np.int64]:
        return self._runs[0][:-1]

    def earlier(self, i: int) -> Codes:
        return self._runs[1][i - 1][:-1]

    @cached_property
    def _words(self) -> tuple[Keys, Keys]:
        """(n + 1,) hashes of the word so far and of the word before, before each row, and after the last."""
        history, n = self._history, self.size
        letter, lower = letters(self.codes)
        with np.errstate(over="ignore"):
            forth, back = _powers(n + 1)
            # sum of letter * base^(rows from it to here), by prefix sums modulo 2^64
            sums = np.concatenate([[np.uint64(0)], np.cumsum(lower * back[1:], dtype=np.uint64)])
            sums += history.words[0]
            breaks = np.concatenate([[0], np.where(letter, 0, np.arange(1, n + 1))])
            since = np.maximum.accumulate(breaks)
            base = sums[since]
            base[since == 0] = 0
            word = (sums - base) * forth
        # a break right after a letter closes a word; later breaks leave the word before as it is
        closed = np.concatenate([[False], ~letter & (word[:-1] != 0)])
        source = np.maximum.accumulate(np.where(closed, np.arange(n + 1), -1))
        before = np.where(source < 0, history.words[1], word[source - 1])
        return word, before

    def word(self, i: int) -> Keys:
        return self._words[i][:-1]

    def close(self) -> None:
        """Move the history to the end of this chunk."""
        history = self._history
        if history.runs:
            run, earlier = self._runs
            history.run = int(run[-1])
            history.earlier = np.array([earlier[0][-1], earlier[1][-1]], dtype=np.int32)
        if history.spelt:
            history.words = np.array([self._words[0][-1], self._words[1][-1]], dtype=np.uint64)
        history.rows += self.size
        history.tail = self._joined[len(self._joined) - len(history.tail) :].copy()
        if self.times is not None and self.size:
            history.time = int(self.times[-1])


class Fork(Past):
    """`paths` continuations of one history, all at the same next row; push moves them on by one row."""

    def __init__(self, history: History, paths: int, time: int | None) -> None:
        self._tail = history.tail
        self.path = np.zeros((paths, 0), dtype=np.int32)  # (paths, steps so far)
        self._run = np.full(paths, history.run, dtype=np.int64)
        self._earlier = np.repeat(history.earlier[:, None], paths, axis=1)
        self._word = np.repeat(history.words[:, None], paths, axis=1)
        self._time = time
        self._settle()

    def _settle(self) -> None:
        """Forget what was derived from the rows before the last move."""
        paths, time = len(self.path), self._time
        super().__init__(paths, None if time is None else np.full(paths, time, dtype=np.int64))

    def lag(self, k: int) -> Codes:
        steps = self.path.shape[1]
        if k <= steps:
            return self.path[:, steps - k]
        return np.full(self.size, self._tail[len(self._tail) - (k - steps)], dtype=np.int32)

    @property
    def run(self) -> npt.NDArray[np.int64]:
        return self._run

    def earlier(self, i: int) -> Codes:
        return self._earlier[i - 1]

    def word(self, i: int) -> Keys:
        return self._word[i]

    def select(self, which: npt.NDArray[np.int64]) -> None:
        """Keep these paths, in this order; one may be kept several times."""
        self.path = self.path[which]
        self._run = self._run[which]
        self._earlier = self._earlier[:, which]
        self._word = self._word[:, which]
        self._settle()

    def push(self, codes: Codes, time: int | None) -> None:
        """Each path goes on with its state of `codes`; the next row is at `time`."""
        last = self.lag(1)
        stays = codes == last
        self._run = np.where(stays, self._run + 1, 1)
        self._earlier = np.where(stays, self._earlier, np.stack([last, self._earlier[0]]))
        letter, lower = letters(codes)
        with np.errstate(over="ignore"):
            word = np.where(letter, self._word[0] * np.uint64(_LETTER_BASE) + lower, np.uint64(0))
        closed = ~letter & (self._word[0] != 0)
        self._word = np.stack([word, np.where(closed, self._word[0], self._word[1])])
        self.path = np.concatenate([self.path, codes[:, None].astype(np.int32)], axis=1)
        self._time = time
        self._settle()


def letters(codes: Codes) -> tuple[npt.NDArray[np.bool_], Keys]:
    """Which bytes are ASCII letters, and those in lower case (0 for the others)."""
    lower = codes | 32
    letter = (lower >= 97) & (lower <= 122)
    return letter, np.where(letter, lower, 0).astype(np.uint64)


def _powers(n: int) -> tuple[Keys, Keys]:
    """base^0..base^(n-1) and base^0..base^-(n-1), modulo 2^64."""
    out = []
    for base in (_LETTER_BASE, _LETTER_BACK):
        factors = np.full(n, base, dtype=np.uint64)
        factors[0] = 1
        with np.errstate(over="ignore"):
            out.append(np.cumprod(factors, dtype=np.uint64))
    return out[0], out[1]


class History(Kept):
    """The end of the rows read so far: the last `span` states, and on request runs and words."""

    kept = ("rows", "tail", "run", "earlier", "words", "time")

    def __init__(self, span: int, *, runs: bool = False, words: bool = False) -> None:
        self.runs = runs
        self.spelt = words
        self.rows = 0
        self.tail = np.full(max(span, 1), BEFORE_START, dtype=np.int32)
        self.run = 0
        self.earlier = np.full(2, BEFORE_START, dtype=np.int32)
        self.words = np.zeros(2, dtype=np.uint64)
        self.time: int | None = None

    def ahead(self, codes: Codes, times: npt.NDArray[np.int64] | None) -> ChunkPast:
        """The past of each of the next rows; call its `close` once they are learned."""
        return ChunkPast(self, codes, times)

    def fork(self, paths: int, time: int | None) -> Fork:
        """`paths` continuations whose first row is at `time`."""
        return Fork(self, paths, time)
