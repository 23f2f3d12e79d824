"""The screens of a score: the loss of the mixture, beside that of the models and of the baselines."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from seqmix.cli.writer import Writer, bits, percent

PARTS = ("name", "bits", "bits_per_row", "prior_cost_bits", "weight_before", "weight_after", "rows_awake")
ERRORS = ("mae", "rmse", "crps", "pinball")
COVERED = ("coverage_50", "coverage_80", "coverage_90")


def _digits(value: float) -> str:
    """A number in the unit of the log."""
    return f"{value:.6g}"


FIELDS: dict[str, tuple[str, Callable[[Any], str]]] = {
    "rows": ("rows scored", str),
    "bits": ("bits", bits),
    "bits_per_row": ("bits a row", bits),
    "accuracy": ("accuracy", percent),
    "brier": ("Brier score", bits),
    "mae": ("MAE", _digits),
    "rmse": ("RMSE", _digits),
    "crps": ("CRPS", _digits),
    "coverage_50": ("inside the central 50%", percent),
    "coverage_80": ("inside the central 80%", percent),
    "coverage_90": ("inside the central 90%", percent),
    "best_model": ("best model", str),
    "regret_bits": ("regret, bits", bits),
    "bound_bits": ("bound, bits", bits),
}


def write(writer: Writer, record: dict[str, Any]) -> None:
    """The record of a score of any kind of log."""
    if writer.format == "jsonl":
        writer.record(record)
    elif writer.format == "csv":
        _write_csv(writer, record)
    else:
        _write_table(writer, record)


def _write_csv(writer: Writer, record: dict[str, Any]) -> None:
    keys = (*PARTS, *ERRORS, *COVERED, "rows") if "mae" in record else PARTS
    sections = {
        "mixture": [{**record, "name": "mixture"}],
        "model": record["models"],
        "baseline": record["baselines"],
        "ahead": [{**step, "name": step["step"]} for step in record.get("ahead", ())],
    }
    writer.row(("section", *keys))
    for section, parts in sections.items():
        for part in map(_flat, parts):
            writer.row((section, *(part.get(key) for key in keys)))


def _flat(part: dict[str, Any]) -> dict[str, Any]:
    """The same with the shares inside the central ranges as fields of their own."""
    shares = part.get("coverage") or {}
    return {**part, **{f"coverage_{100 * float(central):.0f}": share for central, share in shares.items()}}


def _write_table(writer: Writer, record: dict[str, Any]) -> None:
    flat = _flat(record)
    known = {key: flat[key] for key in FIELDS if flat.get(key) is not None}
    writer.fields({FIELDS[key][0]: FIELDS[key][1](value) for key, value in known.items()})
    writer.table(
        [("model", "<"), ("bits", ">"), ("bits a row", ">"), ("prior cost, bits", ">"),
         ("weight before", ">"), ("after", ">"), ("rows awake", ">")],
        [
            (part["name"], bits(part["bits"]), bits(part["bits_per_row"]), bits(part["prior_cost_bits"]),
             percent(part["weight_before"]), percent(part["weight_after"]), str(part["rows_awake"]))
            for part in record["models"]
        ],
    )  # fmt: skip
    writer.table(
        [("baseline", "<"), ("bits", ">"), ("bits a row", ">")],
        [(part["name"], bits(part["bits"]), bits(part["bits_per_row"])) for part in record["baselines"]],
    )
    if record.get("ahead"):
        _write_ahead(writer, record["ahead"])
    if record["law_rows"] < record["rows"]:
        measures = "errors, CRPS and coverage" if "mae" in record else "accuracy and Brier score"
        writer.lines([f"{measures} rest on {record['law_rows']} of the rows"])


def _write_ahead(writer: Writer, ahead: list[dict[str, Any]]) -> None:
    shown = [key for key in FIELDS if key in (*ERRORS, *COVERED)]
    headings = [FIELDS[key][0].replace(" the central", "") for key in shown]
    rows = []
    for step in map(_flat, ahead):
        measures = ("" if step.get(key) is None else FIELDS[key][1](step[key]) for key in shown)
        rows.append((str(step["step"]), str(step["rows"]), *measures))
    writer.table([("steps ahead", ">"), ("rows", ">"), *((heading, ">") for heading in headings)], rows)
