"""Logs of numbers: what each command prints in each format, and the options that only they have."""

from __future__ import annotations

import csv
import io
import json
import math
import re
from itertools import groupby
from pathlib import Path

import pytest
from running import Ended

from seqmix.cli.forecast_numbers import column_of, shower

LEVELS = ["0.05", "0.1", "0.25", "0.5", "0.75", "0.9", "0.95"]
ERRORS = ["mae", "rmse", "crps", "pinball"]
COVERED = ["coverage_50", "coverage_80", "coverage_90"]
PARTS = ["section", "name", "bits", "bits_per_row", "prior_cost_bits", "weight_before", "weight_after", "rows_awake"]
ASKING = [["forecast", "--steps", "3"], ["score", "--last", "4"], ["weights"]]


@pytest.fixture(autouse=True)
def one_model(monkeypatch: pytest.MonkeyPatch) -> None:
    """One model tells as much about the command line as all of them, and sooner."""
    monkeypatch.setenv("SEQMIX_MODELS", "trend")


@pytest.fixture
def tank(tmp_path: Path) -> Path:
    """Four days of the chilled tank, a row an hour: time and temperature in tenths of a degree."""
    lines = ["time,level\n"]
    for hour in range(96):
        level = 4.0 + 0.8 * math.sin(hour * math.pi / 12) + (hour * 7 % 5 - 2) / 10
        lines.append(f"2026-01-{5 + hour // 24:02d}T{hour % 24:02d}:00:00,{level:.1f}\n")
    path = tmp_path / "tank.csv"
    path.write_text("".join(lines))
    return path


def table_of(ended: Ended) -> list[dict[str, str]]:
    assert ended.code == 0, ended.err
    return list(csv.DictReader(io.StringIO(ended.out)))


def records_of(ended: Ended) -> list[dict]:
    assert ended.code == 0, ended.err
    return [json.loads(text, parse_constant=pytest.fail) for text in ended.out.splitlines()]


def words_of(ended: Ended) -> list[list[str]]:
    """A table as cells, cut where there are two blanks."""
    assert ended.code == 0, ended.err
    return [re.split(" {2,}", text.strip()) for text in ended.out.splitlines()]


@pytest.mark.parametrize("words", ASKING)
@pytest.mark.parametrize("format", ["table", "csv", "jsonl"])
def test_file_pipe_and_output_are_the_same(run, tank, tmp_path, words, format):
    place = tmp_path / "answer"
    ended = run(*words, tank, "--quiet", "--format", format)
    assert (ended.code, ended.err) == (0, "")
    assert run(*words, "--quiet", "--format", format, stdin=tank.read_bytes()) == ended
    assert run(*words, tank, "--quiet", "--format", format, "-o", place) == Ended(0, "", "")
    assert place.read_bytes().decode() == ended.out


def test_forecast_csv_and_jsonl_tell_the_same(run, tank):
    rows = table_of(run("forecast", tank, "--steps", "3"))
    records = records_of(run("forecast", tank, "--steps", "3", "--format", "jsonl"))
    assert list(rows[0]) == ["step", "time", "mean", "p05", "p10", "p25", "p50", "p75", "p90", "p95"]
    assert [row["time"] for row in rows] == [f"2026-01-09T0{hour}:00:00" for hour in range(3)]
    for number, (row, record) in enumerate(zip(rows, records, strict=True), 1):
        assert list(record) == ["step", "time", "mean", "median", "quantiles", "weights"]
        assert (int(row["step"]), row["time"]) == (record["step"], record["time"]) == (number, record["time"])
        assert list(record["quantiles"]) == LEVELS
        quantiles = list(record["quantiles"].values())
        assert quantiles == sorted(quantiles)
        assert [float(row[column_of(level)]) for level in LEVELS] == quantiles
        assert record["median"] == record["quantiles"]["0.5"]
        assert row["mean"] == ("" if record["mean"] is None else str(record["mean"]))
        assert sum(record["weights"].values()) == pytest.approx(1, abs=1e-9)
    assert 3.5 < records[0]["median"] < 4.5


def test_quantiles_name_the_columns(run, tank):
    asked = "0.025,0.5, 0.9,0.995"
    rows = table_of(run("forecast", tank, "--steps", "2", "--quantiles", asked))
    assert list(rows[0]) == ["step", "time", "mean", "p2.5", "p50", "p90", "p99.5"]
    assert table_of(run("forecast", tank, "--steps", "2", SEQMIX_FORECAST_QUANTILES=asked)) == rows
    (record, _) = records_of(run("forecast", tank, "--steps", "2", "--quantiles", asked, "--format", "jsonl"))
    assert list(record["quantiles"]) == ["0.025", "0.5", "0.9", "0.995"]
    head = words_of(run("forecast", tank, "--quantiles", asked, "--format", "table"))[0]
    assert head[:7] == ["step", "time", "median", "p2.5", "p50", "p90", "p99.5"]


