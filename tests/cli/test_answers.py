"""What each command prints in each format, and how options, environment and input reach it."""

from __future__ import annotations

import csv
import io
import json
import os
import re
import stat
from itertools import groupby

import pytest
from running import READERS, Ended

import seqmix

PRINTERS = [*READERS, "models"]

HEADERS = {
    "forecast": ["step", "time", "state", "probability"],
    "score": [
        "section",
        "name",
        "bits",
        "bits_per_row",
        "prior_cost_bits",
        "weight_before",
        "weight_after",
        "rows_awake",
    ],
    "weights": ["row", "time", "model", "weight"],
    "describe": ["field", "value"],
    "models": ["name", "kinds", "prior_cost_bits", "summary", "source", "package", "version"],
}

KEYS = {
    "forecast": ["step", "time", "probabilities", "unseen", "top", "entropy_bits", "weights"],
    "score": ["rows", "bits", "bits_per_row", "accuracy", "brier", "law_rows", "best_model", "regret_bits",
              "bound_bits", "models", "baselines"],
    "weights": ["row", "time", "weights"],
    "describe": ["name", "kind", "format", "compression", "column", "rows", "missing", "states", "alphabet",
                 "first_time", "last_time", "cadence_seconds", "gaps", "filled", "entropy_bits", "notes"],
    "models": ["name", "kinds", "prior_cost_bits", "summary", "source", "package", "version"],
}  # fmt: skip


def table_of(text: str) -> list[dict[str, str]]:
    return list(csv.DictReader(io.StringIO(text)))


def on(name: str, *places: object) -> list[object]:
    """The arguments that run the command `name` on a log, where it reads one."""
    return [name] if name == "models" else [name, "--quiet", *places]


@pytest.mark.parametrize("name", HEADERS)  # shifts, surprise: this log has none, see the tests of both
def test_csv_has_its_header_and_jsonl_its_keys(run, line, name):
    ended = run(*on(name, line))
    assert (ended.code, ended.err) == (0, "")
    header, *rows = csv.reader(io.StringIO(ended.out))
    assert header == HEADERS[name]
    assert rows
    assert {len(row) for row in rows} == {len(header)}
    assert ended == run(*on(name, line), "--format", "csv")

    ended = run(*on(name, line), "--format=jsonl")
    assert (ended.code, ended.err) == (0, "")
    records = [json.loads(text) for text in ended.out.splitlines()]
    assert records
    assert all(list(record) == KEYS[name] for record in records)


@pytest.mark.parametrize("name", PRINTERS)
def test_a_table_is_aligned_text(run, line, name):
    ended = run(*on(name, line), "--format", "table")
    assert (ended.code, ended.err) == (0, "")
    assert all(text.isprintable() and text == text.rstrip() for text in ended.out.split("\n"))
    assert "\n\n\n" not in ended.out
    assert ended.out.strip("\n") + "\n" == ended.out


@pytest.mark.parametrize("name", PRINTERS)
@pytest.mark.parametrize("format", ["table", "csv", "jsonl"])
def test_output_is_what_stdout_gets(run, line, tmp_path, name, format):
    out = run(*on(name, line), "--format", format).out
    place = tmp_path / "answer"
    assert run(*on(name, line), "--format", format, "-o", place) == Ended(0, "", "")
    assert place.read_bytes() == out.encode()
    assert run(*on(name, line), "--format", format, "-o", "-") == Ended(0, out, "")


def test_forecast_masses_add_to_one(run, line):
    rows = table_of(run("forecast", line, "--steps", "3").out)
    for _, group in groupby(rows, key=lambda row: row["step"]):
        states = list(group)
        assert sum(float(row["probability"]) for row in states) == pytest.approx(1, abs=1e-9)
        assert [row["state"] for row in states].count("") == 1
        assert states[-1]["state"] == ""
    assert [row["step"] for row in rows if row["state"] == ""] == ["1", "2", "3"]
    assert rows[0]["time"] == "2026-01-05T07:30:00"


def test_forecast_jsonl_and_csv_tell_the_same(run, line):
    rows = iter(table_of(run("forecast", line).out))
    texts = run("forecast", line, "--format", "jsonl").out.splitlines()
    assert len(texts) == 5
    for text in texts:
        record = json.loads(text)
        for state, probability in [*record["probabilities"].items(), ("", record["unseen"])]:
            row = next(rows)
            assert (row["state"], float(row["probability"])) == (state, probability)
        assert sum(record["weights"].values()) == pytest.approx(1, abs=1e-9)
    assert next(rows, None) is None


def test_forecast_table(run, line):
    head, *rest = run("forecast", line, "--steps", "2", "--format", "table").out.splitlines()
    assert head.split() == ["step", "time", "most", "likely", "then", "then", "others", "unseen"]
    assert rest[0].split()[:2] == ["1", "2026-01-05T07:30:00"]
    assert rest[2] == ""
    assert rest[3].split() == ["model", "leading", "setting", "weight"]
    assert rest[-1].startswith("rows read: 90")


