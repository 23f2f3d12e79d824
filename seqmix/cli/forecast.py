"""`seqmix forecast`: what comes next, with probabilities and the weight of every model."""

from __future__ import annotations

from typing import TYPE_CHECKING

import click

from seqmix.cli.options import Answer, Helpful, Source, option, reads_log, takes_models, writes_answer
from seqmix.cli.writer import Writer, percent

if TYPE_CHECKING:
    from seqmix.forecasting import Forecast

PLACES = ("most likely", "then", "then")  # the states of a step that the table names


@click.command("forecast", cls=Helpful, example="seqmix forecast line.csv --column state --steps 5")
@option("--steps", type=click.IntRange(min=1), metavar="N", default=5, help="Steps ahead, in rows.")
@option("--paths", type=click.IntRange(min=1), metavar="N",
        help="Print N joint continuations instead of probabilities.")  # fmt: skip
@option("--seed", type=click.IntRange(min=0), metavar="N", default=0, help="Seed of the paths.")
@takes_models
@reads_log
@writes_answer
def command(source: Source, answer: Answer, models: list[str] | None, steps: int, paths: int | None, seed: int) -> None:
    """Say what comes next after the last row of LOG.

    Each step gets the probability of every state, and of a state never seen before. Steps far ahead rest on the
    bulk of the continuations, no longer on all of them. The weights tell how much of the answer comes from each
    model. The same log gives the same answer.
    """
    import seqmix

    with answer.open() as writer, source.open() as log:
        forecast = seqmix.forecast(log, steps=steps, models=models, seed=seed, paths=paths)
        (_write_steps if forecast.paths is None else _write_paths)(writer, forecast)


def _write_steps(writer: Writer, forecast: Forecast) -> None:
    if writer.format == "jsonl":
        for record in forecast.records():
            writer.record(record)
    elif writer.format == "csv":
        writer.row(("step", "time", "state", "probability"))
        for step in forecast.steps:
            for state, probability in step.probabilities.items():
                writer.row((step.step, step.time, state, probability))
            writer.row((step.step, step.time, None, step.unseen))  # no state can have the empty name
    else:
        _write_table(writer, forecast)


def _write_table(writer: Writer, forecast: Forecast) -> None:
    timed = any(step.time for step in forecast.steps)
    shown = min(len(PLACES), len(forecast.steps[0].probabilities))
    places = [column for place in PLACES[:shown] for column in ((place, "<"), ("", ">"))]
    rows = []
    for step in forecast.steps:
        best = list(step.probabilities.items())[:shown]
        rest = sum(list(step.probabilities.values())[shown:])
        rows.append([
            str(step.step), *([step.time or ""] if timed else []),
            *(cell for state, probability in best for cell in (state, percent(probability))),
            percent(rest), percent(step.unseen),
        ])  # fmt: skip
    writer.table(
        [("step", ">"), *([("time", "<")] if timed else []), *places,
         ("others", ">"), ("unseen", ">")],
        rows,
    )  # fmt: skip
    writer.table(
        [("model", "<"), ("leading setting", "<"), ("weight", ">")],
        [(name, forecast.settings[name], percent(weight)) for name, weight in forecast.weights.items()],
    )
    last = len(forecast.steps)
    law = "" if forecast.exact >= last else f"; after step {forecast.exact} the bulk of the continuations"
    writer.lines([f"rows read: {forecast.rows}{law}"])


def _write_paths(writer: Writer, forecast: Forecast) -> None:
    paths = enumerate(forecast.paths or [], 1)
    if writer.format == "jsonl":
        for number, states in paths:
            writer.record({"path": number, "states": states})
    elif writer.format == "csv":
        times = [step.time for step in forecast.steps]
        writer.row(("path", "step", "time", "state"))
        for number, states in paths:
            for step, (time, state) in enumerate(zip(times, states, strict=True), 1):
                writer.row((number, step, time, state))
    else:
        writer.table(
            [("path", ">"), *((f"step {step}", "<") for step in range(1, len(forecast.steps) + 1))],
            [(str(number), *states) for number, states in paths],
        )
