"""`seqmix alike`: how many bits each log saves when another one is known first."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from contextlib import ExitStack
from dataclasses import replace
from typing import TYPE_CHECKING, Any

import click

from seqmix.cli.notes import Progress, say
from seqmix.cli.options import Answer, Helpful, Source, option, reads_logs, takes_models, writes_answer
from seqmix.cli.writer import Writer, bits, percent
from seqmix.errors import visible

if TYPE_CHECKING:
    from seqmix.likeness import Likeness
    from seqmix.series.log import Log

COLUMNS = ("log", "known_first", "bits_alone", "bits_after", "saved_bits", "saved_share", "distance")


@click.command("alike", cls=Helpful, example="seqmix alike run-1.csv run-2.csv run-3.csv --to today.csv")
@option("--to", metavar="FILE", type=click.Path(allow_dash=True),
        help="Answer only which LOG the log FILE is like; a LOG of that very name is left out.")  # fmt: skip
@option("--matrix", is_flag=True, help="Print the saved shares alone: a line a log, a column for each known first.")
@takes_models
@reads_logs
@writes_answer
def command(
    source: Source, answer: Answer, library: dict[str, Any], logs: tuple[str, ...], to: str | None, matrix: bool
) -> None:
    """Show how many bits each log saves if another is known first.

    The models read one log, then go on with the other; what that one costs less than from a blank start is
    saved. For each log the others follow, nearest first: that which saves the largest share of its bits. A
    negative share means that it misleads. The distance is what compressors say of the pair: about 0 if they are
    alike, about 1 if not at all. All logs are of one kind, and read in the same way.
    """
    context = click.get_current_context()
    others = [log for log in logs if log != to]
    if len(others) < (2 if to is None else 1):
        raise click.UsageError("no two logs to hold against each other", context)
    if [*others, to].count("-") > 1:
        raise click.UsageError("standard input can be read only once", context)
    import seqmix

    notes: dict[str, list[str]] = {}
    progress = Progress()
    with answer.open() as writer, ExitStack() as stack:
        target = None if to is None else stack.enter_context(replace(source, path=to, quiet=True).open())
        try:
            likeness = seqmix.alike(
                _opened(source, others, notes),
                to=target,
                watch=progress.count if source.watched else None,
                **library,
            )
        finally:
            progress.erase()
        (_write_matrix if matrix else _write)(writer, likeness)
    if target is not None:
        _remember(target, notes)
    if not source.quiet:
        for note, names in notes.items():
            more = f" and {len(names) - 1} more" if len(names) > 1 else ""
            say(f"{names[0]}{more}: {note}")


def _opened(source: Source, paths: Sequence[str], notes: dict[str, list[str]]) -> Iterator[Log]:
    """One log after the other; adds to `notes` what was assumed, and of which logs."""
    for path in paths:
        with replace(source, path=path).open(notes=False) as log:
            yield log
        _remember(log, notes)


def _remember(log: Log, notes: dict[str, list[str]]) -> None:
    for note in log.notes:
        notes.setdefault(note, []).append(log.name)


def _write(writer: Writer, likeness: Likeness) -> None:
    if writer.format == "jsonl":
        for record in likeness.records():
            writer.record(record)
    elif writer.format == "csv":
        writer.row(COLUMNS)
        for record in likeness.records():
            writer.row(record[column] for column in COLUMNS)
    else:
        writer.table(
            [("log", "<"), ("known first", "<"), ("bits alone", ">"), ("bits after", ">"), ("saved bits", ">"),
             ("saved share", ">"), ("distance", ">")],
            [
                (pair.log, pair.known_first, bits(pair.bits_alone), bits(pair.bits_after), bits(pair.saved_bits),
                 _share(pair.saved_share), bits(pair.distance))
                for pair in likeness.pairs
            ],
        )  # fmt: skip


def _write_matrix(writer: Writer, likeness: Likeness) -> None:
    shares: dict[str, dict[str, float | None]] = {}
    for pair in likeness.pairs:
        shares.setdefault(pair.log, {})[pair.known_first] = pair.saved_share
    if writer.format == "jsonl":
        for log, by_known in shares.items():
            writer.record({"log": log, "saved_share": by_known})
        return
    known = [name for name in likeness.names if any(name in by_known for by_known in shares.values())]
    if writer.format == "csv":
        writer.row(("log", *known))
        for log, by_known in shares.items():
            writer.row((log, *map(by_known.get, known)))
    else:
        writer.table(
            [("log", "<"), *((visible(name), ">") for name in known)],
            [
                (log, *("" if name == log else _share(by_known[name]) for name in known))
                for log, by_known in shares.items()
            ],
        )


def _share(share: float | None) -> str:
    return "" if share is None else percent(share)
