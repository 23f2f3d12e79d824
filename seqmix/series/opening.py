"""Opening a log: all that is decided from its first lines, before a row is read."""

from __future__ import annotations

from collections.abc import Iterator
from itertools import islice

import numpy as np

from ..errors import DataError, OptionError, visible
from .alphabet import Alphabet, Codes
from .clock import Clock, TimeTextError, is_time
from .columns import Options, Wanted
from .facts import Facts
from .jsonlines import JsonLines
from .kinds import KINDS, are_numbers, is_text
from .layout import Beside, Layout
from .lines import Lines
from .log import Log
from .numbers import NumberError, Numbers
from .rows import CHUNK, Piece
from .separated import Separated
from .source import LogFile, Source
from .text import Text


def open_log(
    log: LogFile,
    *,
    column: Wanted = None,
    time: Wanted = None,
    kind: str | None = None,
    header: bool | None = None,
    alphabet: Alphabet | None = None,
    after: Facts | None = None,
) -> Log:
    """Open a log: a path, "-" for standard input, or an open file.

    Lines, CSV, TSV, JSON Lines and bytes are told apart by the first `CHUNK` lines or the first MiB;
    `Log.notes` says what was assumed. All may be compressed: gzip and zstandard are seen by content, brotli
    by the ending .br.

    column, time: name or number from 1 of the columns of values and times. kind: "states", "numbers" or "bytes".
    header: whether the first line names the columns. alphabet: of another log, to go on with its states.
    after: of a log whose next rows these are: kind, layout, columns, clock and states are those of that log.
    A first line is then a header if that log had one and its column is named in it.
    Blank cells, NA, NaN and null are missing rows, and so are infinite numbers; gaps of a log with a regular
    clock become such rows. A column whose first `CHUNK` values are all numbers is one of numbers.
    Blanks around cells do not count, save in JSON strings.

    Caps: 16 GiB out of a compressed log, 16 MiB a line or record, 1,048,576 states.
    Raises DataError for a log that cannot be read, OptionError for columns or a kind that it does not have.
    """
    if alphabet is not None:
        known = "bytes" if alphabet.fixed else "states"
        if kind == "numbers" and not len(alphabet):
            known = "numbers"
        if kind not in (None, known):
            raise OptionError(f"the alphabet is one of {known}, so the log cannot be read as {kind}")
        kind = known
    if kind not in (None, *KINDS):
        raise OptionError(f"no kind '{visible(str(kind))}'; the kinds are {', '.join(KINDS)}")
    options = Options(column, time, kind, header)
    if after is not None:
        after.agree(options)
        alphabet = after.alphabet
        options = Options(kind=after.kind, header=header)
    source = Source(log)
    try:
        text = Text(source)
        if _as_bytes(text, options):
            return _open_bytes(source, text, options, alphabet)
        return _open_text(source, text, options, Alphabet() if alphabet is None else alphabet, after)
    except BaseException:
        source.close()
        raise


def _as_bytes(text: Text, options: Options) -> bool:
    if options == Options():
        return not is_text(text.sample)
    return options.kind == "bytes"


def _open_bytes(source: Source, text: Text, options: Options, alphabet: Alphabet | None) -> Log:
    if (options.column, options.time, options.header) != (None, None, None):
        raise OptionError(f"{visible(source.name)} is read as bytes, which have no columns and no header")
    notes = [] if options.kind else ["taken as bytes, as it is not UTF-8 text; --as states takes it as text"]
    return Log(
        name=source.name,
        kind="bytes",
        alphabet=Alphabet.for_bytes() if alphabet is None else alphabet,
        format="bytes",
        compression=source.compression,
        notes=notes,
        pieces=((np.frombuffer(block, np.uint8).astype(np.int32), None) for block in text.raw()),
        close=source.close,
    )


def _open_text(source: Source, text: Text, options: Options, alphabet: Alphabet, after: Facts | None) -> Log:
    name = source.name
    start = text.sample_text()
    notes: list[str] = []
    if after is None:
        layout: Layout = JsonLines.detect(start) or Separated.detect(start, text.whole) or Lines(start)
        sample = layout.sample(name, options, notes)
        value, when = sample.choose(options.column, options.time, notes)
        times = [] if when is None else sample.columns[when]
        clock = Clock.like(next(filter(is_time, times), ""))
    else:
        layout = _layout_after(after, start, text)
        columns = (after.column, after.time_column)
        header = False if options.header is None and not after.header else options.header
        sample = layout.again(name, columns, header)
        value, when = sample.again(columns, after.places)
        clock = after.clock
    kind = options.kind or ("numbers" if are_numbers(sample.columns[value], layout.typed) else "states")
    beside = Beside()
    cells = layout.cells(text, sample, value, when, beside)
    if kind == "numbers":
        held = _numbers(cells, beside, name, value, notes)
    else:
        held = _codes(cells, Codes(alphabet, name, strip=not layout.typed))
    return Log(
        name=name,
        kind=kind,
        alphabet=alphabet,
        format=layout.name,
        column=sample.label(value),
        time_column=None if when is None else sample.label(when),
        places=(None if sample.single else value + 1, None if when is None else when + 1),
        separator=layout.separator,
        header=sample.names is not None and layout.name != "jsonl",
        compression=source.compression,
        clock=clock,
        notes=notes,
        pieces=_pieces(held, beside, name, clock, when),
        close=source.close,
    )


def _layout_after(after: Facts, start: str, text: Text) -> Layout:
    """The layout of the next rows of a log, that of the rows before them; one value a line where there is none."""
    if after.format == "jsonl":
        found: Layout | None = JsonLines.detect(start)
    elif after.separator is not None:
        found = Separated.detect(start, text.whole, (after.separator,))
    else:
        found = Lines(start)
    if found is None and start.strip() and after.places[0] is not None:
        raise DataError(f"the rows before it are {after.format}, and these are not", text.name)
    return found or Lines(start)


def _codes(cells: Iterator[str], codes: Codes) -> Iterator[np.ndarray]:
    """(n,) int32, `CHUNK` rows at a time, so that the alphabet at a row does not depend on how the bytes arrive."""
    coded = map(codes.__getitem__, cells)
    while len(batch := np.fromiter(islice(coded, CHUNK), np.int32)):
        yield batch


def _numbers(cells: Iterator[str], beside: Beside, name: str, column: int, notes: list[str]) -> Iterator[np.ndarray]:
    """(n,) float64, `CHUNK` rows at a time; adds to `notes` what was met, at the end."""
    numbers = Numbers()
    while batch := list(islice(cells, CHUNK)):
        try:
            yield numbers.parse(batch)
        except NumberError as error:
            message = f"{error}: '{visible(batch[error.index])}'; --as states takes every distinct value as a state"
            raise DataError(message, name, beside.line(error.index), column + 1) from None
    notes += numbers.notes()


def _pieces(held: Iterator[np.ndarray], beside: Beside, name: str, clock: Clock, when: int | None) -> Iterator[Piece]:
    """Batches of codes or numbers with their times."""
    for batch in held:
        times = None
        if when is not None:
            try:
                times = clock.parse(beside.times)
            except TimeTextError as error:
                message = f"{error.reason}: '{visible(beside.times[error.index])}'"
                raise DataError(message, name, beside.line(error.index), when + 1) from None
        beside.done(len(batch))
        yield batch, times
