"""The loss of each scored row, written while it is scored."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from typing import TYPE_CHECKING

from seqmix.cli.writer import Writer, bits

if TYPE_CHECKING:
    import numpy as np

    from seqmix.series.log import Log
    from seqmix.series.rows import Rows

ROW = ("row", "time", "value", "bits")

Cells = tuple[int, str | None, str | float | None, float | None]


def row_writer(writer: Writer, log: Log, table: list[Cells]) -> Callable[[Rows, np.ndarray], None]:
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
    there = (rows.codes >= 0).tolist()
    values = rows.codes.tolist() if rows.values is None else rows.values.tolist()
    for row, (time, known, value, loss) in enumerate(
        zip(times, there, values, losses.tolist(), strict=True), rows.first + 1
    ):
        if known:
            yield row, time, value if isinstance(value, float) else labels[value], loss
        else:
            yield row, time, None, None


def write_rows(writer: Writer, table: list[Cells], numbers: bool) -> None:
    """The rows kept for a table."""
    timed = any(time for _, time, _, _ in table)
    writer.table(
        [("row", ">"), *([("time", "<")] if timed else []), ("value", ">" if numbers else "<"), ("bits", ">")],
        [
            (str(row), *([time or ""] if timed else []), _shown(value), "" if loss is None else bits(loss))
            for row, time, value, loss in table
        ],
    )


def _shown(value: str | float | None) -> str:
    return f"{value:.12g}" if isinstance(value, float) else value or ""
