"""Improbable rows, from the command line: events and rows in every format, and what is said when it cannot be told."""

from __future__ import annotations

import csv
import io
import json

import pytest
from running import Ended

EVENT = ["start", "end", "start_time", "end_time", "rows", "value", "p_value", "excess_bits"]
ROW = ["row", "time", "value", "bits", "expected_bits", "p_value", "surprise"]
HINT = "see 'seqmix surprise --help'\n"
NO_RATE = "is no rate of false alarms; say 1/10000rows, 1/hour, 1/day or 1/week"


@pytest.fixture
def tank(tmp_path, monkeypatch):
    """Celsius every ten minutes; the lid stood open once."""
    monkeypatch.chdir(tmp_path)
    rows = [f"2026-03-02T{t // 6:02d}:{t % 6}0,{4 + t % 3 / 10 + 6 * (t == 100):.1f}\n" for t in range(120)]
    (tmp_path / "tank.csv").write_text("time,celsius\n" + "".join(rows))
    return tmp_path


ASKED = ["--models", "values,trend", "--false-alarms", "1/day", "--quiet"]


def test_events_in_every_format(run, tank):
    ended = run("surprise", "tank.csv", *ASKED)
    assert (ended.code, ended.err) == (0, "")
    rows = list(csv.DictReader(io.StringIO(ended.out)))
    assert [list(row) for row in rows] == [EVENT] * len(rows)
    (event,) = (row for row in rows if row["value"] == "10.1")
    assert (event["start"], event["start_time"]) == ("101", "2026-03-02T16:40")
    records = [json.loads(text) for text in run("surprise", "tank.csv", *ASKED, "--format", "jsonl").out.splitlines()]
    assert [{name: str(value) for name, value in record.items()} for record in records] == rows
    table = run("surprise", "tank.csv", *ASKED, "--format", "table").out.splitlines()
    assert table[0].split() == ["rows", "from", "to", "surprising", "least", "probable", "p-value", "excess,", "bits"]
    assert len(table) >= len(rows) + 2
    assert table[-1].startswith("rows with a value: 120; surprising: ")
    assert table[-1].endswith("; false alarms to expect: 0.83")


def test_every_row_in_every_format(run, tank):
    ended = run("surprise", "tank.csv", *ASKED, "--all")
    rows = list(csv.DictReader(io.StringIO(ended.out)))
    assert (ended.code, ended.err, len(rows), list(rows[0])) == (0, "", 120, ROW)
    texts = run("surprise", "tank.csv", *ASKED, "--all", "--format", "jsonl").out.splitlines()
    records = [json.loads(text) for text in texts]
    assert [record["p_value"] for record in records] == [float(row["p_value"]) for row in rows]
    assert [record["row"] for record in records] == list(range(1, 121))
    assert records[100]["surprise"] is True
    table = run("surprise", "tank.csv", *ASKED, "--all", "--format", "table").out.splitlines()
    assert len(table) == 121
    assert table[0].split() == ["row", "time", "value", "bits", "expected", "p-value", "surprise"]
    assert table[101].endswith("yes")
    score = run("score", "tank.csv", "--models", "values,trend", "--last", "all", "--per-row", "--quiet").out
    assert [row["bits"] for row in csv.DictReader(io.StringIO(score))] == [row["bits"] for row in rows]


def test_a_log_without_any(run):
    log = b"fill\ncap\n" * 40
    ended = run("surprise", "--models", "markov", "--format", "table", stdin=log)
    said = "rows with a value: 80; surprising: 0; false alarms to expect: 0.008\n"
    assert ended == Ended(0, said, "")
    assert run("surprise", "--models", "markov", stdin=log) == Ended(0, ",".join(EVENT) + "\n", "")
    assert run("surprise", "--models", "markov", "--format", "jsonl", stdin=log) == Ended(0, "", "")


def test_it_goes_on_from_a_state_and_leaves_it(run, line, tmp_path):
    text = line.read_text().splitlines(keepends=True)
    first, second, state = tmp_path / "first.csv", tmp_path / "second.csv", tmp_path / "state"
    first.write_text("".join(text[:61]))
    second.write_text("".join(text[61:]))
    run("learn", first, "--into", state, "--models", "markov,memoryless")
    kept = state.read_bytes()
    whole = run("surprise", line, "--models", "markov,memoryless", "--all", "--quiet").out.splitlines()
    rest = run("surprise", second, "--state", state, "--all")
    assert (rest.code, rest.err) == (0, "")
    # the p-values of the last rows are those of one log
    assert [row.rsplit(",", 1)[0] for row in rest.out.splitlines()[1:]] == [row.rsplit(",", 1)[0] for row in whole[61:]]
    assert state.read_bytes() == kept


@pytest.mark.parametrize(
    ("arguments", "code", "said"),
    [
        (["tank.csv", "--false-alarms", "often"], 2, f"'often' {NO_RATE}\n"),
        (["tank.csv", "--false-alarms", "1/\x1bday"], 2, f"'1/\\x1bday' {NO_RATE}\n"),
        (["tank.csv", "--false-alarms", "1/2rows"], 2,
         "'1/2rows' is 0.5 false alarms a row; it takes more than 0 and less than 0.5\n"),
        (["tank.csv", "--false-alarm", "1/day"], 2,
         f"no such option '--false-alarm', the nearest is '--false-alarms'; {HINT}"),
        (["nofile"], 1, "nofile: cannot be opened: No such file or directory\n"),
        (["plain", "--false-alarms", "1/day"], 2,
         "'1/day' needs a log with regular times; give the rate in rows, as 1/10000rows\n"),
        (["tank.csv", "--as", "states", "--period", "7"], 2,
         "--period is for a log of numbers, and tank.csv is read as states; --as numbers reads it as numbers\n"),
    ],
)  # fmt: skip
def test_what_cannot_be_told(run, tank, arguments, code, said):
    (tank / "plain").write_text("fill\ncap\n" * 20)
    assert run("surprise", *arguments, "-o", "answer") == Ended(code, "", f"seqmix: {said}")
    assert not (tank / "answer").exists()


def test_the_rate_comes_from_the_environment_too(run, tank):
    expected = run("surprise", "tank.csv", *ASKED)
    options = ["--models", "values,trend", "--quiet"]
    assert run("surprise", "tank.csv", *options, SEQMIX_SURPRISE_FALSE_ALARMS="1/day") == expected
