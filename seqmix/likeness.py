"""Alike: how many bits a log saves when another one is known first."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from math import gcd
from typing import Any

import numpy as np

from seqmix.distances import Distances, text_of_codes, text_of_numbers
from seqmix.errors import OptionError, visible
from seqmix.inputs import Held, opened
from seqmix.mixture.mixture import Mixture
from seqmix.models.registry import SHARE
from seqmix.reading import mixture_for
from seqmix.series import MISSING, Alphabet, Log, Rows, Series
from seqmix.series.grid import Grid

NOTHING = 1e-6
"""Bits that are rounding errors: a log of one state costs none."""

Watch = Callable[[Iterable[Rows]], Iterator[Rows]]


@dataclass(frozen=True)
class Pair:
    """What knowing one log first is worth for another.

    log, known_first: their names. rows: of `log` that have a value. bits_alone: their loss from a blank start.
    bits_after: their loss after all of `known_first`. saved_bits: the difference; negative where the known log
    misleads. saved_share: of bits_alone, None where these are next to 0. distance: normalised compression distance
    of the two, symmetric. distances: the same by each compressor alone.
    """

    log: str
    known_first: str
    rows: int
    bits_alone: float
    bits_after: float
    saved_bits: float
    saved_share: float | None
    distance: float
    distances: dict[str, float]


@dataclass(frozen=True)
class Likeness:
    """Logs held against each other.

    pairs: for each log in turn, the others, nearest first: that which saves the largest share of its bits.
    names: of the logs, in the order given; a name that comes again has its count behind it: "a.csv (2)".
    resolution: of the grid that logs of numbers share, the coarsest on which all lie; None for other kinds.
    """

    pairs: list[Pair]
    names: list[str]
    resolution: float | None

    def records(self) -> Iterator[dict[str, Any]]:
        """One JSON-ready object a pair."""
        return (dict(vars(pair)) for pair in self.pairs)


def alike(
    logs: Iterable[Any],
    *,
    to: Any = None,
    models: Sequence[str] | None = None,
    compressor_share: float = SHARE,
    watch: Watch | None = None,
    **reading: Any,
) -> Likeness:
    """How many bits each log saves when another one is known first: for each pair of logs, in both directions.

    logs: at least two, of one kind, as for `seqmix.forecast`; each is read once, and held. to: one more log; only
    what the others save for this one is answered then. models: names, None for all that fit.
    compressor_share: of the run time, for the models made of compressors. watch: rows pass through it as the models
    read them, to show progress. reading: column, time, kind, header, as for `seqmix.read`.

    The bits after are those of `score(known_first, against=log)`. Logs of numbers share the coarsest grid on which
    all lie, and the cadence of the first. Times count where every log has them.
    n logs take n * n readings by the models, with `to` 2 n + 1. Raises OptionError or DataError.
    """
    if models is not None and not all(isinstance(model, str) for model in models):
        raise OptionError("a likeness takes models by name: each log starts with new ones")
    held = _Logs(watch or iter, compressor_share)
    for log in logs:
        held.add(log, reading)
    targets: Sequence[int] = range(len(held.logs))
    if to is not None:
        held.add(to, reading)
        targets = [len(held.logs) - 1]
    if len(held.logs) < 2:
        raise OptionError("a likeness takes at least two logs")
    return held.compare(models, targets)


class _Logs:
    """Logs of one kind, each with the rows it has."""

    def __init__(self, watch: Watch, compressor_share: float) -> None:
        self.logs: list[Log | Series] = []
        self._held: list[Held] = []
        self._timed = True  # all of them, so far
        self._watch = watch
        self._share = compressor_share

    def add(self, log: Any, reading: dict[str, Any]) -> None:
        with opened(log, **reading) as source:
            first = self.logs[0] if self.logs else source
            if source.kind != first.kind:
                raise OptionError(
                    f"{visible(source.name)} is read as {source.kind}, but {visible(first.name)} as {first.kind}; "
                    "logs that are compared are of one kind"
                )
            if isinstance(source, Series):
                source = source.slice(0)  # an alphabet of its own: states that others brought do not count
            held = Held(source)
            self._timed = self._timed and all(rows.times is not None for rows in held.chunks())
            self._held.append(held)
            self.logs.append(source)

    def compare(self, models: Sequence[str] | None, targets: Sequence[int]) -> Likeness:
        names = _distinct([log.name for log in self.logs])
        numbers = self.logs[0].kind == "numbers"
        resolution = self._resolution() if numbers else None
        first = next((rows for i in range(len(self.logs)) for rows in self._rows(i)), None)

        def learn(rows: Iterable[Rows], state: dict[str, Any]) -> tuple[float, Mixture]:
            """Bits that a mixture loses on these rows, from a blank start or a `state` on; and the mixture."""
            mixture = mixture_for(self.logs[0], first, models, resolution=resolution, compressor_share=self._share)
            if state:
                mixture.restore(state)
            return sum(float(mixture.absorb(part).sum()) for part in self._watch(rows)), mixture

        distances = Distances(self._texts(resolution))
        alone: dict[int, float] = {}
        after: dict[tuple[int, int], float] = {}
        for known in range(len(self.logs)):
            alone[known], mixture = learn(self._rows(known), {})
            state = mixture.state()
            del mixture  # the tables of one are large
            for log in targets:
                if log != known:
                    after[log, known] = learn(self._rows(log, known), state)[0]
        pairs = []
        for log in targets:
            rows = sum(int((part.codes >= 0).sum()) for part in self._held[log].chunks())
            others = []
            for known in range(len(self.logs)):
                if known != log:
                    saved = alone[log] - after[log, known]
                    distance = dict(distances.between(log, known))
                    others.append(
                        Pair(
                            names[log], names[known], rows, alone[log], after[log, known], saved,
                            saved / alone[log] if alone[log] > NOTHING else None, distance.pop("least"), distance,
                        )
                    )  # fmt: skip
            pairs += sorted(others, key=lambda pair: -pair.saved_bits)
        return Likeness(pairs, names, resolution)

    def _rows(self, log: int, known: int | None = None) -> Iterator[Rows]:
        """The rows of a log; its states numbered as those that follow after the log `known`."""
        code = None if known is None else self._numbering(log, Alphabet(self.logs[known].alphabet.labels))
        for rows in self._held[log].chunks():
            codes = rows.codes if code is None or rows.values is not None else code[rows.codes]
            yield replace(rows, codes=codes, times=rows.times if self._timed else None)

    def _numbering(self, log: int, alphabet: Alphabet) -> np.ndarray:
        """(states + 1,) int32: the code in `alphabet` of each state of a log, which is added when new; and MISSING."""
        return np.array([*map(alphabet.encode, self.logs[log].alphabet.labels), MISSING], dtype=np.int32)

    def _resolution(self) -> float:
        """Of the coarsest grid that holds those of all logs that have a value."""
        common = Fraction(0)
        for held in self._held:
            grid = Grid()
            for rows in held.chunks():
                grid.cells(np.asarray(rows.values))
            if any((rows.codes >= 0).any() for rows in held.chunks()):
                common = _common_divisor(common, Fraction(repr(grid.resolution)))
        return min(max(float(common), 1e-300), 1e300) if common else 1.0

    def _texts(self, resolution: float | None) -> list[bytes]:
        """Each log as bytes for the compressors, in one alphabet."""
        if resolution is not None:
            return [
                b"".join(text_of_numbers(np.asarray(rows.values), resolution) for rows in held.chunks())
                for held in self._held
            ]
        alphabet = Alphabet()
        codes = [self._numbering(log, alphabet) for log in range(len(self.logs))]
        missing = any((rows.codes < 0).any() for held in self._held for rows in held.chunks())
        states = len(alphabet) + missing
        for code in codes:
            code[-1] = len(alphabet)
        return [
            b"".join(text_of_codes(code[rows.codes], states) for rows in held.chunks())
            for code, held in zip(codes, self._held, strict=True)
        ]


def _common_divisor(one: Fraction, other: Fraction) -> Fraction:
    whole = gcd(one.numerator * other.denominator, other.numerator * one.denominator)
    return Fraction(whole, one.denominator * other.denominator)


def _distinct(names: Sequence[str]) -> list[str]:
    """Names, with the count behind one that was there before."""
    return [name if not (before := names[:i].count(name)) else f"{name} ({before + 1})" for i, name in enumerate(names)]
