"""The screens of a forecast of numbers."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from decimal import Decimal
from typing import TYPE_CHECKING

from seqmix.cli.forecast_parts import write_paths, write_weights
from seqmix.cli.writer import Writer, percent

if TYPE_CHECKING:
    from seqmix.number_forecasting import NumberForecast

RANGES = {"50%": ("0.25", "0.75"), "80%": ("0.1", "0.9")}  # central ranges of a table without --quantiles


def write(writer: Writer, forecast: NumberForecast) -> None:
    """The paths of a forecast if there are some, else its steps."""
    if forecast.drawn is not None:
        write_paths(writer, "value", forecast.drawn, forecast.times, shower(forecast.resolution), ">")
    elif writer.format == "jsonl":
        for record in forecast.records():
            writer.record(record)
    elif writer.format == "csv":
        _write_csv(writer, forecast)
    else:
        writer.table(*_table(forecast))
        writer.fields({
            f"{side} {number} at least once": percent(chance)
            for side, chances in (("above", forecast.ever_above), ("below", forecast.ever_below))
            for number, chance in chances.items()
        })  # fmt: skip
        write_weights(writer, forecast.weights, forecast.settings)
        writer.lines([f"rows read: {forecast.rows}"])


def _write_csv(writer: Writer, forecast: NumberForecast) -> None:
    first = forecast.steps[0]
    ever = {"ever_above": forecast.ever_above, "ever_below": forecast.ever_below}
    thresholds = {"above": first.above, "below": first.below, **ever}
    names = [f"{side}_{number}" for side, chances in thresholds.items() for number in chances]
    writer.row(("step", "time", "mean", *map(column_of, first.quantiles), *names))
    whole = [chance for chances in ever.values() for chance in chances.values()]
    for step in forecast.steps:
        passed = (*step.above.values(), *step.below.values())
        writer.row((step.step, step.time, step.mean, *step.quantiles.values(), *passed, *whole))


def _table(forecast: NumberForecast) -> tuple[list[tuple[str, str]], list[tuple[str, ...]]]:
    columns = list(_columns(forecast))
    return [(heading, side) for heading, side, _ in columns], list(zip(*(cells for *_, cells in columns), strict=True))


def _columns(forecast: NumberForecast) -> Iterator[tuple[str, str, list[str]]]:
    """Heading, alignment and cells of each column of the table."""
    from seqmix.number_forecasting import LEVELS

    steps, show = forecast.steps, shower(forecast.resolution)
    yield "step", ">", [str(step.step) for step in steps]
    if any(step.time for step in steps):
        yield "time", "<", [step.time or "" for step in steps]
    yield "median", ">", [show(step.median) for step in steps]
    if forecast.levels == LEVELS:
        for name, ends in RANGES.items():
            for heading, level in zip((f"{name} from", "to"), ends, strict=True):
                yield heading, ">", [show(step.quantiles[level]) for step in steps]
    else:
        for level in steps[0].quantiles:
            yield column_of(level), ">", [show(step.quantiles[level]) for step in steps]
    means = [step.mean for step in steps if step.mean is not None]
    if len(means) == len(steps):
        yield "mean", ">", [show(mean) for mean in means]
    for number in steps[0].above:
        yield f"above {number}", ">", [percent(step.above[number]) for step in steps]
    for number in steps[0].below:
        yield f"below {number}", ">", [percent(step.below[number]) for step in steps]


def column_of(level: str) -> str:
    """The name of the column of a quantile: p05, p50, p2.5."""
    return "p" + f"{float(level) * 100:.12g}".zfill(2)


def shower(resolution: float) -> Callable[[float], str]:
    """How a table shows the numbers of a log: with one decimal more than its resolution has.

    Very large numbers, and those of a very fine resolution, get six significant digits instead.
    """
    exponent = Decimal(repr(resolution)).normalize().as_tuple().exponent
    decimals = max(0, 1 - int(exponent))

    def show(number: float) -> str:
        if decimals > 12 or abs(number) >= 1e16:
            return f"{number:.6g}"
        return f"{round(number, decimals) + 0.0:.{decimals}f}"  # the sum makes -0.0 a 0.0

    return show
