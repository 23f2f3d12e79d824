"""`seqmix score`: what the probabilities were worth on rows that were not seen before."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from contextlib import ExitStack
from typing import TYPE_CHECKING, Any

import click

from seqmix.cli.options import Answer, Helpful, Source, option, reads_log, takes_models, writes_answer
from seqmix.cli.writer import Writer, bits, percent

if TYPE_CHECKING:
    import numpy as np

    from seqmix.series.log import Log
    from seqmix.series.rows import Rows

PARTS = ("name", "bits", "bits_per_row", "prior_cost_bits", "weight_before", "weight_after")
ROW = ("row", "time", "value", "bits")

Cells = tuple[int, str | None, str | None, float | None]


@click.command("score", cls=Helpful, example="seqmix score line.csv --column state --last 20%")
@option(
    "--last",
    metavar="N|N%|all",
    help="Score the last rows; all: every row, from a blank start.  [default: 20%]",
)
@option("--from", "start", metavar="TIME", help="Score the rows from TIME on, in ISO 8601.")
@option("--against", metavar="FILE", type=click.Path(), help="Score the rows of FILE, after all of LOG.")
@option("--frozen", is_flag=True, help="Learn nothing from the scored rows.")
@option("--per-row", is_flag=True, help="Print the loss of each scored row, in bits, instead of the sums.")
@takes_models
@reads_log
@writes_answer
def command(
    source: Source, answer: Answer, models: list[str] | None, last: str | None, start: str | None,
    against: str | None, frozen: bool, per_row: bool,
) -> None:  # fmt: skip
    """Measure what the probabilities were worth on held-out rows.

    Each row is predicted before it is learned; its loss is minus log2 of the probability it was given, in
    bits. The loss of the mixture stands beside that of every model and of simple baselines, and its regret
    beside the bound.
    """
    if sum(choice is not None for choice in (last, start, against)) > 1:
        raise click.UsageError("--last, --from and --against exclude each other", click.get_current_context())
    import seqmix

    with ExitStack() as stack:
        writer = stack.enter_context(answer.open())
        log = stack.enter_context(source.open())
        other = stack.enter_context(source.open_another(against, log)) if against else None
        table: list[Cells] = []
        score = seqmix.score(
            log,
            last=int(last) if last and last.isdecimal() else last or "20%",
            start=start,
            against=other,
            frozen=frozen,
            models=models,
            on_row=_row_writer(writer, other or log, table) if per_row else None,
        )
        if not per_row:
            _write(writer, score.record())
        elif writer.format == "table":
            _write_rows(writer, table)


def _row_writer(writer: Writer, log: Log, table: list[Cells]) -> Callable[[Rows, np.ndarray], None]:
    """Writes the rows of each chunk as it is scored; keeps them for a table, which must know its widths."""
    if writer.format == "csv":
        writer.row(ROW)

    def write(rows: Rows, losses: np.ndarray) -> None:
        for cells in _cells(log, rows, losses):
            if writer.format == "csv":
                writer.row(cells)
            elif writer.format == "jsonl":
                writer.record(dict(zip(ROW, cells, strict=True)))
            else:
                table.append(cells)

    return write


def _cells(log: Log, rows: Rows, losses: np.ndarray) -> Iterator[Cells]:
    """Row (from 1), time, value and loss; a missing row has neither value nor loss."""
    times = [None] * len(rows) if rows.times is None else map(log.clock.text, rows.times.tolist())
    labels = log.alphabet.labels
    for row, (time, code, loss) in enumerate(
        zip(times, rows.codes.tolist(), losses.tolist(), strict=True), rows.first + 1
    ):
        yield (row, time, None, None) if code < 0 else (row, time, labels[code], loss)


def _write_rows(writer: Writer, table: list[Cells]) -> None:
    timed = any(time for _, time, _, _ in table)
    writer.table(
        [("row", ">"), *([("time", "<")] if timed else []), ("value", "<"), ("bits", ">")],
        [
            (str(row), *([time or ""] if timed else []), value or "", "" if loss is None else bits(loss))
            for row, time, value, loss in table
        ],
    )


def _write(writer: Writer, record: dict[str, Any]) -> None:
    if writer.format == "jsonl":
        writer.record(record)
    elif writer.format == "csv":
        writer.row(("section", *PARTS))
        sections = (("mixture", [{**record, "name": "mixture"}]), ("model", record["models"]),
                    ("baseline", record["baselines"]))  # fmt: skip
        for section, parts in sections:
            for part in parts:
                writer.row((section, *(part.get(key) for key in PARTS)))
    else:
        _write_table(writer, record)


def _write_table(writer: Writer, record: dict[str, Any]) -> None:
    fields: list[tuple[str, Callable[[Any], str], Any]] = [
        ("rows scored", str, record["rows"]),
        ("bits", bits, record["bits"]),
        ("bits a row", bits, record["bits_per_row"]),
        ("accuracy", percent, record["accuracy"]),
        ("Brier score", bits, record["brier"]),
        ("best model", str, record["best_model"]),
        ("regret, bits", bits, record["regret_bits"]),
        ("bound, bits", bits, record["bound_bits"]),
    ]
    writer.fields({name: show(value) for name, show, value in fields if value is not None})
    writer.table(
        [("model", "<"), ("bits", ">"), ("bits a row", ">"), ("prior cost, bits", ">"),
         ("weight before", ">"), ("after", ">")],
        [
            (part["name"], bits(part["bits"]), bits(part["bits_per_row"]), bits(part["prior_cost_bits"]),
             percent(part["weight_before"]), percent(part["weight_after"]))
            for part in record["models"]
        ],
    )  # fmt: skip
    writer.table(
        [("baseline", "<"), ("bits", ">"), ("bits a row", ">")],
        [(part["name"], bits(part["bits"]), bits(part["bits_per_row"])) for part in record["baselines"]],
    )
    if record["law_rows"] < record["rows"]:
        writer.lines([f"accuracy and Brier score rest on {record['law_rows']} of the rows"])
