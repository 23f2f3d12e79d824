"""Rows as they arrive: lines that become rows, and answers that depend on the rows alone."""

from __future__ import annotations

import io
import json
import random
from collections.abc import Callable, Iterator
from itertools import pairwise
from pathlib import Path
from typing import Any

import numpy as np
import pytest

import seqmix
from seqmix.errors import DataError
from seqmix.following import AT_ONCE, Follower, Reader, together
from seqmix.learned import Learned, load
from seqmix.mixture.mixture import Mixture
from seqmix.mixture.numbers import NumberMixture
from seqmix.surprising import SurpriseRow

QUICK = ["memoryless", "markov", "dwell"]
RATE = "1/50rows"


def reader(
    models: list[str] | None = None, known: Learned | None = None, strict: bool = False, **reading: Any
) -> tuple[Reader, list[str]]:
    told: list[str] = []
    made = Reader(
        "line.csv", lambda facts: Learned(facts, models or QUICK), known, tell=told.append, strict=strict, **reading
    )
    return made, told


def values(made: Reader, lines: list[str], end: bool = False) -> list[Any]:
    """Values of the rows of some lines: labels, numbers, None for a missing one."""
    found = []
    for held, _ in made.feed([line.encode() for line in lines], end):
        assert made.known is not None
        labels = made.known.facts.alphabet.labels
        if held.dtype == np.float64:
            found += [None if value != value else value for value in held.tolist()]
        else:
            found += [labels[code] if code >= 0 else None for code in held.tolist()]
    return found


# ---- lines that become rows


def test_the_layout_is_that_of_the_first_two_lines():
    made, told = reader()
    assert values(made, ["time,state\n"]) == []
    assert made.known is None
    assert values(made, ["2026-03-02T06:00,fill\n"]) == ["fill"]
    assert made.known is not None
    assert (made.known.facts.column, made.known.facts.time_column, made.known.facts.header) == ("state", "time", True)
    assert values(made, ["2026-03-02T06:01,cap\n", "2026-03-02T06:02,fill\n"]) == ["cap", "fill"]
    assert (made.line, made.skipped, told) == (4, 0, [])


@pytest.mark.parametrize(
    ("lines", "expected"),
    [
        (["fill\n", "cap\n", "fill\n"], ["fill", "cap", "fill"]),
        (["fill\n", "\n", "NA\n", "cap\n"], ["fill", None, None, "cap"]),
        (["fill\r\n", "cap\r\n"], ["fill", "cap"]),
        (["4.5\n", "4.6\n", "\n", "5\n"], [4.5, 4.6, None, 5.0]),
        (["2026-03-02 06:00;fill\n", "2026-03-02 06:01;cap\n"], ["fill", "cap"]),
        (["time\tlitres\n", "2026-03-02\t20.5\n", "2026-03-03\tNA\n"], [20.5, None]),
        (['{"t": "2026-03-02", "v": "a"}\n', '{"t": "2026-03-03", "v": null}\n', '{"v": "b", "t": "2026-03-04"}\n'],
         ["a", None, "b"]),
        (['time,state\n', '2026-03-02,"a, b"\n', "\n", "2026-03-03,c\n"], ["a, b", "c"]),
    ],
)  # fmt: skip
def test_every_format_one_by_one_and_at_once(lines, expected):
    whole, _ = reader()
    assert values(whole, lines, end=True) == expected
    single, told = reader()
    assert [value for line in lines for value in values(single, [line])] == expected
    assert told == []
    assert single.line == whole.line == len(lines)


def test_a_log_without_a_value_yet_waits_for_one():
    made, _ = reader(["trend"])
    lines = ["\n", "time,celsius\n", "\n", "2026-03-02T06:00,NA\n", "2026-03-02T06:10,\n"]
    assert [values(made, [line]) for line in lines] == [[]] * 5
    assert values(made, ["2026-03-02T06:20,-1\n"]) == [None, None, -1.0]
    assert made.known is not None
    assert (made.known.facts.kind, made.known.facts.column) == ("numbers", "celsius")
    assert values(reader()[0], [*lines[:4], "2026-03-02T06:10,jam\n"]) == [None, "jam"]
    assert values(reader()[0], lines, end=True) == [None, None]


def test_one_line_alone_and_none():
    made, _ = reader()
    assert values(made, ["fill\n"], end=True) == ["fill"]
    made, _ = reader()
    assert values(made, [], end=True) == []
    assert made.known is None


def test_options_are_those_of_reading():
    made, _ = reader(column="crew", header=True)
    assert values(made, ["state,crew\n", "fill,A\n", "cap,B\n"]) == ["A", "B"]
    made, _ = reader(kind="states")
    assert values(made, ["4.5\n", "4.6\n"]) == ["4.5", "4.6"]


