"""`seqmix learn`: keep what a log teaches in a state file, to go on from there."""

from __future__ import annotations

from collections.abc import Callable
from typing import TYPE_CHECKING, Any

import click

from seqmix.cli.number_options import for_numbers, reads_numbers
from seqmix.cli.options import Answer, Helpful, Source, option, reads_log, takes_models, writes_answer
from seqmix.cli.writer import Writer, bits, percent

if TYPE_CHECKING:
    from seqmix.learning import Lesson

FIELDS: dict[str, tuple[str, Callable[[Any], str]]] = {
    "learned": ("rows learned now", str), "rows": ("rows in all", str), "bits": ("bits", bits),
    "bits_per_row": ("bits a row", bits), "leading": ("leading model", str), "weight": ("its weight", percent),
}  # fmt: skip


@click.command("learn", cls=Helpful, example="seqmix learn monday.csv --column state --into line.state")
@option("--into", metavar="STATE", type=click.Path(), required=True, help="State file, a new one or one to go on from.")
@reads_numbers
@takes_models
@reads_log
@writes_answer
def command(
    source: Source, answer: Answer, library: dict[str, Any], into: str, period: tuple[int, ...],
    resolution: float | None,
) -> None:  # fmt: skip
    """Learn LOG, and keep what was learned in STATE.

    If STATE is there, LOG holds the rows after those learned before; a log learned in any number of pieces is
    learned as in one. The first piece settles the kind, the layout, the columns and the options on models and
    numbers. forecast, score and weights go on from STATE with --state. The file changes when all is learned,
    or not at all.
    """
    from seqmix.learning import held, learn_held

    with answer.open() as writer, held(into) as known, source.open(known=known) as log:
        numbers = for_numbers(log, period=period, resolution=resolution)
        _write(writer, learn_held(known, log, into, **library, **numbers))


def _write(writer: Writer, lesson: Lesson) -> None:
    record = lesson.record()
    if writer.format == "jsonl":
        writer.record(record)
    elif writer.format == "csv":
        writer.row(record)
        writer.row(record.values())
    else:
        writer.fields({name: show(record[key]) for key, (name, show) in FIELDS.items()})
