"""Where a log changed its ways, from the command line: formats, options, and what is said when it cannot be told."""

from __future__ import annotations

import csv
import io
import json
import random
from datetime import date, timedelta

import pytest
from running import Ended

COLUMNS = [
    "row", "time", "known_row", "known_time", "evidence_bits", "odds", "leading_before", "leading_after",
    "level_before", "level_after",
]  # fmt: skip
HINT = "see 'seqmix shifts --help'\n"


@pytest.fixture
def milk(tmp_path, monkeypatch):
    """Litres a day; the herd grew after 40 days."""
    monkeypatch.chdir(tmp_path)
    noise = random.Random(1)
    litres = [(900 if day < 40 else 960) + noise.randint(-15, 15) for day in range(60)]
    rows = [f"{date(2026, 1, 1) + timedelta(day)},{value}\n" for day, value in enumerate(litres)]
    (tmp_path / "milk.csv").write_text("date,litres\n" + "".join(rows))
    (tmp_path / "steady.csv").write_text("date,litres\n" + "".join(rows[:40]))
    return tmp_path


def test_csv_and_jsonl_tell_the_same(run, milk):
    ended = run("shifts", "milk.csv", "--quiet")
    assert (ended.code, ended.err) == (0, "")
    (row,) = csv.DictReader(io.StringIO(ended.out))
    assert list(row) == COLUMNS
    assert (row["row"], row["time"]) == ("41", "2026-02-10")
    assert 41 < int(row["known_row"]) < 60
    (record,) = map(json.loads, run("shifts", "milk.csv", "--quiet", "--format", "jsonl").out.splitlines())
    assert list(record) == COLUMNS
    assert {name: str(value) for name, value in record.items()} == row


def test_table_and_a_log_without_shift(run, milk):
    table = run("shifts", "milk.csv", "--quiet", "--format", "table").out.splitlines()
    assert table[0].split("  ")[0].strip() == "row"
    assert table[-1].startswith("1 shift in 60 rows at odds of 100; odds of a further one now 0.")
    none = run("shifts", "steady.csv", "--quiet", "--format", "table")
    assert (none.code, none.err) == (0, "")
    assert none.out.startswith("no shift in 40 rows at odds of 100; odds of a further one now 0.")
    assert run("shifts", "steady.csv", "--quiet").out == ",".join(COLUMNS) + "\n"
    assert run("shifts", "steady.csv", "--quiet", "--format", "jsonl").out == ""


def test_states_have_no_level(run, line):
    ended = run("shifts", stdin=b"fill\ncap\n" * 60 + b"fill\ncap\nlabel\n" * 20, SEQMIX_SHIFTS_ODDS="20")
    assert (ended.code, ended.err) == (0, "")
    (row,) = csv.DictReader(io.StringIO(ended.out))
    assert (row["level_before"], row["level_after"], row["time"]) == ("", "", "")
    assert 120 <= int(row["row"]) <= 124


@pytest.mark.parametrize(
    ("arguments", "code", "said"),
    [
        (["milk.csv", "--odds", "1"], 2, f"invalid value for '--odds': 1 is not above 1; {HINT}"),
        (["milk.csv", "--odds", "inf"], 2, f"invalid value for '--odds': 'inf' is not a finite number; {HINT}"),
        (["milk.csv", "--odd", "5"], 2, f"no such option '--odd', the nearest is '--odds'; {HINT}"),
        (["nofile"], 1, "nofile: cannot be opened: No such file or directory\n"),
        (["milk.csv", "--as", "states", "--period", "7"], 2,
         "--period is for a log of numbers, and milk.csv is read as states; --as numbers reads it as numbers\n"),
    ],
)  # fmt: skip
def test_what_cannot_be_told(run, milk, arguments, code, said):
    assert run("shifts", *arguments, "-o", "answer") == Ended(code, "", f"seqmix: {said}")
    assert not (milk / "answer").exists()
