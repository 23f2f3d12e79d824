"""Surprising rows: their rate on logs the models tell of truly, faults that are found, the same in any chunks."""

from __future__ import annotations

import io

import numpy as np
import pytest
from scipy.signal import lfilter

import seqmix
from seqmix.errors import OptionError
from seqmix.reading import mixture_for
from seqmix.series import Rows, Series
from seqmix.surprising import JOINED, Event, SurpriseRow, Watch, join, rate_of

SECOND = 1_000_000  # microseconds
QUICK = ["memoryless", "markov"]


# ---- the rate


@pytest.mark.parametrize(
    ("text", "cadence", "rate"),
    [
        ("1/10000rows", None, 1e-4),
        ("1/10000 rows", None, 1e-4),
        ("3/1000row", None, 3e-3),
        ("0.5/100rows", 60 * SECOND, 5e-3),
        ("1/hour", 60 * SECOND, 1 / 60),
        ("1/day", 60 * SECOND, 1 / 1440),
        ("2/week", 3600 * SECOND, 2 / 168),
        ("1/10day", 3600 * SECOND, 1 / 240),
        (" 1/day ", 3600 * SECOND, 1 / 24),
    ],
)
def test_rates_of_every_unit(text, cadence, rate):
    assert rate_of(text, cadence) == pytest.approx(rate, rel=1e-12)


@pytest.mark.parametrize("text", ["", "1", "often", "1/", "/day", "1/0rows", "-1/day", "1/2.5rows", "1/month", "1 /h"])
def test_what_is_no_rate(text):
    for ask in (lambda: rate_of(text, SECOND), lambda: seqmix.surprise(["fill"], false_alarms=text)):
        with pytest.raises(OptionError) as caught:
            ask()
        said = f"'{text}' is no rate of false alarms; say 1/10000rows, 1/hour, 1/day or 1/week"
        assert str(caught.value) == said


@pytest.mark.parametrize(("text", "found"), [("1/2rows", "0.5"), ("0/day", "0"), ("24/day", "1")])
def test_rates_that_are_too_much_or_nothing(text, found):
    with pytest.raises(OptionError) as caught:
        rate_of(text, 3600 * SECOND)
    said = f"'{text}' is {found} false alarms a row; it takes more than 0 and less than 0.5"
    assert str(caught.value) == said


def test_a_rate_in_time_needs_a_clock():
    said = "'1/day' needs a log with regular times; give the rate in rows, as 1/10000rows"
    with pytest.raises(OptionError) as caught:
        seqmix.surprise(["fill", "cap"] * 20, false_alarms="1/day")
    assert str(caught.value) == said
    log = "".join(f"2026-03-02T{hour:02d}:00,fill\n" for hour in range(20))
    assert seqmix.surprise(io.BytesIO(log.encode()), false_alarms="1/day").rate == pytest.approx(1 / 24)


# ---- events


def row(number: int, p_value: float = 1e-6, bits: float = 12.0) -> SurpriseRow:
    return SurpriseRow(number, f"t{number}", f"v{number}", bits, 2.0, p_value, True)


def test_rows_near_each_other_are_one_event():
    events: list[Event] = []
    for one in (row(10), row(10 + JOINED, 1e-9, 22.0), row(11 + JOINED, 1e-7), row(12 + 2 * JOINED)):
        join(events, one)
    assert events == [
        Event(10, 11 + JOINED, "t10", f"t{11 + JOINED}", 3, f"v{10 + JOINED}", 1e-9, 40.0),
        Event(12 + 2 * JOINED, 12 + 2 * JOINED, "t22", "t22", 1, "v22", 1e-6, 10.0),
    ]


def test_events_are_the_rows_that_surprise():
    seen: list[SurpriseRow] = []
    states = chain(3000, 7)
    states[2000:2010] = ["acid"] * 10
    found = seqmix.surprise(states, models=QUICK, false_alarms="1/500rows", on_row=seen.append)
    rung = [one for one in seen if one.surprise]
    events: list[Event] = []
    for one in rung:
        join(events, one)
    assert found.events == events
    assert (found.rows, found.surprising) == (3000, len(rung)) == (len(seen), sum(e.rows for e in events))
    assert [one.row for one in seen] == list(range(1, 3001))
    assert events[0].record().keys() == vars(events[0]).keys()


# ---- logs that the models tell of truly, and faults in them


def chain(rows: int, seed: int) -> list[str]:
    """Eight states, the law of the next one skewed and of the last one's own."""
    rng = np.random.default_rng(seed)
    edges = rng.dirichlet(np.full(8, 0.3), 8).cumsum(axis=1)
    state, states = 0, []
    for chance in rng.random(rows):
        state = min(int((chance > edges[state]).sum()), 7)
        states.append("abcdefgh"[state])
    return states


def remembering(rows: int, seed: int) -> list[float]:
    return np.round(lfilter([1], [1, -0.8], np.random.default_rng(seed).normal(size=rows)), 1).tolist()


def seasonal(rows: int, seed: int) -> list[float]:
    rng = np.random.default_rng(seed)
    return np.round(np.tile(4 * rng.normal(size=12), rows)[:rows] + rng.normal(size=rows), 1).tolist()


