"""`seqmix forecast`: what comes next, with probabilities and the weight of every model."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import click

from seqmix.cli.number_options import Levels, for_numbers, reads_numbers, threshold
from seqmix.cli.options import Answer, Helpful, Source, goes_on, option, reads_log, takes_models, writes_answer

if TYPE_CHECKING:
    from seqmix.learned import Learned


@click.command("forecast", cls=Helpful, example="seqmix forecast line.csv --column state --steps 5")
@option("--steps", type=click.IntRange(min=1), metavar="N", default=5, help="Steps ahead, in rows.")
@option("--paths", type=click.IntRange(min=1), metavar="N",
        help="Print N joint continuations instead of probabilities.")  # fmt: skip
@option("--seed", type=click.IntRange(min=0), metavar="N", default=0, help="Seed of what is drawn.")
@option("--quantiles", type=Levels(), metavar="LEVEL,LEVEL",
        help="Numbers: levels of the quantiles.  [default: 0.05,0.1,0.25,0.5,0.75,0.9,0.95]")  # fmt: skip
@threshold("--above", help="Numbers: add the probability of more than X, in the unit of the log; may be repeated.")
@threshold("--below", help="Numbers: add the probability of less than X; may be repeated.")
@reads_numbers
@takes_models
@goes_on
@reads_log
@writes_answer
def command(
    source: Source, answer: Answer, library: dict[str, Any], steps: int, paths: int | None, seed: int,
    quantiles: tuple[float, ...] | None, above: tuple[float, ...], below: tuple[float, ...],
    period: tuple[int, ...], resolution: float | None, known: Learned | None,
) -> None:  # fmt: skip
    """Say what comes next after the last row of LOG.

    Each step gets the probability of every state, and of a state never seen before; in a log of numbers, its
    quantiles. Steps far ahead rest on the bulk of the continuations, no longer on all of them. The weights tell
    how much of the answer comes from each model. The same log gives the same answer.

    A threshold X gets the probability that a step passes it, and that at least one step does.

    With --state LOG holds the rows after those of the state, or is left out.
    """
    if paths and (quantiles or above or below):
        raise click.UsageError("--paths excludes --quantiles, --above and --below", click.get_current_context())
    import seqmix
    from seqmix.cli import forecast_numbers, forecast_states

    with answer.open() as writer, source.open(known=known, needed=False) as log:
        numbers = for_numbers(log, quantiles=quantiles, above=above, below=below, period=period, resolution=resolution)
        forecast = seqmix.forecast(log, steps=steps, seed=seed, paths=paths, state=known, **library, **numbers)
        if isinstance(forecast, seqmix.Forecast):
            forecast_states.write(writer, forecast)
        else:
            forecast_numbers.write(writer, forecast)