def test_paths_are_joint_continuations(run, line):
    rows = table_of(run("forecast", line, "--paths", "3", "--steps", "4").out)
    assert [(row["path"], row["step"]) for row in rows] == [
        (str(path), str(step)) for path in (1, 2, 3) for step in (1, 2, 3, 4)
    ]
    records = [
        json.loads(text) for text in run("forecast", line, "--paths=3", "--steps=4", "--format=jsonl").out.splitlines()
    ]
    assert [record["path"] for record in records] == [1, 2, 3]
    assert [state for record in records for state in record["states"]] == [row["state"] for row in rows]
    table = run("forecast", line, "--paths", "3", "--steps", "4", "--format", "table").out.splitlines()
    assert table[0].split("  ")[0] == "path"
    assert len(table) == 4


def test_score_csv_sections(run, line):
    rows = table_of(run("score", line, "--last", "30").out)
    sections = [key for key, _ in groupby(row["section"] for row in rows)]
    assert sections == ["mixture", "model", "baseline"]
    record = json.loads(run("score", line, "--last=30", "--format=jsonl").out)
    assert record["rows"] == 30
    assert float(rows[0]["bits"]) == record["bits"]
    assert record["regret_bits"] <= record["bound_bits"]


@pytest.mark.parametrize("choice", [["--last", "all"], ["--from", "2026-01-05T07:00"], ["--last", "30"], []])
def test_per_row_adds_up_to_the_score(run, line, choice):
    rows = table_of(run("score", line, *choice, "--per-row").out)
    record = json.loads(run("score", line, *choice, "--format", "jsonl").out)
    assert len(rows) == record["rows"] == {"all": 90, "30": 30}.get((choice or [""])[-1], len(rows))
    assert sum(float(row["bits"]) for row in rows) == pytest.approx(record["bits"], abs=1e-6)
    assert rows[-1]["row"] == "90"
    assert rows[-1]["time"] == "2026-01-05T07:29:00"
    assert rows[-1]["value"] == "label"

    texts = run("score", line, *choice, "--per-row", "--format", "jsonl").out.splitlines()
    assert [json.loads(text)["bits"] for text in texts] == [float(row["bits"]) for row in rows]
    table = run("score", line, *choice, "--per-row", "--format", "table").out.splitlines()
    assert len(table) == len(rows) + 1


def test_a_missing_row_has_no_loss(run, tmp_path):
    log = tmp_path / "log.txt"
    log.write_text("fill\ncap\n\nfill\ncap\n")
    rows = table_of(run("score", log, "--last", "all", "--per-row").out)
    assert [row["value"] for row in rows] == ["fill", "cap", "", "fill", "cap"]
    assert [row["bits"] == "" for row in rows] == [False, False, True, False, False]


def test_score_against_another_log(run, line, tmp_path):
    other = tmp_path / "tuesday.csv"
    other.write_text(line.read_text().replace("2026-01-05", "2026-01-06").replace("cap", "wash"))
    rows = table_of(run("score", line, "--against", other, "--per-row").out)
    assert len(rows) == 90
    assert (rows[1]["time"], rows[1]["value"]) == ("2026-01-06T06:01:00", "wash")
    learning = json.loads(run("score", line, "--against", other, "--format", "jsonl").out)
    frozen = json.loads(run("score", line, "--against", other, "--frozen", "--format", "jsonl").out)
    assert learning["rows"] == frozen["rows"] == 90
    assert learning["bits"] < frozen["bits"]


def test_weights_add_to_one(run, line):
    rows = table_of(run("weights", line, "--every", "30").out)
    for _, group in groupby(rows, key=lambda row: row["row"]):
        assert sum(float(row["weight"]) for row in group) == pytest.approx(1, abs=1e-9)
    assert [key for key, _ in groupby(row["row"] for row in rows)] == ["30", "60", "90"]
    head = run("weights", line, "--format", "table").out.splitlines()[0]
    assert head.split("  ")[0] == "model"


def test_describe_counts_states(run, line):
    pairs = [(row["field"], row["value"]) for row in table_of(run("describe", line).out)]
    assert ("rows", "90") in pairs
    assert ("state:jam", "5") in pairs
    assert ("cadence_seconds", "60.0") in pairs
    table = run("describe", line, "--format", "table").out
    assert "cadence, seconds" in table


def test_describe_measures_numbers(run):
    log = b"20.5\n\n21.0\n" * 3 + b"22.5\ninf\n"
    record = json.loads(run("describe", "--format", "jsonl", stdin=log).out)
    assert list(record) == [
        "name", "kind", "format", "compression", "column", "rows", "missing", "minimum", "maximum", "mean", "median",
        "resolution", "distinct", "first_time", "last_time", "cadence_seconds", "gaps", "filled", "notes",
    ]  # fmt: skip
    assert (record["kind"], record["rows"], record["missing"]) == ("numbers", 11, 4)
    assert (record["minimum"], record["maximum"], record["mean"], record["median"]) == (20.5, 22.5, 21, 21)
    assert (record["resolution"], record["distinct"]) == (0.1, 3)
    assert record["notes"] == ["numbers that are not finite, taken as missing: 1"]
    table = run("describe", "--format", "table", stdin=log).out
    assert re.search("^mean +21$", table, re.M)
    assert "states" not in table


