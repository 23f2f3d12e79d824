"""`seqmix describe`: what a log holds, and what was assumed while reading it."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import click

from seqmix.cli.options import Answer, Helpful, Source, reads_log, writes_answer
from seqmix.cli.writer import Writer, bits, percent

SHOWN = 20  # states the table names

FIELDS = {
    "name": "log", "kind": "kind", "format": "format", "compression": "compression", "column": "column",
    "rows": "rows", "missing": "missing rows", "alphabet": "states", "minimum": "minimum", "maximum": "maximum",
    "mean": "mean", "median": "median", "resolution": "resolution", "distinct": "different numbers",
    "first_time": "first time", "last_time": "last time", "cadence_seconds": "cadence, seconds", "gaps": "gaps",
    "filled": "rows put into gaps", "entropy_bits": "entropy, bits a row",
}  # fmt: skip
NUMBERS = ("minimum", "maximum", "mean", "median", "resolution")


@click.command("describe", cls=Helpful, example="seqmix describe line.csv --column state")
@reads_log
@writes_answer
def command(source: Source, answer: Answer) -> None:
    """Show how LOG is read: its kind, rows, values, clock and gaps.

    What was assumed is listed with the option that changes it. The entropy is that of the states without their
    order, so a model that knows the order should stay under it. The resolution is that of the grid on which the
    numbers lie.
    """
    import seqmix

    with answer.open() as writer, source.open(notes=False) as log:
        _write(writer, seqmix.describe(log).record())


def _write(writer: Writer, record: dict[str, Any]) -> None:
    if writer.format == "jsonl":
        writer.record(record)
    elif writer.format == "csv":
        writer.row(("field", "value"))
        for line in _lines(record):
            writer.row(line)
    else:
        _write_table(writer, record)


def _lines(record: dict[str, Any]) -> Iterator[tuple[str, Any]]:
    """The record as pairs: a line for each state, "state:NAME" and its count, and one for each note."""
    for field, value in record.items():
        if field == "states":
            yield from ((f"state:{state}", count) for state, count in value.items())
        elif field == "notes":
            yield from (("note", note) for note in value)
        else:
            yield field, value


def _write_table(writer: Writer, record: dict[str, Any]) -> None:
    known = {field: record[field] for field in FIELDS if record.get(field) is not None}
    writer.fields({FIELDS[field]: _shown(field, value) for field, value in known.items()})
    rest: list[str] = []
    if "states" in record:
        top = list(record["states"].items())[:SHOWN]
        present = record["rows"] - record["missing"]
        writer.table(
            [("state", "<"), ("rows", ">"), ("share", ">")],
            [(state, str(count), percent(count / present)) for state, count in top],
        )
        hidden = record["alphabet"] - len(top)
        rest += [f"and {hidden} rarer states"] if hidden > 0 else []
    writer.lines([*rest, *record["notes"]])


def _shown(field: str, value: Any) -> str:
    if field in NUMBERS:
        return f"{value:.12g}"
    return bits(value) if isinstance(value, float) else str(value)
