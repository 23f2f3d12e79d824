"""`seqmix follow`: rows as they arrive, each answered at once."""

from __future__ import annotations

import time
from collections.abc import Iterator
from contextlib import ExitStack
from typing import TYPE_CHECKING, Any

import click

from seqmix.cli.number_options import reads_numbers
from seqmix.cli.options import Helpful, Source, option, place_of, reads_log, takes_models
from seqmix.errors import OptionError, visible

if TYPE_CHECKING:
    from seqmix.cli.writer import Writer
    from seqmix.learned import Learned

COLUMNS = ("row", "time", "value", "bits", "p_value", "surprise")
STATES, NUMBERS = ("top", "probability", "unseen"), ("median", "p10", "p90")


class Every(click.ParamType):
    """A number of rows or of seconds: 1000rows, 60s."""

    name = "every"

    def convert(self, value: Any, param: click.Parameter | None, ctx: click.Context | None) -> tuple[int, str]:
        if isinstance(value, tuple):
            return value
        for unit in ("rows", "row", "s"):
            number = value.removesuffix(unit)
            if number != value and number.isdecimal() and int(number) > 0:
                return int(number), unit[0]
        self.fail(f"'{value}' is neither rows nor seconds; say 1000rows or 60s", param, ctx)


@click.command("follow", cls=Helpful, example="tail -F line.csv | seqmix follow --column state --format jsonl")
@option("--state", metavar="STATE", type=click.Path(), help="State file to go on from, and to keep what is learned.")
@option("--save-every", type=Every(), metavar="ROWSrows|SECONDSs", default="60s",
        help="How often STATE is written while rows arrive.")  # fmt: skip
@option("--steps", type=click.IntRange(min=1), metavar="N", default=1, help="Rows ahead that each answer foretells.")
@option("--false-alarms", metavar="COUNT/STRETCH", default="1/10000rows",
        help="Surprising rows to expect where nothing is wrong: 1/10000rows, 1/hour, 1/day, 1/week.")  # fmt: skip
@option("--strict", is_flag=True, help="End with an error at a row that cannot be read.")
@option("--format", type=click.Choice(["csv", "jsonl"]), default="jsonl", help="Format of the answers.")
@reads_numbers
@takes_models
@reads_log
def command(
    source: Source, format: str, library: dict[str, Any], state: str | None, save_every: tuple[int, str], steps: int,
    false_alarms: str, strict: bool, period: tuple[int, ...], resolution: float | None,
) -> None:  # fmt: skip
    """Answer each row of LOG as it arrives.

    An answer tells how surprising the row was under the law made before it, what that law had foretold, and what
    comes next. LOG is a pipe, or a growing file, which is followed through rotation and truncation until a signal
    ends it. A line is a row. One that cannot be read is told on stderr and left out. With STATE what was learned is
    kept; after a restart rows not later than the last one kept are left out, and a file without times is followed
    from its end. A hint to a person, no safety system.
    """
    from seqmix.cli.notes import say
    from seqmix.cli.run import Stopped
    from seqmix.cli.writer import writing
    from seqmix.following import Follower, Reader, together
    from seqmix.learned import Learned
    from seqmix.learning import held
    from seqmix.live import Arrivals, Stuck
    from seqmix.surprising import in_rows

    in_rows(false_alarms)  # what cannot be read is said before a row is waited for
    place = place_of(source.path)
    with ExitStack() as stack:
        known = stack.enter_context(held(state)) if state else None
        if known is not None:
            known.agree(library["models"], period or None, resolution, library["compressor_share"])
            last = known.filler.last
            when = "" if last is None else f", {known.facts.clock.text(last)}"
            if not source.quiet:
                say(f"{visible(state or '')}: going on after row {known.rows}{when}")

        def learn(facts: Any) -> Learned:
            if facts.kind == "bytes":
                raise OptionError("follow reads rows that are lines; give bytes as lines, or --as states")
            return Learned(facts, library["models"], period or None, resolution, library["compressor_share"])

        from_end = known is not None and known.filler.last is None
        arrivals = stack.enter_context(Arrivals(place, from_end))
        reader = Reader(
            arrivals.name, learn, known, tell=say, strict=strict,
            kind=source.kind, column=source.column, time=source.time, header=source.header,
        )  # fmt: skip
        writer = stack.enter_context(writing(None, format))
        head = format == "csv"
        saver = _Saver(state, *save_every)
        follower: Follower | None = None
        try:
            for lines in arrivals:
                piece = together(reader.feed(lines, end=arrivals.ended))
                if piece is not None and reader.known is not None:
                    if follower is None:
                        follower = Follower(reader.known, false_alarms, steps)
                        saver.known = reader.known
                    for told in follower.feed(piece, enough=lambda: arrivals.stopped is not None):
                        saver.row()
                        with arrivals.handing():
                            _write(writer, told, head)
                        head = False
                if arrivals.stopped is not None:
                    break
                saver.look()
        except Stuck:
            pass
        finally:
            if follower is None or not follower.torn:
                saver.save()
        for count, what in ((reader.skipped, "rows that could not be read"), (reader.old, "rows known before")):
            if count and not source.quiet:
                say(f"{what}, left out: {count}")
        if arrivals.stopped is not None:
            raise Stopped(arrivals.stopped)


class _Saver:
    """Writes the state now and then."""

    def __init__(self, path: str | None, every: int, unit: str) -> None:
        self._path, self._every, self._unit = path, every, unit
        self.known: Learned | None = None
        self._rows = 0
        self._saved = time.monotonic()

    def row(self) -> None:
        self._rows += 1

    def look(self) -> None:
        """Save if it is time to."""
        since = self._rows if self._unit == "r" else time.monotonic() - self._saved
        if since >= self._every:
            self.save()

    def save(self) -> None:
        if self._path is not None and self.known is not None and self._rows:
            self.known.save(self._path)
            self._rows = 0
        self._saved = time.monotonic()


def _write(writer: Writer, told: dict[str, Any], head: bool) -> None:
    """One answer, flushed; head: after the names of the columns."""
    if writer.format == "jsonl":
        writer.record(told)
    else:
        numbers = "quantiles" in _first(told["next"])
        names = NUMBERS if numbers else STATES
        if head:
            ahead = [f"{part}_{name}" for part in ("forecast", "next") for name in names]
            writer.row((*COLUMNS, *ahead, "leading", "weight"))
        cells = [told[column] for column in COLUMNS]
        for part in ("forecast", "next"):
            cells += _cells(_first(told[part]), numbers)
        writer.row((*cells, told["leading"], told["weight"]))
    writer.flush()


def _first(told: Any) -> dict[str, Any]:
    return told[0] if isinstance(told, list) else told or {}


def _cells(told: dict[str, Any], numbers: bool) -> Iterator[Any]:
    if not numbers:
        return iter([told.get(name) for name in STATES])
    quantiles = list(told.get("quantiles", {"low": None, "high": None}).values())
    return iter([told.get("median"), *quantiles])
