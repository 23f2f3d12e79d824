"""What a log has taught so far, and how its next rows go on from there: what a state file holds."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import asdict
from itertools import chain
from os import PathLike, fspath
from typing import Any

import numpy as np

import seqmix
from seqmix import state
from seqmix.errors import DataError, OptionError, visible
from seqmix.inputs import opened_after
from seqmix.mixture.mixture import Mixture
from seqmix.models.protocol import Model
from seqmix.reading import mixture_for, with_last
from seqmix.series import CHUNK, Alphabet, Clock, Log, Rows
from seqmix.series.facts import Facts
from seqmix.series.gaps import GapFiller, find_cadence
from seqmix.series.kinds import KINDS
from seqmix.series.rows import Piece, cut, join, joined

_LOG = ("kind", "format", "column", "time_column", "places", "separator", "header", "clock", "cadence")

Models = Sequence[str] | Sequence[Model] | None
Periods = int | Sequence[int] | None


class Learned:
    """A mixture that has learned a log up to some row, and all it takes to go on with the next.

    facts: what the log is; its alphabet grows. mixture: what has learned the rows. filler: where the clock stands.
    tail: the last rows, not absorbed yet: models that sleep may wake on them, if a forecast comes next.
    held: the rows as logged, while fewer than `CHUNK` were read: what these decide, the cadence, is decided anew with
    those that follow, so that a log learned in pieces is learned as in one. timed: whether the rows have times.
    """

    def __init__(
        self,
        facts: Facts,
        models: Models = None,
        period: Periods = None,
        resolution: float | None = None,
        compressor_share: float | None = None,
    ) -> None:
        """Nothing learned yet of the log that `facts` tell of. Raises OptionError for models that are no names."""
        if any(not isinstance(model, str) for model in models or ()):
            raise OptionError("a state keeps models of the library; give them by name")
        self.facts = facts
        self.asked: dict[str, Any] = {
            "models": None if models is None else [str(model) for model in models],
            "period": None if period is None else [period] if isinstance(period, int) else [int(n) for n in period],
            "resolution": resolution,
            "compressor_share": compressor_share,
        }
        self.timed: bool | None = None  # not known before the first row
        self.held: Piece | None = None
        self.tail: Rows | None = None
        self.settled = False
        self.filler = GapFiller()
        self._mixture: Mixture | None = None

    @property
    def rows(self) -> int:
        """Learned so far, the tail too."""
        return self.mixture.rows + (0 if self.tail is None else len(self.tail))

    @property
    def mixture(self) -> Mixture:
        """Blank before the first row; it has learned all rows but the tail."""
        if self._mixture is None:
            self._mixture = self._blank(self.asked["models"])
        return self._mixture

    def _blank(self, models: list[str] | None) -> Mixture:
        nothing = Rows(np.zeros(0, np.int32), np.zeros(0, np.int64) if self.timed else None, 0)
        options = (self.asked[name] for name in ("period", "resolution", "compressor_share"))
        return mixture_for(self.facts, nothing, models, *options)

    def agree(self, models: Models, period: Periods, resolution: float | None, compressor_share: float | None) -> None:
        """Raises OptionError where something else is asked for than what was learned with."""
        name = visible(self.facts.name)
        asked = Learned(self.facts, models, period, resolution, compressor_share).asked
        if models is not None and set(models) != set(self.mixture.names):
            raise OptionError(f"{name} mixes the models {', '.join(self.mixture.names)}; leave --models out")
        for option in ("period", "resolution", "compressor_share"):
            if asked[option] not in (None, self.asked[option]):
                words = option.replace("_", " "), option.replace("_", "-")
                raise OptionError(f"{name} was learned with another {words[0]}; leave --{words[1]} out")

    @contextmanager
    def go_on(self, log: Any, **reading: Any) -> Iterator[Log]:
        """The tail and the next rows of the log, ready to be read: `chunks()` gives them to `mixture`.

        log: a path, an open file, values, a Series, a Log opened with after=`facts`, or None for no rows. What is read
        counts as learned: `save` after the last chunk was absorbed, or not at all.
        """
        with opened_after(self.facts, log, **reading) as source:
            first = next(source.pieces, None)
            if first is not None:
                self.take(first, source.name)
                source.pieces = chain([first], map(self._taken, source.pieces))
            source.filler = self.filler
            if source.before is None:
                source.first, source.before, self.tail = self.rows, self.tail, None
            source.cadence = self.facts.cadence
            yield source

    def _taken(self, piece: Piece) -> Piece:
        self.take(piece, self.facts.name)
        return piece

    def push(self, piece: Piece) -> Iterator[Rows]:
        """Rows as logged, codes or numbers and times, as the rows that `mixture` has to absorb next."""
        self.take(piece, self.facts.name)
        self.finish()
        return cut(self.filler.fill([piece]), self.mixture.rows)

    def finish(self) -> None:
        """Absorb the tail: no forecast comes next."""
        if self.tail is not None:
            self.mixture.absorb(self.tail)
            self.tail = None

    def learn(self, chunks: Iterator[Rows]) -> int:
        """Absorb what `go_on` reads, all but the tail; returns how many rows there were, the old tail too."""
        count = 0
        tail: list[Rows] = []
        for rows, left in with_last(chunks):
            count += len(rows)
            if left < 0:
                self.mixture.absorb(rows)
            else:
                tail.append(rows)
        self.tail = joined(tail)
        return count

    def take(self, piece: Piece, name: str) -> None:
        """Note rows as logged that come next. May make `mixture` anew, if they settle another cadence.

        Raises DataError where they have times and those before have none, or the other way round.
        """
        held, times = piece
        if not len(held):
            return
        if self.timed is None:
            self.timed = times is not None
        if self.timed != (times is not None):
            raise DataError(f"rows {'without' if self.timed else 'with'} times, unlike those learned before", name)
        if self.settled:
            return
        before, self.held = self.held, piece if self.held is None else join([self.held, piece])
        if self._mixture is None or self._cadence() != self.facts.cadence:
            self._build(before)
        if len(self.held[0]) >= CHUNK:
            self.settled, self.held = True, None

    def _cadence(self) -> int | None:
        """As the first rows say."""
        times = None if self.held is None else self.held[1]
        return None if times is None else find_cadence(times[:CHUNK])

    def _build(self, before: Piece | None) -> None:
        """Make the mixture, and teach it rows as logged."""
        self.facts.cadence = self._cadence()
        self.filler = GapFiller()
        self.filler.settle(self.facts.cadence)
        self._mixture = self._blank(self.asked["models"])
        self.tail = None
        self.learn(cut(self.filler.fill([] if before is None else [before])))

    def save(self, path: str | PathLike[str]) -> None:
        """Write the state file `path`, see `seqmix.state`; the caller holds its lock. Raises OutputError."""
        path, labels = fspath(path), [label.encode() for label in self.facts.alphabet.labels]
        arrays: state.Arrays = {
            "labels": np.frombuffer(b"".join(labels), np.uint8),
            "ends": np.cumsum([len(label) for label in labels], dtype=np.int64),
        }
        scalars: dict[str, Any] = {}
        if not self.settled:
            if self.held is not None:
                arrays["held"] = self.held[0]
                if self.held[1] is not None:
                    arrays["times"] = self.held[1]
        else:
            if self.tail is not None:
                arrays["tail"] = self.tail.codes if self.tail.values is None else self.tail.values
                if self.tail.times is not None:
                    arrays["tail_times"] = self.tail.times
            for name, value in self.mixture.state(copy=False).items():
                if isinstance(value, np.generic):
                    value = value.item()
                if isinstance(value, np.ndarray | float):
                    arrays["mixture." + name] = np.asarray(value)
                else:
                    scalars["mixture." + name] = value
        log = {name: getattr(self.facts, name) for name in _LOG} | {"clock": asdict(self.facts.clock)}
        header = {
            "seqmix": seqmix.__version__,
            "rows": self.rows,
            "log": log,
            "timed": self.timed,
            "settled": self.settled,
            "last": self.filler.last,
            "asked": self.asked,
            "models": self.mixture.names,
            "scalars": scalars,
        }
        state.write(path, header, arrays)


def load(path: str | PathLike[str]) -> Learned:
    """What the state file `path` holds. Raises StateError, which says what is wrong with it."""
    path = fspath(path)
    header, arrays = state.read(path)
    try:
        return _restored(path, header, arrays)
    except (KeyError, ValueError, TypeError, IndexError, AttributeError, OverflowError, OptionError) as error:
        raise state.unfit(path, error) from error


def _restored(path: str, header: dict[str, Any], arrays: state.Arrays) -> Learned:
    log = {name: header["log"][name] for name in _LOG}
    log |= {"name": path, "clock": Clock(**log["clock"]), "places": tuple(log["places"])}
    if log["kind"] not in KINDS or not all(isinstance(time, int | None) for time in (log["cadence"], header["last"])):
        raise ValueError(f"a log of {log['kind']}, cadence {log['cadence']}, last time {header['last']}")
    learned = Learned(Facts(**log, alphabet=_alphabet(log["kind"], arrays)), **header["asked"])
    learned.timed, learned.settled = header["timed"], header["settled"]
    if learned.settled:
        learned.filler.settle(learned.facts.cadence)
        learned.filler.last = header["last"]
        learned._mixture = learned._blank(header["models"])  # a later library may have more
        kept = {**header["scalars"], **{name: a if a.shape else a.item() for name, a in arrays.items()}}
        start = "mixture."
        learned.mixture.restore({name[len(start) :]: v for name, v in kept.items() if name.startswith(start)})
        if "tail" in arrays:
            _check_rows(arrays["tail"], arrays.get("tail_times"), log["kind"])
            learned.tail = Rows.of(arrays["tail"], arrays.get("tail_times"), learned.mixture.rows)
    elif "held" in arrays:
        held, times = arrays["held"], arrays.get("times")
        _check_rows(held, times, log["kind"])
        learned.held = (held, times)
        learned._build(learned.held)
    seen = max(learned.mixture.seen, 0 if learned.tail is None else int(learned.tail.codes.max()) + 1)
    if log["kind"] != "numbers" and seen > len(learned.facts.alphabet):
        raise ValueError("states without a label")
    if learned.rows != header["rows"]:
        raise ValueError(f"{learned.rows} rows, not {header['rows']}")
    return learned


def _check_rows(held: np.ndarray, times: np.ndarray | None, kind: str) -> None:
    """Raises ValueError for what are no rows as logged."""
    forms = [(held, np.float64 if kind == "numbers" else np.int32)]
    forms += [] if times is None else [(times, np.int64)]
    if any(array.dtype != form or array.shape != (len(held),) for array, form in forms):
        raise ValueError("rows that are none")


def _alphabet(kind: str, arrays: state.Arrays) -> Alphabet:
    """Raises ValueError for labels that do not lie end to end, or are there twice."""
    text, labels, start = arrays["labels"].tobytes(), [], 0
    for end in arrays["ends"].tolist():
        labels.append(text[start:end].decode())
        start = end
    if b"".join(label.encode() for label in labels) != text or len(set(labels)) < len(labels):
        raise ValueError("labels that are none")
    return Alphabet(labels, fixed=kind == "bytes")


def facts_of(log: Facts, name: str) -> Facts:
    """The facts alone, under the name of a state."""
    return Facts(name=name, alphabet=log.alphabet, **{known: getattr(log, known) for known in _LOG})