BAD = [
    ("2026-03-02T06:02\n", "1 cells where 2 were expected"),
    ("2026-03-02T06:02,a,b\n", "3 cells where 2 were expected"),
    ("sometime,fill\n", "not a time"),
    ("2026-03-02T06:02,j\x1b\udce9m\n", "not UTF-8"),
]


@pytest.mark.parametrize(("bad", "reason"), BAD)
@pytest.mark.parametrize("alone", [True, False])
def test_a_row_that_cannot_be_read_is_told_and_left_out(bad, reason, alone):
    lines = ["time,state\n", "2026-03-02T06:00,fill\n", "2026-03-02T06:01,cap\n", bad, "2026-03-02T06:03,pack\n"]
    raw = [line.encode("utf-8", "surrogateescape") for line in lines]
    made, told = reader()
    pieces = [piece for line in raw for piece in made.feed([line])] if alone else made.feed(raw)
    assert made.known is not None
    codes = [code for held, _ in pieces for code in held.tolist()]
    assert codes == [0, 1, 2]
    assert made.known.facts.alphabet.labels == ["fill", "cap", "pack"]
    assert (made.line, made.skipped, len(told)) == (5, 1, 1)
    assert told[0].startswith("line.csv:4: ")
    assert told[0].endswith("; row left out")
    assert reason in told[0]
    assert told[0].isprintable()


def test_a_refused_row_leaves_no_state_behind():
    made, told = reader()
    values(made, ["time,state\n", "2026-03-02T06:00,fill\n"])
    assert values(made, ["notime,spill\n", "2026-03-02T06:01,cap\n"]) == ["cap"]
    assert made.known is not None
    assert made.known.facts.alphabet.labels == ["fill", "cap"]
    assert values(made, ["2026-03-02T06:02,spill\n"]) == ["spill"]
    assert len(told) == 1


def test_text_among_numbers_is_left_out():
    made, told = reader(["trend"])
    assert values(made, ["4.5\n", "4.6\n", "tea\n", "4.7\n"]) == [4.5, 4.6, 4.7]
    (said,) = told
    assert said.startswith("line.csv:3: not a number: 'tea'")


def test_json_that_is_none_is_left_out():
    made, told = reader()
    lines = ['{"v": "a"}\n', '{"v": "b"}\n', '{"v": \n', '{"v": "c"}\n']
    assert values(made, lines) == ["a", "b", "c"]
    assert told[0].startswith("line.csv:3: ")


@pytest.mark.parametrize(("bad", "reason"), BAD)
def test_strict_raises(bad, reason):
    made, told = reader(strict=True)
    values(made, ["time,state\n", "2026-03-02T06:00,fill\n"])
    with pytest.raises(DataError) as caught:
        made.feed([b"2026-03-02T06:01,cap\n", bad.encode("utf-8", "surrogateescape")])
    assert str(caught.value).startswith("line.csv:4: ")
    assert reason in str(caught.value)
    assert told == []


def test_the_header_again_is_no_row():
    """A rotated log starts with one."""
    made, _ = reader()
    values(made, ["time,state\n", "2026-03-02T06:00,fill\n"])
    assert values(made, ["time,state\n", "2026-03-02T06:01,cap\n"]) == ["cap"]
    assert made.known is not None
    assert made.known.facts.alphabet.labels == ["fill", "cap"]


def test_rows_that_a_state_knows_are_left_out(tmp_path):
    lines = clocked(50)
    seqmix.learn(io.BytesIO("".join(lines[:31]).encode()), into=tmp_path / "state", models=QUICK)
    made, told = reader(known=load(tmp_path / "state"))
    assert len(values(made, lines)) == 20
    assert (made.old, made.line, told) == (30, 51, [])


def test_rows_left_out_bring_no_state(tmp_path):
    lines = clocked(30)
    seqmix.learn(io.BytesIO("".join(lines).encode()), into=tmp_path / "state", models=QUICK)
    made, _ = reader(known=load(tmp_path / "state"))
    assert made.known is not None
    known = list(made.known.facts.alphabet.labels)
    more = [
        "2026-03-02T06:01,spill\n",
        "2026-03-02T09:00,rinse\n",
        "2026-03-02T06:02,acid\n",
        "2026-03-02T09:01,acid\n",
    ]
    told = list(answered(more, [], made))
    assert [answer["value"] for answer in told] == ["rinse", "acid"]
    assert made.known.facts.alphabet.labels == [*known, "rinse", "acid"]
    assert (made.old, made.line) == (2, 4)


