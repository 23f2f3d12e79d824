"""`seqmix score`: what the probabilities were worth on rows that were not seen before."""

from __future__ import annotations

from contextlib import ExitStack
from typing import TYPE_CHECKING, Any

import click

from seqmix.cli.number_options import for_numbers, reads_numbers
from seqmix.cli.options import Answer, Helpful, Source, goes_on, option, reads_log, takes_models, writes_answer

if TYPE_CHECKING:
    from seqmix.learned import Learned


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
@option("--steps", type=click.IntRange(min=1), metavar="N",
        help="Numbers: score forecasts of 1 to N steps ahead, too.")  # fmt: skip
@reads_numbers
@takes_models
@goes_on
@reads_log
@writes_answer
def command(
    source: Source, answer: Answer, library: dict[str, Any], last: str | None, start: str | None,
    against: str | None, frozen: bool, per_row: bool, steps: int | None,
    period: tuple[int, ...], resolution: float | None, known: Learned | None,
) -> None:  # fmt: skip
    """Measure what the probabilities were worth on held-out rows.

    Each row is predicted before it is learned; its loss is minus log2 of the probability it was given, in
    bits. The loss of the mixture stands beside that of every model and of simple baselines, and its regret
    beside the bound. In a log of numbers the errors, of the median, and the CRPS are in the unit of the log.
    With --state LOG holds the rows after those of the state; all of them are scored unless said otherwise, and
    the baselines know LOG only.
    """
    context = click.get_current_context()
    if sum(choice is not None for choice in (last, start, against)) > 1:
        raise click.UsageError("--last, --from and --against exclude each other", context)
    if per_row and steps:
        raise click.UsageError("--per-row excludes --steps", context)
    import seqmix
    from seqmix.cli import score_rows, score_sums

    with ExitStack() as stack:
        writer = stack.enter_context(answer.open())
        log = stack.enter_context(source.open(known=known))
        numbers = for_numbers(log, steps=steps, period=period, resolution=resolution)
        other = stack.enter_context(source.open_another(against, log)) if against else None
        table: list[score_rows.Cells] = []
        score = seqmix.score(
            log,
            last=int(last) if last and last.isdecimal() else last,
            start=start,
            against=other,
            frozen=frozen,
            state=known,
            **library,
            on_row=score_rows.row_writer(writer, other or log, table) if per_row else None,
            **numbers,
        )
        if not per_row:
            score_sums.write(writer, score.record())
        elif writer.format == "table":
            score_rows.write_rows(writer, table, log.kind == "numbers")
