"""Compressors as models: what makes the log shorter comes next."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import ceil, log2
from typing import Any

import numpy as np
import numpy.typing as npt

from seqmix.compressors.protocol import Compressor
from seqmix.models.history import Codes, Fork, History, Past
from seqmix.models.protocol import Floats, Setting, StatesModel, Walk
from seqmix.models.sleeper import Sleeper

WINDOWS = (6, 8, 12, 16, 24, 32)
"""Last rows that a candidate is put after, each time compressed anew on top of the history."""

DEAR = 20.0
"""Microseconds a candidate from which on a compressor gets every third window only."""

STRETCH = 32
"""Rows from one history to the next; those since then are in the windows only. Awake or asleep as a whole."""

_REPEAT = 5  # rows: a candidate that never came after the last five ends any repeat
_PLACES = 64  # of these five rows, the latest, that are looked at
_FAMILIAR = 24  # most frequent states that an informed compressor is asked about, too
_ROW = 40.0  # microseconds a row, besides the candidates
_USUAL = 4  # candidates a window, for the estimate of what a row will take
_PULL = 0.3  # first factor of the code lengths, in bytes
_RATE = 0.02  # of the factors, along the gradient of the loss
_SHARE = 0.01  # a row, back to even trust in the code lengths and the plain frequencies
_WIDE = 192  # states from which on a letter takes two bytes; a stretch adds at most 32
_LONGEST_SLEEP = 2048 * STRETCH  # rows before it is decided again
_FEWEST = 8  # rows that it is roused for
_PATHS = 10  # continuations of other models for which one is looked at here
_WAYS = 200  # different continuations whose laws are looked at, the commonest; others have the plain frequencies


@dataclass(frozen=True)
class Allowance:
    """Microseconds that a model may take: `start` of them, and `row` more with each row of the log."""

    start: float
    row: float

    def reached(self, spent: float) -> int:
        """First row at which so much may have been spent."""
        return max(ceil((spent - self.start) / self.row), 0)


class Reader(Setting):
    """One compressor reading along. See `Compressed`."""

    label = ""
    kept = ("rows", "recent", "held", "counts", "factors", "trust", "spent", "calls", "awake", "until", "roused")

    def __init__(self, compressor: Compressor, alphabet: int, allowance: Allowance | None) -> None:
        """alphabet: 256 for bytes, else 0. allowance None: always awake."""
        self._compressor = compressor
        self.windows = WINDOWS if compressor.cost < DEAR else WINDOWS[1::3]
        self._allowance = allowance
        self.rows = 0
        self.recent: Codes = np.zeros(0, dtype=np.int32)  # the last states, as far back as the compressor looks
        self.held = 0  # of them, since the stretch began
        self._informed = alphabet > 0 and compressor.informed  # what it was built knowing is text
        self.counts: Floats = np.full(alphabet, 0.5)  # of each state, rows + 1/2
        self.factors: Floats = np.full(len(self.windows), _PULL)
        self.trust = 0.5  # in the code lengths; the rest in the plain frequencies
        self.spent = 0.0  # microseconds, as the cost class has them
        self.calls = 0  # candidates compressed
        self.awake = False
        self.until = 0  # row at which that is decided again
        self.roused = -1  # row from which on it is awake in any case; -1: none
        self._text: bytes | None = None  # history and what came since, as letters; None: not made
        self._history = b""
        self._letter = 1  # bytes

    def restore(self, state: dict[str, object]) -> None:
        super().restore(state)
        self._text = None

    # ---- the schedule --------------------------------------------------------------------------------------

    def sees(self) -> bool:
        """Whether the next row is predicted. Decided anew at row numbers that a rule fixes."""
        if self.rows == self.until:
            self._plan()
        return self.awake or 0 <= self.roused <= self.rows

    def sleeps(self, rows: int) -> bool:
        """Whether none of the next rows will be predicted."""
        end = self.rows + rows
        return not self.sees() and end <= self.until and not 0 <= self.roused < end

    def _plan(self) -> None:
        if self._allowance is None:
            self.awake, self.until = True, self.rows + STRETCH
            return
        wake = self._allowance.reached(self.spent + STRETCH * self._row_cost())
        self.awake = wake <= self.rows
        # what a row costs moves with the alphabet: no sleep is for good
        self.until = self.rows + STRETCH
        if not self.awake:
            self.until = min(-(-wake // STRETCH) * STRETCH, self.rows + _LONGEST_SLEEP)

    def _row_cost(self) -> float:
        """Microseconds, estimated."""
        asked = _FAMILIAR if self._informed else 0
        candidates = min(len(self.counts), max(_USUAL, asked))
        return _ROW + len(self.windows) * candidates * self._compressor.cost

    def rouse(self, left: int) -> None:
        """Be awake on the last of the next `left` rows, as many as the first allowance pays for, and from then on; but
        not where it pays for so few that they would tell nothing."""
        if self._allowance is not None:
            paid = int(self._allowance.start / self._row_cost())
            if paid >= _FEWEST:
                self.roused = self.rows + left - min(paid, left)

    # ---- along the rows ------------------------------------------------------------------------------------

    def learn(
        self, past: Past, codes: Codes, want: npt.NDArray[np.int32], laws: Floats, frozen: bool = False
    ) -> Floats:
        """Loss of each row, NaN while asleep."""
        bits = np.full(len(codes), np.nan)
        done = 0
        while done < len(codes):
            awake = self.sees()
            stop = min(len(codes), done + self.until - self.rows)
            if awake:
                stop = min(stop, done + STRETCH - self.rows % STRETCH)
                for t in range(done, stop):
                    line = laws[want[t]] if want[t] >= 0 else None
                    bits[t] = self._row(int(codes[t]), line, frozen)
            else:
                if self.roused > self.rows:
                    stop = min(stop, done + self.roused - self.rows)
                self._count(codes[done:stop], frozen)
            self._remember(codes[done:stop])
            done = stop
        return bits

    def _count(self, codes: Codes, frozen: bool) -> None:
        there = codes[codes >= 0]
        if len(there) and not frozen:
            self._admit(int(there.max()))
            self.counts += np.bincount(there, minlength=len(self.counts))

    def _admit(self, code: int) -> None:
        if code >= len(self.counts):
            self.counts = np.concatenate([self.counts, np.full(code + 1 - len(self.counts), 0.5)])

    def _remember(self, codes: Codes) -> None:
        """Rows that were predicted, or slept through, become past."""
        since = (self.rows + len(codes)) % STRETCH  # rows of the stretch that they end in
        new = codes[max(len(codes) - since, 0) :]
        self.held = int((new >= 0).sum()) + (self.held if len(codes) < since else 0)
        self.recent = np.concatenate([self.recent, codes[codes >= 0]])[-(self._compressor.reach + STRETCH) :]
        self.rows += len(codes)
        if since < len(codes) or since == 0:
            self._text = None

    def _row(self, code: int, line: Floats | None, frozen: bool) -> float:
        if self._text is None:
            self._read()
        assert self._text is not None
        self.spent += _ROW  # whether or not there is something to compress
        known = len(self.counts)
        bits = 0.0
        if known:
            base, sharp, asked, lengths = self._law(self._text)
            if line is not None:
                line[:known] = self.trust * sharp + (1.0 - self.trust) * base
            if 0 <= code < known:
                mass = self.trust * float(sharp[code]) + (1.0 - self.trust) * float(base[code])
                bits = -log2(mass)
                if not frozen:
                    held = self.trust * float(sharp[code]) / mass
                    self.trust = (1.0 - _SHARE) * held + 0.5 * _SHARE
                    if len(asked):
                        # the last line of `lengths` stands for every state that was not asked about
                        masses = np.append(sharp[asked], 0.0)
                        masses[-1] = max(1.0 - masses.sum(), 0.0)
                        place = np.flatnonzero(asked == code)
                        came = lengths[place[0] if len(place) else -1]
                        self.factors += _RATE * (masses @ lengths - came)
        if code >= 0:
            if not frozen:
                self._admit(code)
                self.counts[code] += 1.0
            self._text += self._letters(np.array([code]))
        return bits

    def begin(self, codes: Codes, other: Reader) -> None:
        """Know these codes beforehand, and what another reader learned of code lengths, and when to sleep."""
        for name in ("rows", "factors", "trust", "spent", "calls", "awake", "until", "roused"):
            setattr(self, name, getattr(other, name))
        self._count(codes, False)
        self.recent = codes[codes >= 0][-self._compressor.reach :]

    # ---- code lengths --------------------------------------------------------------------------------------

    def _read(self) -> None:
        """Make the history, as the stretch found it, and what came since into letters."""
        past = self.recent[: len(self.recent) - self.held][-self._compressor.reach :]
        self._letter = 2 if int(past.max(initial=0)) >= _WIDE and len(self.counts) != 256 else 1
        self._history = self._letters(past)
        self._text = self._history + self._letters(self.recent[len(self.recent) - self.held :])

    def _letters(self, codes: npt.NDArray[np.integer]) -> bytes:
        return codes.astype(np.uint8 if self._letter == 1 else ">u2").tobytes()

    def _law(self, text: bytes, familiar: bool = True) -> tuple[Floats, Floats, npt.NDArray[np.intp], Floats]:
        """After `text`: plain frequencies and law by code length, (states,); the states asked about, ascending, and
        what each adds, (asked + 1, windows), in bytes over the least; the last line is that of all others."""
        base = self.counts / self.counts.sum()
        asked = self._candidates(text, familiar)
        if not len(asked):
            return base, base, asked, np.zeros((1, len(self.windows)))
        rest = np.ones(len(base), dtype=bool)
        rest[asked] = False
        some = [*asked, int(np.argmax(np.where(rest, base, -1.0)))]
        letters = [self._letters(np.array([code])) for code in some]
        ends = [text[-window * self._letter :] + letter for window in self.windows for letter in letters]
        lengths = np.array(self._compressor.code_length(self._history, ends), dtype=np.float64)
        self.calls += len(ends)
        self.spent += len(ends) * self._compressor.cost
        if len(lengths) != len(ends) or not np.isfinite(lengths).all():
            raise ValueError("code lengths are finite, one a candidate")
        lengths = lengths.reshape(len(self.windows), len(some)).T / 8.0
        lengths = lengths - lengths.min(axis=0)
        scores = lengths @ self.factors
        sharp = base * np.exp(scores.min() - np.where(rest, scores[-1], 0.0))
        sharp[asked] = base[asked] * np.exp(scores.min() - scores[:-1])
        return base, sharp / sharp.sum(), asked, lengths

    def _candidates(self, text: bytes, familiar: bool) -> npt.NDArray[np.intp]:
        """States worth asking about, ascending: those that came after the last rows before, and familiar ones."""
        size = self._letter
        last = text[-_REPEAT * size :]
        found = set()
        end = len(text)
        for _ in range(_PLACES):
            end = text.rfind(last, 0, end - 1) if len(last) == _REPEAT * size else -1
            if end < 0:
                break
            if end % size == 0:
                after = end + len(last)
                found.add(int.from_bytes(text[after : after + size], "big"))
            end += len(last)
        if self._informed and familiar:
            found |= set(np.argsort(-self.counts, kind="stable")[:_FAMILIAR].tolist())
        return np.array(sorted(code for code in found if code < len(self.counts)), dtype=np.intp)

    def laws(self, fork: Fork, place: npt.NDArray[np.int64], states: int) -> Floats:
        if self._text is None:
            self._read()
        assert self._text is not None
        out = np.zeros((fork.size, states))
        if states:
            ways, which, often = np.unique(fork.path, axis=0, return_inverse=True, return_counts=True)
            out[:] = self.counts / self.counts.sum()
            spent, calls = self.spent, self.calls
            for way in np.argsort(-often, kind="stable")[:_WAYS].tolist():
                path = ways[way]
                base, sharp, _, _ = self._law(self._text + self._letters(path[path >= 0]), len(path) == 0)
                out[which.ravel() == way] = self.trust * sharp + (1.0 - self.trust) * base
            self.spent, self.calls = spent, calls  # forecasts leave the schedule as it is
        return out


class Compressed(Sleeper, StatesModel):
    """What makes the log shorter comes next: code lengths of a general-purpose compressor, made into a law.

    Each candidate is put after the last 6, 8, 12, ... rows, and compressed with the rows before as its history. With
    l_w(x) the bytes that candidate x takes after window w, and f(x) the plain frequencies,

        P(x) = trust f(x) exp(-sum_w b_w l_w(x)) / Z + (1 - trust) f(x)

    b_w follow the gradient of the loss; the trust is learned by Bayes' rule with fixed share. A candidate that never
    came after the last five rows ends any repeat, so one of these stands for all (Cilibrasi & Vitanyi 2005;
    Ryabko 2009). Sleeps to stay inside its allowance. Continuations are frozen at the present row.
    """

    prior_cost = 6.0
    fewest_paths = 4
    compressor: type[Compressor]

    def __init__(self, alphabet: int = 0, allowance: Allowance | None = None) -> None:
        """allowance None: always awake."""
        self._allowance = allowance
        super().__init__(alphabet)

    def bank(self, alphabet: int) -> tuple[list[Setting], History]:
        self.reader = Reader(self.compressor(), alphabet, self._allowance)
        return [self.reader], History(1)

    def sleeps(self, rows: int) -> bool:
        return self.reader.sleeps(self._rows_slept + rows)

    def walk(self, steps: int, paths: int, times: Sequence[int | None] | None = None) -> Walk:
        walk: Walk = super().walk(steps, paths // _PATHS, times)
        return walk

    def rouse(self, left: int) -> None:
        self._follow()
        self.reader.rouse(left)

    def again(self, codes: Codes) -> Compressed:
        """A model of other states that knows these codes, and what this one knew of code lengths and of time."""
        self._follow()
        new = type(self)(0, self._allowance)
        new.reader.begin(codes, self.reader)
        new._novelty.absorb(codes)
        new.seen = len(new.reader.counts)
        return new


def model_of(compressor: type[Compressor]) -> type[Compressed]:
    """The model of states and bytes that a compressor makes."""
    facts: dict[str, Any] = {"name": compressor.name, "summary": compressor.summary, "source": compressor.source}
    facts |= {"compressor": compressor, "__module__": __name__}
    return type(f"{compressor.__name__}Model", (Compressed,), facts)
