"""`seqmix shifts`: where a log changed its ways."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import click

from seqmix.cli.number_options import Finite, for_numbers, reads_numbers
from seqmix.cli.options import Answer, Helpful, Source, option, reads_log, takes_models, writes_answer
from seqmix.cli.writer import Writer, bits

if TYPE_CHECKING:
    from seqmix.shifting import Shifts

COLUMNS = (
    "row", "time", "known_row", "known_time", "evidence_bits", "odds", "leading_before", "leading_after",
    "level_before", "level_after",
)  # fmt: skip


@click.command("shifts", cls=Helpful, example="seqmix shifts tank.csv --odds 1000")
@option("--odds", type=Finite(), default=100.0, metavar="X",
        help="Odds of a shift, to none, at which it is declared; above 1.")  # fmt: skip
@reads_numbers
@takes_models
@reads_log
@writes_answer
def command(
    source: Source, answer: Answer, library: dict[str, Any], odds: float, period: tuple[int, ...],
    resolution: float | None,
) -> None:  # fmt: skip
    """Show at which rows LOG changed its ways.

    Explanations that keep their ways are begun afresh at every row; where these beat the ones that go on, the
    log has shifted. For each shift: its first row, the row at which it could be known, the evidence in bits,
    and the leading model of the mixture before and after.
    """
    if odds <= 1:
        raise click.BadParameter(f"{odds:g} is not above 1", click.get_current_context(), param_hint="'--odds'")
    import seqmix

    with answer.open() as writer, source.open() as log:
        numbers = for_numbers(log, period=period, resolution=resolution)
        _write(writer, seqmix.shifts(log, odds, **library, **numbers), odds)


def _write(writer: Writer, found: Shifts, odds: float) -> None:
    if writer.format == "jsonl":
        for record in found.records():
            writer.record(record)
    elif writer.format == "csv":
        writer.row(COLUMNS)
        for record in found.records():
            writer.row(record[column] for column in COLUMNS)
    else:
        if found.shifts:
            writer.table(
                [("row", ">"), ("time", "<"), ("known at row", ">"), ("time", "<"), ("evidence, bits", ">"),
                 ("led before", "<"), ("leads after", "<"), ("level before", ">"), ("after", ">")],
                [
                    (str(shift.row), shift.time or "", str(shift.known_row), shift.known_time or "",
                     bits(shift.evidence_bits), shift.leading_before, shift.leading_after,
                     _level(shift.level_before), _level(shift.level_after))
                    for shift in found.shifts
                ],
            )  # fmt: skip
        count = f"{len(found.shifts)} shift{'s' * (len(found.shifts) > 1)}" if found.shifts else "no shift"
        writer.lines([f"{count} in {found.rows} rows at odds of {odds:g}; odds of a further one now {found.odds:.3g}"])


def _level(level: float | None) -> str:
    return "" if level is None else f"{level:.4g}"
