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
from .gaps import GapFiller
from .kinds import KINDS, are_numbers
from .numbers import NumberError, Numbers
from .opening import open_log
from .rows import CHUNK, MISSING, Rows, cut, join
from .source import LogFile
from .values import byte_codes, cell_text, plain_numbers, times_of


@dataclass(kw_only=True, eq=False)
class Series(Facts):
    """A log held in memory, in arrays.

    codes, times, values: as in `Rows`, of all rows. first: row number of the first, not 0 in a slice.
    """

    codes: np.ndarray
    times: np.ndarray | None = None
    values: np.ndarray | None = None
    first: int = 0

    @classmethod
    def of(cls, values: Iterable[Any], kind: str | None = None, times: Any = None, name: str = "values") -> Series:
        """A series of Python values, an array, or bytes, as if read from a log.

        Numbers are integers and floats; infinite ones are missing, and those of float32 are taken as they print.
        States are strings and booleans, and with kind="states" numbers, labelled as in JSON. None, NaN and the
        texts that mean a missing value in a log are missing rows. Bytes are bytes objects, or integers 0 to 255
        and None with kind="bytes". times: ISO 8601 texts, datetimes, numpy datetimes or integer microseconds
        since 1970.

        Raises DataError for a value or time that cannot be taken, OptionError for a kind that is none.
        """
        if kind not in (None, *KINDS):
            raise OptionError(f"no kind '{visible(str(kind))}'; the kinds are {', '.join(KINDS)}")
        if kind is None and isinstance(values, (bytes, bytearray, memoryview)):
            kind = "bytes"
        numbers = Numbers()
        if kind == "bytes":
            alphabet = Alphabet.for_bytes()
            held = byte_codes(values, name)
        else:
            alphabet = Alphabet()
            held = _codes_or_numbers(values, kind, Codes(alphabet, name, strip=False), numbers)
            kind = "numbers" if held.dtype == np.float64 else "states"
        made = cls(name=name, kind=kind, alphabet=alphabet, format="values", codes=held, notes=numbers.notes())
        if times is None:
            made._hold(held, None)
        else:
            made._fill(held, *times_of(times, name))
        return made

    def __len__(self) -> int:
        return len(self.codes)

    def chunks(self) -> Iterator[Rows]:
        """The rows in chunks of `CHUNK`, the last one perhaps shorter; as often as wanted."""
        held = self.codes if self.values is None else self.values
        return cut([(held, self.times)] if len(self) else [], self.first)

    def slice(self, start: int, stop: int | None = None) -> Series:
        """The rows from `start` up to, not including, `stop`, as a Python slice counts.

        A log of its own: its states are numbered afresh, in the order in which they first appear in it.
        """
        first = slice(start, stop).indices(len(self))[0]
        times, values = (None if array is None else array[start:stop] for array in (self.times, self.values))
        codes, alphabet = self.codes[start:stop], self.alphabet
        if self.kind == "states":
            known, rows = np.unique(codes[codes >= 0], return_index=True)
            known = known[np.argsort(rows)]
            number = np.full(len(alphabet) + 1, MISSING, dtype=np.int32)  # the last is for missing rows
            number[known] = np.arange(len(known))
            codes, alphabet = number[codes], Alphabet(alphabet.labels[code] for code in known)
        return replace(self, codes=codes, alphabet=alphabet, times=times, values=values, first=self.first + first)

    def _hold(self, held: np.ndarray, times: np.ndarray | None) -> None:
        rows = Rows.of(held, times, self.first)
        self.codes, self.values, self.times = rows.codes, rows.values, rows.times

    def _fill(self, held: np.ndarray, times: np.ndarray, clock: Clock) -> None:
        if len(times) != len(held):
            raise OptionError(f"{len(held)} values, but {len(times)} times")
        self.clock = clock
        filler = GapFiller()
        self._hold(*join(list(filler.fill([(held, times)]))))
        self.cadence, self.gaps, self.filled = filler.cadence, filler.gaps, filler.filled
        self.notes += filler.notes()


def _codes_or_numbers(values: Iterable[Any], kind: str | None, codes: Codes, numbers: Numbers) -> np.ndarray:
    """(n,) int32 codes of states, or float64 numbers."""
    values = values if isinstance(values, np.ndarray) else list(values)
    if isinstance(values, np.ndarray) and values.ndim != 1:
        raise DataError(f"an array of {values.ndim} dimensions, where rows have one", codes.name)
    plain = None if kind == "states" else plain_numbers(values)
    if plain is not None:
        return numbers.finite(plain)
    # Values come again and again; 1, 1.0 and True are equal but not the same state.
    text_of = lru_cache(maxsize=CHUNK, typed=True)(cell_text)
    try:
        cells = list(map(text_of, values.tolist() if isinstance(values, np.ndarray) else values))
    except (TypeError, ValueError) as error:
        raise DataError(f"a value that cannot be taken: {error}", codes.name) from None
    if kind == "states" or (kind is None and not are_numbers(cells[:CHUNK], typed=True)):
        return np.fromiter(map(codes.__getitem__, cells), np.int32, len(cells))
    try:
        return numbers.parse(cells)
    except NumberError as error:
        message = (
            f"row {error.index}: {error}: '{visible(cells[error.index])}'; kind=\"states\" takes every value as one"
        )
        raise DataError(message, codes.name) from None


def read(
    log: LogFile,
    *,
    column: Wanted = None,
    time: Wanted = None,
    kind: str | None = None,
    header: bool | None = None,
    alphabet: Alphabet | None = None,
) -> Series:
    """Read a whole log into memory: 4 bytes a row, 12 of numbers, 8 more with times.

    Options, caps, errors: see `open_log`.
    """
    with open_log(log, column=column, time=time, kind=kind, header=header, alphabet=alphabet) as opened:
        chunks = list(opened.chunks())
        codes = np.concatenate([np.zeros(0, np.int32), *(rows.codes for rows in chunks)])
        times = [rows.times for rows in chunks if rows.times is not None]
        values = np.concatenate([np.zeros(0), *(rows.values for rows in chunks if rows.values is not None)])
        known = {fact.name: getattr(opened, fact.name) for fact in fields(Facts)}
        return Series(
            **known,
            codes=codes,
            times=np.concatenate(times) if times else None,
            values=values if opened.kind == "numbers" else None,
        )
