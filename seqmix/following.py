"""Follow: for each row that arrives, how surprising it was, and what comes next."""

from __future__ import annotations

import io
from collections.abc import Callable, Iterator, Sequence
from typing import Any

import numpy as np

from seqmix.errors import DataError, SeqmixError, visible
from seqmix.improbable import Alarms, Improbable
from seqmix.learned import Learned, facts_of
from seqmix.mixture.numbers import LIGHT, NumberMixture
from seqmix.models.laws import NumberLaw
from seqmix.models.protocol import Ask
from seqmix.series import CHUNK, Alphabet, Log, Rows, open_log
from seqmix.series.facts import Facts
from seqmix.series.rows import Piece, join, joined
from seqmix.surprising import RATE, in_rows, of_law, of_value, rate_of

LEVELS = (0.1, 0.9)
"""Quantiles of a number that are told, beside the median."""

AT_ONCE = 64
"""Rows taken together at most, where that gives the same answers sooner."""

_FIRST_LINES = 2  # with text, that the layout of a log is decided from at least


class Reader:
    """The lines of a live log as rows: its layout is known from before, or the first few tell it.

    A line that cannot be read is told and left out, or raised where `strict`. One row is one line.
    """

    def __init__(
        self,
        name: str,
        learn: Callable[[Any], Learned],
        known: Learned | None = None,
        *,
        tell: Callable[[str], None],
        strict: bool = False,
        **reading: Any,
    ) -> None:
        """learn: what to make of the facts of a new log. reading: column, time, kind, header, as for `open_log`."""
        self._name, self._learn, self._tell, self._strict, self._reading = name, learn, tell, strict, reading
        self.known = known
        self.line = 0  # lines read
        self.skipped = 0
        self.old = 0  # rows not later than what a state knows, left out
        self._latest = None if known is None else known.filler.last
        self._width: int | None = None
        self._first: list[bytes] = []  # lines while the layout is not decided
        self._tried = 0  # of them

    def feed(self, lines: Sequence[bytes], end: bool = False) -> list[Piece]:
        """Rows of the next whole lines, in pieces. end: no line comes after these."""
        if self.known is None:
            self._first += lines
            facts = self._layout(end)
            if facts is None:
                return []
            lines, self._first = self._first, []
            self.known = self._learn(facts)
        return self._parse(lines, self.known)

    def _layout(self, end: bool) -> Facts | None:
        """What the fewest lines say of the log that hold two with text, and a value; None before they are there."""
        if end and self._first:
            self._tried = min(self._tried, len(self._first) - 1)
        while self._tried < len(self._first):
            self._tried += 1
            some, last = self._first[: self._tried], end and self._tried == len(self._first)
            if sum(bool(line.strip()) for line in some) < _FIRST_LINES and not last:
                continue
            with self._open(b"".join(some), **self._reading) as log:
                facts = facts_of(log, self._name)
                there = _any_value(log)
            if there or last or self._tried == CHUNK:
                facts.alphabet = Alphabet(fixed=facts.alphabet.fixed)  # the rows themselves come again
                return facts
        return None

    def _open(self, text: bytes, **reading: Any) -> Log:
        file = io.BytesIO(text)
        file.name = self._name
        return open_log(file, **reading)

    def _parse(self, lines: Sequence[bytes], known: Learned) -> list[Piece]:
        """All lines together, or where that fails one by one."""
        labels, old = len(known.facts.alphabet), self.old
        try:
            pieces = self._rows(lines, known)
        except SeqmixError as error:
            known.facts.alphabet.forget(labels)
            if len(lines) > 1:
                return self._one_by_one(lines, known)
            self.line += 1
            self._refuse(error)
            return []
        if self.old > old and len(known.facts.alphabet) > labels:  # states of rows left out must not be numbered
            known.facts.alphabet.forget(labels)
            if len(lines) > 1:
                self.old = old
                return self._one_by_one(lines, known)
        self.line += len(lines)
        return pieces

    def _one_by_one(self, lines: Sequence[bytes], known: Learned) -> list[Piece]:
        return [piece for line in lines for piece in self._parse([line], known)]

    def _rows(self, lines: Sequence[bytes], known: Learned) -> list[Piece]:
        if known.facts.separator is not None:
            self._check_width(lines, known.facts.separator)
        text = b"".join(lines)
        if not text.strip() and known.facts.format != "lines":
            return []
        with self._open(text, after=known.facts) as log:
            pieces = list(log.pieces)
        return [piece for piece in map(self._new, pieces) if len(piece[0])]

    def _check_width(self, lines: Sequence[bytes], separator: str) -> None:
        """Raises DataError for a row of another width than the first."""
        import csv

        for row in csv.reader([line.decode("utf-8", "replace") for line in lines], delimiter=separator):
            if row and self._width not in (None, len(row)):
                raise DataError(f"{len(row)} cells where {self._width} were expected", self._name)
            self._width = len(row) or self._width

    def _new(self, piece: Piece) -> Piece:
        """The rows that are later than those a state knows."""
        held, times = piece
        if times is None or self._latest is None:
            return piece
        later = times > self._latest
        self.old += int((~later).sum())
        return held[later], times[later]

    def _refuse(self, error: SeqmixError) -> None:
        reason = str(error)
        if isinstance(error, DataError):
            reason = reason[len(error.place) + 2 :]
        if self._strict:
            raise DataError(reason, self._name, self.line)
        self.skipped += 1
        self._tell(f"{visible(self._name)}:{self.line}: {reason}; row left out")