@pytest.mark.parametrize(
    ("level", "name"),
    [("0.05", "p05"), ("0.5", "p50"), ("0.001", "p0.1"), ("0.025", "p2.5"), ("0.07", "p07"), ("0.999", "p99.9")],
)
def test_a_column_of_a_quantile_has_its_percentage(level, name):
    assert column_of(level) == name


def test_forecast_table(run, tank):
    record = records_of(run("forecast", tank, "--steps", "1", "--format", "jsonl"))[0]
    lines = words_of(run("forecast", tank, "--steps", "1", "--format", "table"))
    assert lines[0][:7] == ["step", "time", "median", "50% from", "to", "80% from", "to"]
    shown = [record["median"], *(record["quantiles"][level] for level in ("0.25", "0.75", "0.1", "0.9"))]
    assert lines[1][:7] == ["1", "2026-01-09T00:00:00", *(f"{number:.2f}" for number in shown)]
    assert (lines[0][7:] == ["mean"]) == (record["mean"] is not None)
    assert lines[2] == [""]
    assert lines[3] == ["model", "leading setting", "weight"]
    assert [line[0] for line in lines[4:-2]] == list(record["weights"])
    assert lines[-1] == ["rows read: 96"]


def test_a_mean_is_shown_where_it_exists(run):
    log = b"0\n-1\n1.5\n-2\n0.5\n1\n-1\n0\n" * 6  # not all positive, so no model has it on a log scale
    words = ["forecast", "--steps", "2", "--models", "autoregression", "--quiet"]
    means = [record["mean"] for record in records_of(run(*words, "--format", "jsonl", stdin=log))]
    assert [float(row["mean"]) for row in table_of(run(*words, stdin=log))] == means
    head, *rows = words_of(run(*words, "--format", "table", stdin=log))[:3]
    assert head[-1] == "mean"
    assert [row[-1] for row in rows] == [shower(0.5)(mean) for mean in means]


@pytest.mark.parametrize(
    ("resolution", "number", "text"),
    [
        (0.1, 4.26, "4.26"),
        (0.25, -1.5, "-1.500"),
        (1.0, 1234567.0, "1234567.0"),
        (1.0, -1e-17, "0.0"),
        (25.0, 50.0, "50.0"),
        (1000.0, 12345.6, "12346"),
        (0.1, 1.25e300, "1.25e+300"),
        (1e-300, 1.23456789e-300, "1.23457e-300"),
        (0.1, math.inf, "inf"),
    ],
)
def test_a_table_shows_one_decimal_more_than_the_log(resolution, number, text):
    assert shower(resolution)(number) == text


def test_thresholds(run, tank):
    words = ["forecast", tank, "--steps", "4", "--above", "4.5", "--above=-3", "--below", "3.5"]
    records = records_of(run(*words, "--format", "jsonl"))
    for record in records:
        assert list(record)[-5:] == ["above", "below", "ever_above", "ever_below", "weights"]
        assert [*record["above"]] == [*record["ever_above"]] == ["4.5", "-3"]
        assert [*record["below"]] == [*record["ever_below"]] == ["3.5"]
        assert record["ever_above"] == records[0]["ever_above"]
        assert 0 <= record["above"]["4.5"] <= record["above"]["-3"] <= 1
        assert record["above"]["-3"] > 0.9
        assert record["below"]["3.5"] <= record["ever_below"]["3.5"] + 0.05
    rows = table_of(run(*words))
    names = ["above_4.5", "above_-3", "below_3.5", "ever_above_4.5", "ever_above_-3", "ever_below_3.5"]
    assert list(rows[0])[-6:] == names
    for row, record in zip(rows, records, strict=True):
        chances = [chance for key in ("above", "below", "ever_above", "ever_below") for chance in record[key].values()]
        assert [float(row[name]) for name in names] == chances
    table = words_of(run(*words, "--format", "table"))
    assert table[0][-3:] == ["above 4.5", "above -3", "below 3.5"]
    assert [line[0] for line in table[6:9]] == [
        "above 4.5 at least once", "above -3 at least once", "below 3.5 at least once",
    ]  # fmt: skip
    asked = {"SEQMIX_FORECAST_ABOVE": "4.5 -3", "SEQMIX_FORECAST_BELOW": "3.5"}
    assert run("forecast", tank, "--steps", "4", **asked) == run(*words)


