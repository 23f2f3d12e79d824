"""`seqmix models`: the library of models."""

from __future__ import annotations

import click

from seqmix.cli.options import Answer, Helpful, writes_answer
from seqmix.cli.writer import bits

COLUMNS = ("name", "kinds", "prior_cost_bits", "summary", "source", "package", "version")


@click.command("models", cls=Helpful, example="seqmix models")
@writes_answer
def command(answer: Answer) -> None:
    """List the models: kinds of log, prior cost, summary and paper.

    A prior cost is the number of bits needed to say which model is meant; the first weight of a model is 2 to
    the minus that. Use the names with --models. Models of other packages come last; they are used where they are
    named, as in --models default,NAME.
    """
    from seqmix import plugins
    from seqmix.models.registry import entries

    library = [*entries(), *plugins.every()]
    with answer.open() as writer:
        if writer.format == "jsonl":
            for entry in library:
                writer.record({
                    "name": entry.name, "kinds": list(entry.kinds), "prior_cost_bits": entry.prior_cost_bits,
                    "summary": entry.summary, "source": entry.source, "package": entry.package,
                    "version": entry.version,
                })  # fmt: skip
            return
        rows = [
            (entry.name, " ".join(entry.kinds), entry.prior_cost_bits, entry.summary, entry.source,
             entry.package, entry.version)
            for entry in library
        ]  # fmt: skip
        if writer.format == "csv":
            writer.row(COLUMNS)
            for row in rows:
                writer.row(row)
        else:
            writer.table(
                [("model", "<"), ("kinds", "<"), ("prior cost, bits", ">"), ("package", "<"), ("what it does", "<")],
                [
                    (name, kinds, bits(cost), f"{package} {version}", summary)
                    for name, kinds, cost, summary, _, package, version in rows
                ],
            )
            writer.lines(f"{name}: {source}" for name, _, _, _, source, _, _ in rows)
