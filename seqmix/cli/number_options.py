"""Options that only logs of numbers have."""

from __future__ import annotations

import functools
from collections.abc import Callable
from math import isfinite
from typing import TYPE_CHECKING, Any

import click

from seqmix.cli.options import option
from seqmix.errors import OptionError, visible

if TYPE_CHECKING:
    from seqmix.series.log import Log


class Finite(click.types.FloatParamType):
    """A number that is not infinite."""

    def convert(self, value: Any, param: click.Parameter | None, ctx: click.Context | None) -> float:
        number: float = super().convert(value, param, ctx)
        if not isfinite(number):
            self.fail(f"'{value}' is not a finite number", param, ctx)
        return number


class Levels(click.ParamType):
    """Levels of quantiles with commas between them."""

    name = "levels"

    def convert(self, value: Any, param: click.Parameter | None, ctx: click.Context | None) -> tuple[float, ...]:
        if isinstance(value, tuple):
            return value
        levels: list[float] = []
        for text in value.split(","):
            level = _number(text)
            if level is None or not 0 < level < 1:
                self.fail(f"'{text}' is not a number between 0 and 1; levels look like 0.1,0.5,0.9", param, ctx)
            if level in levels:
                self.fail(f"'{text}' is there twice", param, ctx)
            levels.append(level)
        return tuple(levels)


def _number(text: str) -> float | None:
    try:
        return float(text)
    except ValueError:
        return None


def reads_numbers(command: Callable[..., Any]) -> Callable[..., Any]:
    """Adds --period and --resolution; the command gets a tuple, and a number or None."""
    command = option(
        "--resolution", type=float, metavar="R",
        help="Numbers: the step they are written in, in the unit of the log.  [default: found in the log]",
    )(command)  # fmt: skip
    return option(
        "--period", type=click.IntRange(2, 100_000), metavar="N", multiple=True,
        help="Numbers: rows per repeat; may be repeated.  [default: found in the log]",
    )(command)  # fmt: skip


threshold = functools.partial(option, type=Finite(), metavar="X", multiple=True)


def for_numbers(log: Log, **options: Any) -> dict[str, Any]:
    """Those of `options` that were given. Raises OptionError if some were, and `log` is not one of numbers."""
    given = {name: value for name, value in options.items() if value not in (None, ())}
    if given and log.kind != "numbers":
        raise OptionError(
            f"--{next(iter(given))} is for a log of numbers, and {visible(log.name)} is read as {log.kind}; "
            "--as numbers reads it as numbers"
        )
    return given