def test_thresholds_are_there_only_if_asked_for(run, tank):
    (record,) = records_of(run("forecast", tank, "--steps", "1", "--below", "3", "--format", "jsonl"))
    assert list(record)[-3:] == ["below", "ever_below", "weights"]
    (row,) = table_of(run("forecast", tank, "--steps", "1", "--below", "3"))
    assert list(row)[-2:] == ["below_3", "ever_below_3"]


def test_paths_are_joint_continuations(run, tank):
    words = ["forecast", tank, "--paths", "3", "--steps", "4"]
    rows = table_of(run(*words))
    assert list(rows[0]) == ["path", "step", "time", "value"]
    assert [(int(row["path"]), int(row["step"])) for row in rows] == [(p, s) for p in (1, 2, 3) for s in (1, 2, 3, 4)]
    assert rows[0]["time"] == rows[4]["time"] == "2026-01-09T00:00:00"
    records = records_of(run(*words, "--format=jsonl"))
    assert [list(record) for record in records] == [["path", "values"]] * 3
    assert [value for record in records for value in record["values"]] == [float(row["value"]) for row in rows]
    table = words_of(run(*words, "--format", "table"))
    assert table[0] == ["path", "step 1", "step 2", "step 3", "step 4"]
    assert table[1] == ["1", *(f"{value:.2f}" for value in records[0]["values"])]
    assert run(*words) == run(*words, "--seed", "0") != run(*words, "--seed", "1")


def test_score_jsonl_and_csv_tell_the_same(run, tank):
    (record,) = records_of(run("score", tank, "--last", "10", "--format", "jsonl"))
    assert list(record) == [
        "rows", "bits", "bits_per_row", *ERRORS, "coverage", "pit", "law_rows", "best_model", "regret_bits",
        "bound_bits", "models", "baselines",
    ]  # fmt: skip
    assert record["rows"] == sum(record["pit"]) == 10
    assert list(record["coverage"]) == ["0.5", "0.8", "0.9"]
    rows = table_of(run("score", tank, "--last", "10"))
    assert list(rows[0]) == [*PARTS, *ERRORS, *COVERED, "rows"]
    assert [key for key, _ in groupby(row["section"] for row in rows)] == ["mixture", "model", "baseline"]
    assert [float(rows[0][key]) for key in ("bits", *ERRORS)] == [record[key] for key in ("bits", *ERRORS)]
    assert [float(rows[0][key]) for key in COVERED] == list(record["coverage"].values())
    parts = {part["name"]: part["bits"] for part in [*record["models"], *record["baselines"]]}
    assert {row["name"]: float(row["bits"]) for row in rows[1:]} == parts


def test_score_table(run, tank):
    (record,) = records_of(run("score", tank, "--last", "10", "--format", "jsonl"))
    blocks = run("score", tank, "--last", "10", "--format", "table").out.split("\n\n")
    fields = dict(re.split(" {2,}", line) for line in blocks[0].splitlines())
    assert list(fields) == [
        "rows scored", "bits", "bits a row", "MAE", "RMSE", "CRPS", "inside the central 50%", "inside the central 80%",
        "inside the central 90%", "best model", "regret, bits", "bound, bits",
    ]  # fmt: skip
    assert (fields["rows scored"], fields["best model"]) == ("10", record["best_model"])
    assert [fields[name] for name in ("MAE", "RMSE", "CRPS")] == [f"{record[key]:.6g}" for key in ERRORS[:3]]
    assert fields["inside the central 80%"] == f"{100 * record['coverage']['0.8']:.1f}%"
    assert [block.split()[0] for block in blocks[1:]] == ["model", "baseline"]


def test_score_steps_ahead(run, tank):
    words = ["score", tank, "--last", "6", "--steps", "3"]
    (record,) = records_of(run(*words, "--format", "jsonl"))
    assert [(step["step"], step["rows"]) for step in record["ahead"]] == [(1, 6), (2, 5), (3, 4)]
    rows = [row for row in table_of(run(*words)) if row["section"] == "ahead"]
    for row, step in zip(rows, record["ahead"], strict=True):
        assert (row["name"], row["rows"], row["bits"]) == (str(step["step"]), str(step["rows"]), "")
        assert [float(row[key]) for key in ERRORS] == [step[key] for key in ERRORS]
        assert [float(row[key]) for key in COVERED] == list(step["coverage"].values())
    block = words_of(run(*words, "--format", "table"))[-4:]
    assert block[0] == ["steps ahead", "rows", "MAE", "RMSE", "CRPS", "inside 50%", "inside 80%", "inside 90%"]
    assert block[3][:3] == ["3", "4", f"{record['ahead'][2]['mae']:.6g}"]
    assert run("score", tank, "--last", "6", SEQMIX_SCORE_STEPS="3") == run(*words)