def test_the_rest_is_left_where_it_is_enough(tmp_path):
    made, _ = reader()
    piece = together(made.feed(b"".join(line.encode() for line in clocked(30)).splitlines(keepends=True)))
    assert piece is not None and made.known is not None
    told: list[Any] = []
    for answer in Follower(made.known, RATE).feed(piece, enough=lambda: len(told) >= 4):
        told.append(answer)
    assert len(told) == 10  # together, up to the first gap
    assert made.known.facts.alphabet.labels == ["fill", "cap", "label", "code0"]
    made.known.save(tmp_path / "state")
    known = load(tmp_path / "state")
    rest = answers(["2026-03-02T06:14,rinse\n", "2026-03-02T06:15,acid\n"], [], QUICK, known=known)
    assert [answer["value"] for answer in rest] == ["rinse", "acid"]


# ---- answers


def clocked(rows: int, seed: int = 1) -> list[str]:
    """A line of a dairy, a row a minute but for two gaps; new states come now and then, some rows have none."""
    rng = np.random.default_rng(seed)
    lines, minute = ["time,state\n"], 0
    for t in range(rows):
        minute += 4 if t in (rows // 3, rows // 2) else 1
        state = ("fill", "cap", "label")[t // 2 % 3]
        if rng.random() < 0.05:
            state = rng.choice(["jam", "NA", f"code{t // 40}"])
        lines.append(f"2026-03-02T{6 + minute // 60:02d}:{minute % 60:02d},{state}\n")
    return lines


def tank(rows: int) -> list[str]:
    rng = np.random.default_rng(2)
    lines, hour = ["time,celsius\n"], 0
    for t in range(rows):
        hour += 3 if t == rows // 2 else 1
        value = "NA" if t == 17 else f"{4 + np.sin(hour / 4) + 0.2 * rng.normal() + 9 * (t == rows - 9):.1f}"
        lines.append(f"2026-03-{2 + hour // 24:02d}T{hour % 24:02d}:00,{value}\n")
    return lines


LOGS: dict[str, tuple[Callable[[int], list[str]], int, list[str]]] = {
    "states": (clocked, 100, QUICK),
    "lines": (lambda rows: [line.split(",")[1] for line in clocked(rows)[1:]], 100, [*QUICK[:2], "match"]),
    "numbers": (tank, 40, ["trend", "values"]),
    "plain numbers": (lambda rows: [line.split(",")[1] for line in tank(rows)[1:]], 40, ["trend", "counts"]),
}


def answers(
    lines: list[str], cuts: list[int], models: list[str], steps: int = 1, known: Learned | None = None
) -> list[dict[str, Any]]:
    """Of all lines, which arrive in pieces."""
    return list(answered(lines, cuts, reader(models, known)[0], steps))


def answered(lines: list[str], cuts: list[int], made: Reader, steps: int = 1) -> Iterator[dict[str, Any]]:
    follower: Follower | None = None
    for start, stop in zip([0, *cuts], [*cuts, len(lines)], strict=True):
        piece = together(made.feed([line.encode() for line in lines[start:stop]], stop == len(lines)))
        if piece is not None:
            assert made.known is not None
            follower = follower or Follower(made.known, RATE, steps)
            yield from follower.feed(piece)


@pytest.mark.parametrize("steps", [1, 3])
@pytest.mark.parametrize("name", LOGS)
def test_answers_depend_on_the_rows_alone(name, steps):
    make, rows, models = LOGS[name]
    if steps > 1:
        rows //= 2
    lines = make(rows)
    whole = answers(lines, [], models, steps)
    assert len(whole) == rows
    single = answers(lines, list(range(1, len(lines))), models, steps)
    rng = random.Random(name)
    pieces = answers(lines, sorted(rng.sample(range(1, len(lines)), 12)), models, steps)
    assert whole == single == pieces
    json.dumps(whole, allow_nan=False)


@pytest.mark.parametrize("name", LOGS)
def test_answers_are_those_of_surprise(name):
    make, rows, models = LOGS[name]
    lines = make(rows)
    seen: list[SurpriseRow] = []
    text = io.BytesIO("".join(lines).encode())
    seqmix.surprise(text, false_alarms=RATE, models=models, on_row=seen.append)
    told = [answer for answer in answers(lines, [], models) if answer["value"] is not None]
    names = ("row", "time", "value", "bits", "p_value", "surprise")
    expected = [tuple(getattr(one, name) for name in names) for one in seen]
    assert [tuple(answer[name] for name in names) for answer in told] == expected
    assert any(answer["surprise"] for answer in told)


@pytest.mark.parametrize("steps", [1, 3])
@pytest.mark.parametrize("name", LOGS)
def test_what_is_told_of_the_next_row_is_its_forecast(name, steps):
    make, rows, models = LOGS[name]
    told = answers(make(rows // 2), [], models, steps)
    assert told[0]["forecast"] is None
    settling = 0
    for before, after in pairwise(told):
        if after["row"] > before["row"] + 1:  # foretold anew, for the time at which it came
            continue
        if after["forecast"] is None:  # the cadence is another than it seemed
            settling += 1
            continue
        assert after["forecast"] == (before["next"] if steps == 1 else before["next"][0])
    assert settling <= 2
    if steps > 1:
        assert {len(answer["next"]) for answer in told} == {steps}


@pytest.mark.parametrize("name", ["states", "numbers"])
def test_the_next_row_is_that_of_a_forecast(name):
    make, rows, models = LOGS[name]
    lines = make(rows // 2)
    last = answers(lines, [], models)[-1]
    step = seqmix.forecast(io.BytesIO("".join(lines).encode()), 1, models=models).steps[0]
    if name == "states":
        assert last["next"]["top"] == step.top
        assert last["next"]["probability"] == pytest.approx(step.probabilities[step.top], rel=1e-9)
        assert last["next"]["unseen"] == pytest.approx(step.unseen, rel=1e-9)
    else:
        assert last["next"]["median"] == pytest.approx(step.median, abs=0.02)
        assert list(last["next"]["quantiles"]) == ["0.1", "0.9"]


def test_gaps_new_states_and_missing_values():
    lines = clocked(220)
    told = answers(lines, [], QUICK)
    rows = [answer["row"] for answer in told]
    assert rows[-1] == 220 + 6  # two gaps of three rows, put in, not answered
    assert [b - a for a, b in pairwise(rows) if b - a > 1] == [4, 4]
    missing = [answer for answer in told if answer["value"] is None]
    assert missing
    for answer in missing:
        assert (answer["bits"], answer["p_value"], answer["surprise"]) == (None, None, False)
        assert answer["next"] is not None
    labels = [str(answer["value"]) for answer in told]
    new = [t for t, label in enumerate(labels) if label.startswith("code") and label not in labels[:t]]
    assert len(new) >= 2
    for t in new:
        assert told[t]["p_value"] >= told[t]["forecast"]["unseen"] > 0
    assert [answer["time"] for answer in told] == [line.split(",")[0] for line in lines[1:]]


@pytest.mark.parametrize("kind", ["states", "numbers"])
def test_a_long_gap_is_not_foretold_row_by_row(kind, monkeypatch):
    """Ten days of a row a minute that nobody logged: one forecast, after all of them."""
    days = ("02", "12")
    cells = [("cap", "fill")[t % 2] if kind == "states" else str(4 + t % 2) for t in range(20)]
    lines = ["time,value\n", *(f"2026-03-{days[t // 10]}T06:{t:02d},{cell}\n" for t, cell in enumerate(cells))]
    mixture, asked = (Mixture if kind == "states" else NumberMixture), []
    predict = mixture.predict

    def counted(self: Any, time: int | None = None) -> Any:
        asked.append(time)
        return predict(self, time)

    monkeypatch.setattr(mixture, "predict", counted)
    told = answers(lines, [10], ["memoryless"] if kind == "states" else ["trend"])
    assert len(asked) <= 20
    assert [answer["row"] for answer in told][9:11] == [10, 10 * 1440 + 11]
    assert told[10]["forecast"] is not None


def test_more_rows_at_once_than_are_taken_together():
    lines = ["fill\n" if t % 3 else "cap\n" for t in range(3 * AT_ONCE + 5)]
    assert answers(lines, [], QUICK) == answers(lines, [AT_ONCE + 1], QUICK)


@pytest.mark.parametrize("stop", [8, 40])
@pytest.mark.parametrize("name", LOGS)
def test_going_on_from_a_state_is_going_on(name, stop, tmp_path: Path):
    """All but what is kept of the rate of false alarms, which begins anew."""
    make, rows, models = LOGS[name]
    stop = min(stop, rows - 20)
    lines = make(rows)
    whole = answers(lines, [], models)
    made, _ = reader(models)
    first = list(answered(lines[:stop], [], made))
    assert made.known is not None
    made.known.save(tmp_path / "state")
    rest = answers(lines[stop:], [], models, known=load(tmp_path / "state"))

    def plain(some: list[dict[str, Any]]) -> list[dict[str, Any]]:
        return [{key: value for key, value in answer.items() if key != "surprise"} for answer in some]

    assert plain(first) + plain(rest) == plain(whole)


def test_the_state_is_that_of_learn(tmp_path: Path):
    lines = clocked(150)
    made, _ = reader()
    assert len(list(answered(lines, [7, 60], made))) == 150
    assert made.known is not None
    made.known.save(tmp_path / "followed")
    seqmix.learn(io.BytesIO("".join(lines).encode()), into=tmp_path / "learned", models=QUICK)
    followed, learned = load(tmp_path / "followed"), load(tmp_path / "learned")
    assert followed.rows == learned.rows
    assert list(seqmix.forecast(None, 3, state=followed).records()) == list(
        seqmix.forecast(None, 3, state=learned).records()
    )
