"""`seqmix weights`: how the weights of the models moved along a log."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import click

from seqmix.cli.number_options import for_numbers, reads_numbers
from seqmix.cli.options import Answer, Helpful, Source, goes_on, option, reads_log, takes_models, writes_answer
from seqmix.cli.writer import Writer, bits, percent

if TYPE_CHECKING:
    from seqmix.learned import Learned
    from seqmix.weighing import Weights


@click.command("weights", cls=Helpful, example="seqmix weights line.csv --column state --every 1000")
@option("--every", type=click.IntRange(min=1), metavar="N", help="Rows between two lines of the history.")
@reads_numbers
@takes_models
@goes_on
@reads_log
@writes_answer
def command(
    source: Source, answer: Answer, library: dict[str, Any], every: int | None, period: tuple[int, ...],
    resolution: float | None, known: Learned | None,
) -> None:  # fmt: skip
    """Show which models explain LOG, and how their weights moved.

    A weight is the posterior probability of a model after the rows read so far. CSV and JSON Lines carry the
    history; the table shows the final weights with the leading setting and the loss of each model. With --state LOG
    holds the rows after those of the state, or is left out.
    """
    import seqmix

    with answer.open() as writer, source.open(known=known, needed=False) as log:
        numbers = for_numbers(log, period=period, resolution=resolution)
        _write(writer, seqmix.weights(log, every=every, state=known, **library, **numbers))


def _write(writer: Writer, weights: Weights) -> None:
    if writer.format == "jsonl":
        for row, time, by_model in weights.history:
            writer.record({"row": row, "time": time, "weights": by_model})
    elif writer.format == "csv":
        writer.row(("row", "time", "model", "weight"))
        for row, time, by_model in weights.history:
            for model, weight in by_model.items():
                writer.row((row, time, model, weight))
    else:
        writer.table(
            [("model", "<"), ("leading setting", "<"), ("weight", ">"), ("bits", ">"), ("bits a row", ">"),
             ("prior cost, bits", ">"), ("rows awake", ">")],
            [
                (part["name"], part["setting"], percent(part["weight"]), bits(part["bits"]),
                 bits(part["bits_per_row"]), bits(part["prior_cost_bits"]), str(part["rows_awake"]))
                for part in weights.models
            ],
        )  # fmt: skip