@pytest.mark.parametrize("choice", [["--last", "all"], ["--from", "2026-01-05T18:00"], ["--last", "10"], []])
def test_per_row_adds_up_to_the_score(run, tank, choice):
    tank.write_text("".join(tank.read_text().splitlines(keepends=True)[:25]))
    words = ["score", tank, *choice]
    rows = table_of(run(*words, "--per-row"))
    (record,) = records_of(run(*words, "--format", "jsonl"))
    assert len(rows) == record["rows"]
    assert sum(float(row["bits"]) for row in rows) == pytest.approx(record["bits"], abs=1e-6)
    last = tank.read_text().splitlines()[-1].split(",")
    assert (rows[-1]["row"], rows[-1]["time"], float(rows[-1]["value"])) == ("24", last[0], float(last[1]))
    records = records_of(run(*words, "--per-row", "--format", "jsonl"))
    assert [(one["value"], one["bits"]) for one in records] == [
        (float(row["value"]), float(row["bits"])) for row in rows
    ]
    head, *table = words_of(run(*words, "--per-row", "--format", "table"))
    assert head == ["row", "time", "value", "bits"]
    assert [line[2] for line in table] == [f"{one['value']:g}" for one in records]


def test_a_missing_row_has_no_loss(run, tmp_path):
    log = tmp_path / "log.txt"
    log.write_text("4.5\n4\n\ninf\n5.5\n")
    words = ["score", log, "--last", "all", "--per-row", "--quiet"]
    rows = table_of(run(*words))
    assert [row["value"] for row in rows] == ["4.5", "4.0", "", "", "5.5"]
    assert [row["bits"] == "" for row in rows] == [False, False, True, True, False]
    assert words_of(run(*words, "--format", "table"))[2:5] == [["2", "4", rows[1]["bits"][:5]], ["3"], ["4"]]


def test_score_against_another_log(run, tank, tmp_path):
    other = tmp_path / "next.csv"
    other.write_text("".join(tank.read_text().replace("2026-01-0", "2026-02-0").splitlines(keepends=True)[:13]))
    learning, frozen = (
        records_of(run("score", tank, "--against", other, *more, "--format", "jsonl"))[0] for more in ([], ["--frozen"])
    )
    assert learning["rows"] == frozen["rows"] == 12
    assert learning["bits"] != frozen["bits"]
    assert frozen["bound_bits"] is None


def test_weights(run, tank, monkeypatch):
    monkeypatch.setenv("SEQMIX_MODELS", "trend,season")
    rows = table_of(run("weights", tank, "--every", "32"))
    groups = {row: list(group) for row, group in groupby(rows, key=lambda row: row["row"])}
    assert list(groups) == ["32", "64", "96"]
    for group in groups.values():
        assert sum(float(row["weight"]) for row in group) == pytest.approx(1, abs=1e-9)
    last = {row["model"]: float(row["weight"]) for row in groups["96"]}
    table = words_of(run("weights", tank, "--format", "table"))
    assert [line[0] for line in table[1:]] == sorted(last, key=lambda name: -last[name])
    (*_, record) = records_of(run("weights", tank, "--every", "32", "--format", "jsonl"))
    assert record == {"row": 96, "time": "2026-01-08T23:00:00", "weights": last}


@pytest.mark.parametrize("words", ASKING)
def test_period_and_resolution_reach_the_models(run, tank, monkeypatch, words):
    monkeypatch.setenv("SEQMIX_MODELS", "trend,season")
    plain = run(*words, tank)
    ours = run(*words, tank, "--period", "5", "--period=24", "--resolution", "0.5")
    assert (plain.code, ours.code) == (0, 0)
    variable = f"SEQMIX_{words[0].upper()}_"
    asked = {variable + "PERIOD": "5 24", variable + "RESOLUTION": "0.5"}
    assert run(*words, tank, **asked) == ours
    coarse = run(*words, tank, "--resolution", "0.5")
    seasonal = run(*words, tank, "--period", "5")
    assert len({ended.out for ended in (plain, coarse, seasonal)}) == 3
    assert (coarse.code, seasonal.code) == (0, 0)


def test_tables_follow_the_resolution(run, tank):
    table = words_of(run("forecast", tank, "--steps", "1", "--resolution", "1", "--format", "table"))
    assert re.fullmatch(r"-?\d+\.\d", table[1][2])


