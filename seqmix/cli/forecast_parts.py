"""What forecasts of all kinds print alike: joint continuations and the weights of the models."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Any

from seqmix.cli.writer import Writer, percent


def write_paths(
    writer: Writer,
    name: str,
    paths: Sequence[Sequence[Any]],
    times: Sequence[str | None],
    show: Callable[[Any], str],
    side: str,
) -> None:
    """Continuations, (paths, steps), of what `name` says; a table shows each by `show`, at the `side` of its column."""
    if writer.format == "jsonl":
        for number, path in enumerate(paths, 1):
            writer.record({"path": number, f"{name}s": path})
    elif writer.format == "csv":
        writer.row(("path", "step", "time", name))
        for number, path in enumerate(paths, 1):
            for step, (time, value) in enumerate(zip(times, path, strict=True), 1):
                writer.row((number, step, time, value))
    else:
        writer.table(
            [("path", ">"), *((f"step {step}", side) for step in range(1, len(times) + 1))],
            [(str(number), *map(show, path)) for number, path in enumerate(paths, 1)],
        )


def write_weights(writer: Writer, weights: dict[str, float], settings: dict[str, str]) -> None:
    """The block of a table that says how much of the answer comes from each model."""
    writer.table(
        [("model", "<"), ("leading setting", "<"), ("weight", ">")],
        [(name, settings[name], percent(weight)) for name, weight in weights.items()],
    )