def test_describe_of_no_numbers_and_of_many(run):
    measures = ("minimum", "maximum", "mean", "median", "resolution", "distinct")
    record = json.loads(run("describe", "--as", "numbers", "--format", "jsonl", stdin=b"NA\n").out)
    assert [record[name] for name in measures] == [None, None, None, None, None, 0]
    log = "".join(f"{row % 1001}e300\n" for row in range(5000)).encode()
    record = json.loads(run("describe", "--format", "jsonl", stdin=log).out)
    assert [record[name] for name in measures[:2]] == [0, 1e303]
    assert record["mean"] == pytest.approx(499.502e300)
    assert record["distinct"] is None


def test_models_named_are_the_models_mixed(run, line):
    names = [row["name"] for row in table_of(run("models").out)]
    assert len(names) == len(set(names))
    record = json.loads(run("forecast", line, "--models", ",".join(names[:2]), "--steps", "1", "--format", "jsonl").out)
    assert set(record["weights"]) == set(names[:2])


def test_option_beats_command_variable_beats_common_variable_beats_default(run, line):
    def form(*arguments: str, **environment: str) -> str:
        first = run("forecast", line, *arguments, **environment).out.splitlines()[0]
        return {"step,": "csv", '{"ste': "jsonl", "step ": "table"}[first[:5]]

    assert form() == "csv"
    assert form(SEQMIX_FORMAT="jsonl") == "jsonl"
    assert form(SEQMIX_FORMAT="jsonl", SEQMIX_FORECAST_FORMAT="table") == "table"
    assert form("--format", "csv", SEQMIX_FORMAT="jsonl", SEQMIX_FORECAST_FORMAT="table") == "csv"


def test_options_of_one_command_come_from_its_variable(run, line):
    assert run("forecast", line, SEQMIX_FORECAST_STEPS="2") == run("forecast", line, "--steps", "2")
    assert run("forecast", line, SEQMIX_STEPS="2") == run("forecast", line)
    assert run("forecast", line, SEQMIX_AS="bytes") == run("forecast", line, "--as", "bytes")
    assert run("score", line, SEQMIX_SCORE_FROM="2026-01-05T07:00") == run("score", line, "--from", "2026-01-05T07:00")
    assert run("describe", line, SEQMIX_DESCRIBE_QUIET="1").err == ""


@pytest.mark.parametrize("name", READERS)
def test_file_dash_and_pipe_give_the_same(run, line, name):
    def shown(ended: Ended) -> tuple[int, str]:
        return ended.code, ended.out.replace(str(line), "<stdin>").replace(line.name, "<stdin>")

    rows = line.read_bytes()
    expected = shown(run(*on(name, line)))
    assert expected[0] == 0
    assert shown(run(name, "-", stdin=rows)) == shown(run(name, stdin=rows)) == expected


def test_a_file_named_like_an_option(run, line, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    line.rename("-x.csv")
    assert run("forecast", "--quiet", "--", "-x.csv").code == 0


def test_assumptions_are_told_unless_quiet(run, line):
    log = line.read_text().splitlines(keepends=True)
    line.write_text("".join(log[:40] + log[50:]))
    told = run("forecast", line)
    assert told.code == 0
    assert all(text.startswith("seqmix: ") for text in told.err.splitlines())
    assert "gap" in told.err
    assert run("forecast", line, "--quiet") == Ended(0, told.out, "")


def test_escapes_in_states_are_shown_in_tables_and_kept_in_csv(run, tmp_path):
    log = tmp_path / "log.txt"
    log.write_text("fill\n\x1b[31mjam\n" * 20)
    for name in READERS:
        table = run(name, log, "--format", "table")
        assert table.code == 0
        assert "\x1b" not in table.out + table.err
    assert "\\x1b[31mjam" in run("forecast", log, "--format", "table").out
    assert "\x1b[31mjam" in run("forecast", log, "--format", "csv").out


def test_a_file_of_its_own_is_readable_as_the_umask_says(run, line, tmp_path):
    before = os.umask(0o027)
    try:
        run("describe", line, "--quiet", "-o", tmp_path / "answer")
    finally:
        os.umask(before)
    assert stat.S_IMODE((tmp_path / "answer").stat().st_mode) == 0o640


def test_an_unexpected_error_is_one_line(run, line, monkeypatch):
    def broken(*_: object, **__: object) -> None:
        raise ZeroDivisionError("of a\nkind")

    monkeypatch.setattr(seqmix, "forecast", broken)
    report = "please report it (SEQMIX_DEBUG=1 shows where it happened)"
    said = f"seqmix: unexpected ZeroDivisionError: of a\\nkind; {report}\n"
    assert run("forecast", line) == Ended(1, "", said)
    ended = run("forecast", line, SEQMIX_DEBUG="1")
    assert ended.code == 1
    assert ended.err.startswith("Traceback (most recent call last):\n")
    assert ended.err.endswith(said)
