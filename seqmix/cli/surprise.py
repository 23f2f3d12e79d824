"""`seqmix surprise`: the rows of a log that were improbable, and how improbable."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import click

from seqmix.cli.number_options import for_numbers, reads_numbers
from seqmix.cli.options import Answer, Helpful, Source, goes_on, option, reads_log, takes_models, writes_answer
from seqmix.cli.writer import Writer, bits

if TYPE_CHECKING:
    from seqmix.learned import Learned
    from seqmix.surprising import Event, Surprise, SurpriseRow

EVENT = ("start", "end", "start_time", "end_time", "rows", "value", "p_value", "excess_bits")
ROW = ("row", "time", "value", "bits", "expected_bits", "p_value", "surprise")


@click.command("surprise", cls=Helpful, example="seqmix surprise tank.csv --false-alarms 1/day")
@option("--false-alarms", metavar="COUNT/STRETCH", default="1/10000rows",
        help="Surprising rows to expect where nothing is wrong: 1/10000rows, 1/hour, 1/day, 1/week.")  # fmt: skip
@option("--all", "every", is_flag=True, help="Print every row instead of the events.")
@reads_numbers
@takes_models
@goes_on
@reads_log
@writes_answer
def command(
    source: Source, answer: Answer, library: dict[str, Any], false_alarms: str, every: bool, period: tuple[int, ...],
    resolution: float | None, known: Learned | None,
) -> None:  # fmt: skip
    """Find the rows of LOG that their own law held improbable.

    Each row is predicted before it is read. Its p-value is the probability, under that law, of all that is no
    likelier than what came. A row is surprising if that is so small that it would happen at the stated rate on a
    log the models tell of truly; surprising rows near each other are one event. A hint to a person, no safety system.
    """
    import seqmix

    with answer.open() as writer, source.open(known=known) as log:
        numbers = for_numbers(log, period=period, resolution=resolution)
        rows: list[SurpriseRow] = []
        if every and writer.format == "csv":
            writer.row(ROW)

        def write(row: SurpriseRow) -> None:
            if writer.format == "csv":
                writer.row(row.record().values())
            elif writer.format == "jsonl":
                writer.record(row.record())
            else:
                rows.append(row)

        on_row = write if every else None
        found = seqmix.surprise(log, false_alarms=false_alarms, state=known, on_row=on_row, **library, **numbers)
        if not every:
            _write_events(writer, found)
        elif writer.format == "table":
            _write_rows(writer, rows)


def chance(p_value: float) -> str:
    """A p-value as a table shows it."""
    return f"{p_value:.2g}"


def shown(value: str | float) -> str:
    """A value of a log as a table shows it."""
    return f"{value:.12g}" if isinstance(value, float) else value


def _write_rows(writer: Writer, rows: list[SurpriseRow]) -> None:
    timed = any(row.time for row in rows)
    writer.table(
        [("row", ">"), *([("time", "<")] if timed else []), ("value", "<"), ("bits", ">"), ("expected", ">"),
         ("p-value", ">"), ("surprise", "<")],
        [
            (str(row.row), *([row.time or ""] if timed else []), shown(row.value), bits(row.bits),
             bits(row.expected_bits), chance(row.p_value), "yes" if row.surprise else "")
            for row in rows
        ],
    )  # fmt: skip


def _write_events(writer: Writer, found: Surprise) -> None:
    if writer.format == "jsonl":
        for event in found.events:
            writer.record(event.record())
    elif writer.format == "csv":
        writer.row(EVENT)
        for event in found.events:
            writer.row(event.record().values())
    else:
        timed = any(event.start_time for event in found.events)
        if found.events:
            writer.table(
                [("rows", ">"), *([("from", "<"), ("to", "<")] if timed else []), ("surprising", ">"),
                 ("least probable", "<"), ("p-value", ">"), ("excess, bits", ">")],
                [_cells(event, timed) for event in found.events],
            )  # fmt: skip
        expected = found.rate * found.rows
        writer.lines(
            [f"rows with a value: {found.rows}; surprising: {found.surprising}; false alarms to expect: {expected:.2g}"]
        )


def _cells(event: Event, timed: bool) -> tuple[str, ...]:
    where = f"{event.start}" if event.start == event.end else f"{event.start}-{event.end}"
    times = (event.start_time or "", event.end_time or "") if timed else ()
    return where, *times, str(event.rows), shown(event.value), chance(event.p_value), f"{event.excess_bits:.1f}"