@pytest.mark.parametrize("log", [b"", b"NA\n", b"4.5\n", b"NA\n\n4\n", b"7\n7\n7\n", b"-1e300\n1e300\n1e-300\n"])
@pytest.mark.parametrize("format", ["table", "jsonl"])
@pytest.mark.filterwarnings("error")  # a warning of numpy would stand on stderr
def test_short_and_strange_logs_are_answered(run, monkeypatch, log, format):
    monkeypatch.delenv("SEQMIX_MODELS")
    for words in (["forecast", "--steps=2", "--above=5"], ["score", "--last=all", "--steps=2"], ["weights"]):
        ended = run(*words, "--as", "numbers", "--quiet", "--format", format, stdin=log)
        assert (ended.code, ended.err) == (0, "")
        assert ended.out
        if format == "jsonl":
            records_of(ended)


WRONG = [
    (["forecast", "--quantiles", "0.1,1"], "invalid value for '--quantiles': '1' is not a number between 0 and 1; "
     "levels look like 0.1,0.5,0.9"),
    (["forecast", "--quantiles", "p10"], "invalid value for '--quantiles': 'p10' is not a number between 0 and 1; "
     "levels look like 0.1,0.5,0.9"),
    (["forecast", "--quantiles", "0.1,,0.9"], "invalid value for '--quantiles': '' is not a number between 0 and 1; "
     "levels look like 0.1,0.5,0.9"),
    (["forecast", "--quantiles", "0.1,0.10"], "invalid value for '--quantiles': '0.10' is there twice"),
    (["forecast", "--quantiles", "nan"], "invalid value for '--quantiles': 'nan' is not a number between 0 and 1; "
     "levels look like 0.1,0.5,0.9"),
    (["forecast", "--above", "high"], "invalid value for '--above': 'high' is not a valid float"),
    (["forecast", "--below", "-inf"], "invalid value for '--below': '-inf' is not a finite number"),
    (["forecast", "--paths", "2", "--above", "3"], "--paths excludes --quantiles, --above and --below"),
    (["forecast", "--period", "1"], "invalid value for '--period': 1 is not in the range 2<=x<=100000"),
    (["weights", "--resolution", "fine"], "invalid value for '--resolution': 'fine' is not a valid float"),
    (["score", "--steps", "0"], "invalid value for '--steps': 0 is not in the range x>=1"),
    (["score", "--steps", "2", "--per-row"], "--per-row excludes --steps"),
]  # fmt: skip


@pytest.mark.parametrize(("words", "problem"), WRONG)
def test_wrong_words(run, tank, words, problem):
    assert run(*words, tank) == Ended(2, "", f"seqmix: {problem}; see 'seqmix {words[0]} --help'\n")


@pytest.mark.parametrize("words", ASKING)
@pytest.mark.parametrize("resolution", ["0", "-1", "nan", "inf"])
def test_a_resolution_is_positive(run, tank, words, resolution):
    said = f"a resolution of {float(resolution)}; it must be positive, from 1e-300 to 1e300"
    assert run(*words, tank, "--resolution", resolution) == Ended(2, "", f"seqmix: {said}\n")


@pytest.mark.parametrize(
    "words",
    [
        ["forecast", "--above", "3"],
        ["forecast", "--below", "3"],
        ["forecast", "--quantiles", "0.5"],
        ["forecast", "--period", "24"],
        ["score", "--resolution", "1"],
        ["score", "--steps", "2"],
        ["weights", "--period", "24"],
    ],
)
def test_options_of_numbers_are_refused_for_states(run, line, tank, monkeypatch, words):
    monkeypatch.chdir(line.parent)
    hint = "--as numbers reads it as numbers"
    said = f"{words[1]} is for a log of numbers, and line.csv is read as states; {hint}"
    assert run(*words, "line.csv", "-o", "answer") == Ended(2, "", f"seqmix: {said}\n")
    assert not Path("answer").exists()
    said = f"{words[1]} is for a log of numbers, and tank.csv is read as bytes; {hint}"
    assert run(*words, "tank.csv", "--as", "bytes") == Ended(2, "", f"seqmix: {said}\n")


@pytest.mark.parametrize("name", ["forecast", "score", "weights"])
def test_text_among_numbers(run, tank, monkeypatch, name):
    monkeypatch.chdir(tank.parent)
    tank.write_text(tank.read_text() * 50 + "2026-01-09T00:00:00,hi\x1bgh\n")
    text = "not a number: 'level'; --as states takes every distinct value as a state"
    assert run(name, "tank.csv", "--as", "numbers") == Ended(1, "", f"seqmix: tank.csv:98:2: {text}\n")
