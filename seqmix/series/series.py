"""Series: a log held in memory."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass, fields, replace
from functools import lru_cache
from typing import Any

import numpy as np

from ..errors import DataError, OptionError, visible
from .alphabet import Alphabet, Codes
from .clock import Clock
from .columns import Wanted
from .facts import Facts
from .gaps import GapFiller, find_cadence
from .kinds import KINDS, NO_NUMBERS, NumberText, are_numbers
from .opening import open_log
from .rows import CHUNK, MISSING, Rows, cut, join
from .source import LogFile
from .values import byte_codes, cell_text, times_of


@dataclass(kw_only=True, eq=False)
class Series(Facts):
    """A log held in memory, in arrays.

    codes, times: as in `Rows`, of all rows. first: row number of the first, not 0 in a slice.
    """

    codes: np.ndarray
    times: np.ndarray | None = None
    first: int = 0

    @classmethod
    def of(cls, values: Iterable[Any], kind: str | None = None, times: Any = None, name: str = "values") -> Series:
        """A series of Python values, an array, or bytes, as if read from a log.

        States are strings, or numbers and booleans, labelled as in JSON; None, NaN and the texts that mean a
        missing value in a log are missing rows. Bytes are bytes objects, or integers 0 to 255 and None with
        kind="bytes". times: ISO 8601 texts, datetimes, numpy datetimes or integer microseconds since 1970.

        Raises OptionError for numbers unless `kind` says how to take them, DataError for a value or time that
        cannot be taken.
        """
        if kind not in (None, *KINDS):
            raise OptionError(f"no kind '{visible(str(kind))}'; the kinds are {', '.join(KINDS)}")
        if kind is None and isinstance(values, (bytes, bytearray, memoryview)):
            kind = "bytes"
        if kind == "bytes":
            alphabet = Alphabet.for_bytes()
            codes = byte_codes(values, name)
        else:
            alphabet = Alphabet()
            codes = _state_codes(values, kind, Codes(alphabet, name, strip=False))
        made = cls(name=name, kind=kind or "states", alphabet=alphabet, format="values", codes=codes)
        if times is not None:
            made._set_times(*times_of(times, name))
        return made

    def __len__(self) -> int:
        return len(self.codes)

    def chunks(self) -> Iterator[Rows]:
        """The rows in chunks of `CHUNK`, the last one perhaps shorter; as often as wanted."""
        return cut([(self.codes, self.times)] if len(self) else [], self.first)

    def slice(self, start: int, stop: int | None = None) -> Series:
        """The rows from `start` up to, not including, `stop`, as a Python slice counts.

        A log of its own: its states are numbered afresh, in the order in which they first appear in it.
        """
        first = slice(start, stop).indices(len(self))[0]
        times = None if self.times is None else self.times[start:stop]
        codes, alphabet = self.codes[start:stop], self.alphabet
        if not alphabet.fixed:
            known, rows = np.unique(codes[codes >= 0], return_index=True)
            known = known[np.argsort(rows)]
            number = np.full(len(alphabet) + 1, MISSING, dtype=np.int32)  # the last is for missing rows
            number[known] = np.arange(len(known))
            codes, alphabet = number[codes], Alphabet(alphabet.labels[code] for code in known)
        return replace(self, codes=codes, alphabet=alphabet, times=times, first=self.first + first)

    def _set_times(self, times: np.ndarray, clock: Clock) -> None:
        if len(times) != len(self.codes):
            raise OptionError(f"{len(self.codes)} values, but {len(times)} times")
        self.clock = clock
        self.cadence = find_cadence(times[:CHUNK])
        filler = GapFiller(self.cadence)
        self.codes, self.times = join(list(filler.fill([(self.codes, times)])))
        self.gaps, self.filled = filler.gaps, filler.filled
        self.notes += filler.notes()


def _state_codes(values: Iterable[Any], kind: str | None, codes: Codes) -> np.ndarray:
    # Values come again and again; 1, 1.0 and True are equal but not the same state.
    text_of = lru_cache(maxsize=CHUNK, typed=True)(cell_text)
    try:
        cells = list(map(text_of, values.tolist() if isinstance(values, np.ndarray) else values))
    except TypeError as error:
        raise DataError(f"a value that is no state: {error}", codes.name) from None
    if kind == "numbers" or (kind is None and are_numbers(cells[:CHUNK], NumberText)):
        raise OptionError(NO_NUMBERS.format(visible(codes.name)))
    return np.fromiter(map(codes.__getitem__, cells), np.int32, len(cells))


def read(
    log: LogFile,
    *,
    column: Wanted = None,
    time: Wanted = None,
    kind: str | None = None,
    header: bool | None = None,
    alphabet: Alphabet | None = None,
) -> Series:
    """Read a whole log into memory: 4 bytes a row, 12 with times. Options, caps, errors: see `open_log`."""
    with open_log(log, column=column, time=time, kind=kind, header=header, alphabet=alphabet) as opened:
        chunks = list(opened.chunks())
        codes = np.concatenate([np.zeros(0, np.int32), *(rows.codes for rows in chunks)])
        times = [rows.times for rows in chunks if rows.times is not None]
        known = {fact.name: getattr(opened, fact.name) for fact in fields(Facts)}
        return Series(**known, codes=codes, times=np.concatenate(times) if times else None)
