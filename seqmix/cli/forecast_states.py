"""The screens of a forecast of states or bytes."""

from __future__ import annotations

from typing import TYPE_CHECKING

from seqmix.cli.forecast_parts import write_paths, write_weights
from seqmix.cli.writer import Writer, percent

if TYPE_CHECKING:
    from seqmix.forecasting import Forecast

PLACES = ("most likely", "then", "then")  # the states of a step that the table names


def write(writer: Writer, forecast: Forecast) -> None:
    """The paths of a forecast if there are some, else its steps."""
    if forecast.paths is not None:
        write_paths(writer, "state", forecast.paths, [step.time for step in forecast.steps], str, "<")
    elif writer.format == "jsonl":
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
    write_weights(writer, forecast.weights, forecast.settings)
    last = len(forecast.steps)
    law = "" if forecast.exact >= last else f"; after step {forecast.exact} the bulk of the continuations"
    writer.lines([f"rows read: {forecast.rows}{law}"])