@pytest.mark.parametrize("seed", [1, 2])
def test_false_alarms_among_states(seed):
    found = seqmix.surprise(chain(20_000, seed), false_alarms="1/1000rows", models=QUICK)
    assert 0.3e-3 < found.surprising / found.rows < 2e-3


@pytest.mark.parametrize(
    ("make", "options"),
    [(remembering, {"models": ["autoregression"]}), (seasonal, {"models": ["season"], "period": 12})],
)
def test_false_alarms_among_numbers(make, options):
    seen: list[SurpriseRow] = []
    found = seqmix.surprise(make(1500, 4), false_alarms="1/1000rows", on_row=seen.append, **options)
    assert 0.3e-3 < found.surprising / found.rows < 2e-3
    p_values = np.array([one.p_value for one in seen])
    for level in (0.01, 0.05, 0.5):
        assert 0.6 * level < (p_values <= level).mean() < 1.5 * level
    excess = np.array([one.bits - one.expected_bits for one in seen[200:]])
    assert abs(excess.mean()) < 0.1


def test_a_fault_among_states_is_found():
    """A line that goes round, with a step left out now and then; for 20 rows it goes backwards."""
    rng = np.random.default_rng(3)
    steps = np.where(rng.random(12_000) < 0.03, 2, 1)
    steps[9000:9020] = -1
    states = ["abcdefgh"[at % 8] for at in steps.cumsum()]
    states[9500] = "acid"
    found = seqmix.surprise(states, models=QUICK, false_alarms="1/1000rows")
    late = [event for event in found.events if event.start > 9000]
    assert 9001 <= late[0].start <= late[0].end <= 9021
    assert late[0].excess_bits > 5
    assert [event.start for event in late if event.value == "acid"] == [9501]
    assert len(found.events) <= 24


def test_a_fault_among_numbers_is_found():
    values = remembering(500, 5)
    values[400] += 12.0
    (event,) = seqmix.surprise(values, models=["autoregression"]).events
    assert event.start == 401
    assert event.value == values[400]
    assert event.p_value < 1e-4
    assert event.excess_bits > 10


# ---- the same in any chunks, and as the score


def logs() -> dict[str, tuple[Series, list[str]]]:
    numbers = remembering(90, 6)
    numbers[30] = numbers[31] = numbers[70] = float("nan")
    states: list[str | None] = list(chain(900, 6))
    states[300] = states[301] = None
    return {
        "states": (Series.of(states), [*QUICK, "match"]),
        "numbers": (Series.of(numbers), ["trend", "values"]),
        "bytes": (Series.of(b"milk and cream, " * 40), QUICK),
    }


@pytest.mark.parametrize("name", ["states", "numbers", "bytes"])
def test_any_chunks_give_the_same_rows(name):
    series, models = logs()[name]
    answers = []
    for size in (1, 7, 4096):
        mixture = mixture_for(series, None, models)
        watch = Watch(mixture, series, 0.01)
        answers.append(
            [
                one
                for rows in series.chunks()
                for at in range(0, len(rows), size)
                for one in watch.rows(rows[at : at + size])
            ]
        )
    assert answers[0] == answers[1] == answers[2]
    seen: list[SurpriseRow] = []
    seqmix.surprise(series, false_alarms="1/100rows", models=models, on_row=seen.append)
    assert seen == answers[0]


@pytest.mark.parametrize("name", ["states", "numbers", "bytes"])
def test_bits_are_those_of_the_score(name):
    series, models = logs()[name]
    seen: list[SurpriseRow] = []
    seqmix.surprise(series, models=models, on_row=seen.append)
    scored: dict[int, float] = {}

    def keep(rows: Rows, bits: np.ndarray) -> None:
        scored.update(zip(range(rows.first + 1, rows.first + len(rows) + 1), bits.tolist(), strict=True))

    seqmix.score(series, last="all", models=models, on_row=keep)
    assert {one.row: one.bits for one in seen} == {one.row: scored[one.row] for one in seen}
    present = sum(value == value for value in series.values) if name == "numbers" else int((series.codes >= 0).sum())
    assert len(seen) == present


def test_bits_expected_and_p_value_are_of_the_law_before_the_row():
    """Two states evenly, by counts alone: the law is known by hand."""
    seen: list[SurpriseRow] = []
    seqmix.surprise(["fill", "cap"] * 300, models=["memoryless"], on_row=seen.append)
    last = seen[-1]
    assert last.bits == pytest.approx(1.0, abs=0.05)
    assert last.expected_bits == pytest.approx(1.0, abs=0.05)
    assert not any(one.surprise for one in seen)


@pytest.mark.parametrize("values", [[], b"", [5.0] * 50, [1e300] * 20, [2e9, 2.1e9] * 9, ["fill"], [float("nan")] * 20])
def test_odd_logs_have_no_event(values):
    found = seqmix.surprise(values, kind="numbers") if values == [] else seqmix.surprise(values)
    assert found.events == []
    assert found.rows == sum(value == value for value in values)


def test_numbers_written_with_all_their_digits_are_no_surprise():
    """Their cells are as narrow as floats can be."""
    found = [seqmix.surprise(np.random.default_rng(seed).normal(size=100).tolist()) for seed in range(3)]
    assert sum(one.surprising for one in found) <= 1