class Follower:
    """Goes along rows as they arrive; the answers depend on the rows alone, not on how they arrive."""

    def __init__(self, known: Learned, false_alarms: str = RATE, steps: int = 1) -> None:
        """known: what was learned before. false_alarms: as for `seqmix.surprise`. steps: that each answer foretells."""
        self._known, self._false_alarms, self._steps = known, false_alarms, steps
        self.torn = False  # whether some of the models have learned a row that others have not
        self._alarms: Alarms | None = None
        self._told: list[dict[str, Any]] | None = None  # what was foretold for the next rows
        self._law: NumberLaw | None = None  # of the next row, at the time that is expected
        self._due: int | None = None  # that time
        known.finish()
        if known.rows:
            self._foretell(self._expected())

    def feed(self, piece: Piece, enough: Callable[[], bool] = lambda: False) -> Iterator[dict[str, Any]]:
        """Absorb rows as logged; an answer for each of them, missing ones too. enough: whether to leave the rest."""
        held, times = piece
        start = 0
        while start < len(held) and not enough():
            stop = start + self._together(held[start:], None if times is None else times[start:])
            some = held[start:stop], None if times is None else times[start:stop]
            self.torn = True
            before = self._known.mixture
            rows = joined(list(self._known.push(some)))
            assert rows is not None
            anew = self._known.mixture is not before  # the cadence is another than it seemed
            if anew:
                self._told = self._law = None
            if anew or self._alarms is None:
                self._set_rate()
            gap = len(rows) - (stop - start)  # missing rows put in before
            if gap:
                self._known.mixture.absorb(rows[:gap])
                rows = rows[gap:]
                assert rows.times is not None
                self._foretell(int(rows.times[0]))
            answers = self._numbers(rows) if held.dtype == np.float64 else self._states(rows)
            self.torn = False
            yield from answers
            start = stop
        if start < len(held) and self._known.facts.kind == "states":
            self._known.facts.alphabet.forget(self._known.mixture.seen)  # the rest may come again

    def _set_rate(self) -> None:
        """Alarms at the rate asked for; none yet where it is in time and the cadence has not shown yet."""
        known = self._known
        if known.facts.cadence is None and known.timed and not known.settled and not in_rows(self._false_alarms):
            return
        rate = rate_of(self._false_alarms, known.facts.cadence)
        if self._alarms is None:
            self._alarms = Alarms(rate)
        self._alarms.rate = rate

    def _together(self, held: np.ndarray, times: np.ndarray | None) -> int:
        """How many of the next rows may be taken together: those that come when they are expected."""
        if self._steps > 1:
            return 1
        held = held[:AT_ONCE]
        if held.dtype == np.float64:  # one without a value comes alone
            missing = np.flatnonzero(np.isnan(held))
            held = held[: max(int(missing[0]), 1)] if len(missing) else held
        if times is None:
            return len(held)
        cadence = self._known.facts.cadence
        if cadence is None:
            return 1
        steps = np.diff(times[: len(held)], prepend=self._known.filler.last or 0)
        late = np.flatnonzero(steps != cadence)
        return max(int(late[0]), 1) if len(late) else len(steps)

    def _expected(self) -> int | None:
        """Time of the next row."""
        last = self._known.filler.last
        return None if last is None else last + (self._known.facts.cadence or 0)

    # ---- states and bytes --------------------------------------------------------------------------------------

    def _states(self, rows: Rows) -> list[dict[str, Any]]:
        mixture, labels = self._known.mixture, self._known.facts.alphabet.labels
        known = mixture.seen
        ask = Ask.of(len(rows), np.arange(len(rows)), max(known, int(rows.codes.max()) + 1))
        bits = mixture.absorb(rows, ask).tolist()
        weights = mixture.latest_weights
        answers = []
        for t, code in enumerate(rows.codes.tolist()):
            found = of_law(ask.laws[t], code, code >= known) if code >= 0 else None
            answer = self._answer(rows, t, labels[code] if code >= 0 else None, bits[t], found)
            known = max(known, code + 1)
            if t + 1 < len(rows):
                law = ask.laws[t + 1]
                self._told = [self._of_states(law[:known], float(law[-1]))]
                heavy = weights[t + 1]
            else:
                heavy = self._foretell(self._expected())
            answers.append(self._complete(answer, heavy))
        return answers

    def _of_states(self, masses: np.ndarray, unseen: float) -> dict[str, Any]:
        best = int(np.argmax(masses)) if len(masses) else -1
        top = self._known.facts.alphabet.labels[best] if best >= 0 else None
        return {"top": top, "probability": float(masses[best]) if best >= 0 else None, "unseen": unseen}

    # ---- numbers -----------------------------------------------------------------------------------------------

    def _numbers(self, rows: Rows) -> list[dict[str, Any]]:
        mixture = self._known.mixture
        assert isinstance(mixture, NumberMixture) and rows.values is not None
        known = mixture.present
        bits, laws = self._absorbed(mixture, rows)
        weights = mixture.latest_weights
        answers = []
        ahead = next(laws)
        for t, value in enumerate(rows.values.tolist()):
            law, ahead = ahead, next(laws, None)
            time = None if rows.times is None else int(rows.times[t])
            found = None
            if law is not None:
                median = self._told[0]["median"] if self._told and time == self._due else law.median
                found = of_value(mixture, t, law, median, known)
                known += 1
            answer = self._answer(rows, t, value if value == value else None, bits[t], found)
            self._due = None if time is None else time + (self._known.facts.cadence or 0)
            if ahead is not None:
                self._told, heavy = [self._of_number(ahead.lighter(LIGHT))], weights[t + 1]
            else:
                heavy = self._foretell(self._due)
            answers.append(self._complete(answer, heavy))
        return answers

    def _absorbed(self, mixture: NumberMixture, rows: Rows) -> tuple[list[float], Iterator[NumberLaw | None]]:
        """Losses, and the law before each row at its time; for a single one it may have been foretold."""
        assert rows.values is not None
        if len(rows) > 1:
            bits, laws = mixture.tell(rows)
            return bits.tolist(), laws
        time = None if rows.times is None else int(rows.times[0])
        law = None
        if not np.isnan(rows.values[0]):
            law = self._law if self._law is not None and time == self._due else mixture.predict(time)
        return mixture.absorb(rows).tolist(), iter([law])

    def _of_number(self, law: NumberLaw) -> dict[str, Any]:
        low, median, high = law.quantile([LEVELS[0], 0.5, LEVELS[1]]).tolist()
        return {"median": median, "quantiles": {f"{LEVELS[0]:g}": low, f"{LEVELS[1]:g}": high}}

    # ---- answers -----------------------------------------------------------------------------------------------

    def _answer(
        self, rows: Rows, t: int, value: str | float | None, bits: float, found: Improbable | None
    ) -> dict[str, Any]:
        time = None if rows.times is None else self._known.facts.clock.text(int(rows.times[t]))
        return {
            "row": rows.first + t + 1,
            "time": time,
            "value": value,
            "bits": bits if value is not None else None,
            "p_value": None if found is None else found.p_value,
            "surprise": found is not None and self._alarms is not None and self._alarms.rings(found),
            "forecast": self._told[0] if self._told else None,
        }

    def _complete(self, answer: dict[str, Any], weights: np.ndarray) -> dict[str, Any]:
        leading = int(np.argmax(weights))
        answer["next"] = self._told if self._steps > 1 else self._told[0] if self._told else None
        answer["leading"] = self._known.mixture.names[leading]
        answer["weight"] = float(weights[leading])
        return answer

    def _foretell(self, time: int | None) -> np.ndarray:
        """Foretell the next rows; the weights with which that was done."""
        mixture = self._known.mixture
        self._due = time
        if isinstance(mixture, NumberMixture):
            self._law = mixture.predict(time)
            weights = mixture.latest_weights[-1]
            laws = [self._law.lighter(LIGHT)]
            if self._steps > 1:
                laws = mixture.walk(self._steps, self._times(time))
            self._told = [self._of_number(law) for law in laws]
        else:
            law = mixture.predict(time)
            weights = mixture.latest_weights[-1]
            self._told = [self._of_states(law.masses, law.unseen)]
            if self._steps > 1:
                ahead = mixture.walk(self._steps, self._times(time)).laws
                self._told += [self._of_states(line[:-1], float(line[-1])) for line in ahead[1:]]
        return weights

    def _times(self, time: int | None) -> list[int | None] | None:
        if time is None:
            return None
        return [time + (self._known.facts.cadence or 0) * step for step in range(self._steps)]


def _any_value(log: Log) -> bool:
    """Whether a row has one; a row that cannot be read tells enough."""
    try:
        return any(bool((held == held if log.kind == "numbers" else held >= 0).any()) for held, _ in log.pieces)
    except DataError:
        return True


def together(pieces: list[Piece]) -> Piece | None:
    """Pieces as one; None of none."""
    return join(pieces) if pieces else None
