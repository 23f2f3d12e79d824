"""The writer: formats, the look of tables, and files that appear whole or not at all."""

from __future__ import annotations

import csv
import io
import json
import os
import stat

import pytest

from seqmix.cli.writer import Writer, percent, writing
from seqmix.errors import OutputError

STATES = ["fill", "a,b", 'a"b', "a\nb", "a\rb", " x ", "洗浄", "\x1b[31mred", "\x9b31m", "\u202e", "\ud800"]


class Screen(io.BytesIO):
    """A file that says it is a terminal."""

    def isatty(self) -> bool:
        return True


@pytest.mark.parametrize("state", STATES)
def test_values_read_back_the_same(state):
    file = io.BytesIO()
    Writer(file, "x", "jsonl").record({"state": state, "weight": 0.1 + 0.2, "none": None})
    assert file.getvalue().count(b"\n") == 1
    assert json.loads(file.getvalue().decode()) == {"state": state, "weight": 0.1 + 0.2, "none": None}

    file = io.BytesIO()
    Writer(file, "x", "csv").row((1, None, state, 0.1 + 0.2))
    (cells,) = csv.reader(io.StringIO(file.getvalue().decode(), newline=""))
    assert cells == ["1", "", state.replace("\ud800", "\\ud800"), "0.30000000000000004"]


@pytest.mark.parametrize("state", STATES)
@pytest.mark.parametrize("format", ["table", "csv", "jsonl"])
def test_a_terminal_gets_printable_text_only(monkeypatch, format, state):
    monkeypatch.setenv("NO_COLOR", "1")
    file = Screen()
    writer = Writer(file, "x", format)
    if format == "table":
        writer.table([("state", "<")], [(state,)])
        writer.fields({"best": state})
        writer.lines([state])
    elif format == "csv":
        writer.row((state, 0.5))
    else:
        writer.record({"state": state})
        assert json.loads(file.getvalue().decode()) == {"state": state}
    assert all(line.isprintable() for line in file.getvalue().decode().split("\n"))


@pytest.mark.parametrize("number", [float("inf"), float("-inf"), float("nan")])
def test_numbers_that_are_not_finite_are_null_or_empty(number):
    file = io.BytesIO()
    Writer(file, "x", "jsonl").record(
        {"bits": number, "parts": [{"bits": number}], "paths": [[1.5, number]], "rows": 2}
    )
    assert file.getvalue() == b'{"bits": null, "parts": [{"bits": null}], "paths": [[1.5, null]], "rows": 2}\n'
    file = io.BytesIO()
    Writer(file, "x", "csv").row(("mixture", number, 2))
    assert file.getvalue() == b"mixture,,2\n"


def test_the_look_of_a_table():
    file = io.BytesIO()
    writer = Writer(file, "x", "table")
    writer.table([("step", ">"), ("state", "<"), ("share", ">")], [("1", "洗浄", "7.5%"), ("10", "x" * 90, "92.5%")])
    writer.fields({"rows": "12", "best model": "trees"})
    writer.lines(["said"])
    assert file.getvalue().decode() == (
        f"step  state{' ' * 77}share\n"
        f"   1  洗浄{' ' * 79}7.5%\n"
        f"  10  {'x' * 79}…  92.5%\n"
        "\n"
        "rows           12\n"
        "best model  trees\n"
        "\n"
        "said\n"
    )


@pytest.mark.parametrize(
    ("environment", "styled"),
    [
        ({"TERM": "xterm"}, True),
        ({"TERM": "xterm", "NO_COLOR": "1"}, False),
        ({"TERM": "dumb"}, False),
        ({}, False),
    ],
)
def test_headings_are_dim_on_a_terminal_that_can(monkeypatch, environment, styled):
    for name in ("TERM", "NO_COLOR"):
        monkeypatch.delenv(name, raising=False)
    for name, value in environment.items():
        monkeypatch.setenv(name, value)
    for file, expected in ((Screen(), styled), (io.BytesIO(), False)):
        Writer(file, "x", "table").table([("state", "<")], [("fill",)])
        assert file.getvalue() == (b"\x1b[2mstate\x1b[0m\nfill\n" if expected else b"state\nfill\n")


def test_the_format_follows_the_place():
    assert Writer(Screen(), "x", None).format == "table"
    assert Writer(io.BytesIO(), "x", None).format == "csv"
    assert Writer(Screen(), "x", "jsonl").format == "jsonl"


@pytest.mark.parametrize(
    ("probability", "text"),
    [
        (0, "0.0%"),
        (1e-9, "<0.1%"),
        (0.0005, "0.1%"),
        (0.71, "71.0%"),
        (0.99949, "99.9%"),
        (0.99999, ">99.9%"),
        (1, "100.0%"),
    ],
)
def test_a_percentage_is_0_or_100_only_if_it_is(probability, text):
    assert percent(probability) == text


def test_a_file_keeps_its_rights_and_its_links(tmp_path):
    target, link = tmp_path / "answer.csv", tmp_path / "link"
    target.write_text("old")
    target.chmod(0o640)
    link.symlink_to(target)
    with writing(str(link), None) as writer:
        writer.row(("new",))
        assert target.read_text() == "old"
    assert target.read_text() == "new\n"
    assert link.is_symlink()
    assert stat.S_IMODE(target.stat().st_mode) == 0o640
    assert sorted(os.listdir(tmp_path)) == ["answer.csv", "link"]


@pytest.mark.parametrize("error", [ValueError, KeyboardInterrupt])
def test_a_failure_leaves_the_old_file_and_nothing_else(tmp_path, error):
    target = tmp_path / "answer.csv"
    target.write_text("old")
    with pytest.raises(error), writing(str(target), None) as writer:
        writer.row(("half",))
        writer.flush()
        raise error
    assert target.read_text() == "old"
    assert os.listdir(tmp_path) == ["answer.csv"]


@pytest.mark.parametrize(("path", "reason"), [("nowhere/x.csv", "No such file or directory"), (".", "Is a directory")])
def test_a_place_that_cannot_be_written_is_named(tmp_path, monkeypatch, path, reason):
    monkeypatch.chdir(tmp_path)
    with pytest.raises(OutputError, match=f"^cannot write {path}: {reason}$"), writing(path, None):
        pass
    assert os.listdir(tmp_path) == []
