"""Where a log changed its ways: the runs against brute force, any chunks, and what odd logs are answered."""

from __future__ import annotations

from collections.abc import Callable
from math import log2

import numpy as np
import pytest
from scipy import stats
from scipy.signal import lfilter

import seqmix
from seqmix.errors import OptionError
from seqmix.number_runs import MEAN_ROWS, OUTLIERS, SHAPE, NumberWays
from seqmix.runs import BORNE_OUT, KEPT, MOST, Runs
from seqmix.shifting import _Search
from seqmix.state_runs import StateWays

NAN = float("nan")


class Heads:
    """A coin of unknown bias, with an even prior: one explanation, all by counts."""

    prior = np.ones(1)
    borne_out = BORNE_OUT

    def __init__(self) -> None:
        self.counts = np.zeros((MOST, 2))
        self.side = 0

    def anew(self) -> bool:
        return False

    def ready(self, value: float) -> bool:
        return True

    def begin(self, run: int, running: int) -> None:
        self.counts[run] = 1.0

    def losses(self, value: float, runs: int) -> np.ndarray:
        self.side = int(value)
        return -np.log2(self.counts[:runs, self.side] / self.counts[:runs].sum(axis=1))[:, None]

    def learn(self, runs: int) -> None:
        self.counts[:runs, self.side] += 1.0

    def keep(self, which: np.ndarray) -> None:
        self.counts[: len(which)] = self.counts[which]

    def level(self, run: int) -> None:
        return None


def coin_bits(sides: np.ndarray) -> float:
    heads = int(sides.sum())
    return float(-stats.betabinom.logpmf(heads, len(sides), 1, 1) + np.log(stats.binom.pmf(heads, len(sides), 0.5))
                 + len(sides) * np.log(2)) / np.log(2)  # fmt: skip


def test_odds_are_those_of_every_start_reckoned_by_itself():
    sides = (np.random.default_rng(5).random(80) < np.where(np.arange(80) < 50, 0.3, 0.8)).astype(int)
    runs = Runs(Heads(), 1e30)
    runs.absorb(-1, 0.0)  # only tells that all is ready: the running run begins with row 0
    for row, side in enumerate(sides.tolist()):
        assert runs.absorb(row, side) is None
        seen = sides[: row + 1]
        gains = [
            coin_bits(seen) - coin_bits(seen[:start]) - coin_bits(seen[start:]) + 3 * log2(min(start / KEPT, 1))
            for start in range(1, row + 2 - BORNE_OUT)
        ]
        expected = sum(2.0**gain for gain in gains) / max(row, 1)
        assert runs.odds == pytest.approx(expected, rel=1e-9)
    assert runs.odds > 1


def test_a_shift_is_declared_at_the_first_row_that_reaches_the_odds():
    sides = [0] * 40 + [1] * 20
    quiet, runs = Runs(Heads(), 1e30), Runs(Heads(), 50.0)
    for search in (quiet, runs):
        search.absorb(-1, 0.0)
    odds = []
    for row, side in enumerate(sides):
        quiet.absorb(row, side)
        odds.append(quiet.odds)
        found = runs.absorb(row, side)
        if found is not None:
            break
    assert found is not None
    assert (found.start, found.known) == (40, 44)  # four rows alone could be an exception
    assert found.odds == odds[-1] > 50.0
    assert min(runs.starts()) == 40


def test_level_of_numbers_is_a_student_law_with_a_broad_part():
    values = np.random.default_rng(7).normal(3.0, 1.0, 30)
    ways = NumberWays()
    begun = [ways.ready(value) for value in values[:4].tolist()]
    assert begun == [False, False, False, True]
    ways.begin(0, 0)
    first, centre = values[1:4].var(), values[1:4].mean()
    rest = values[4:]
    for t, value in enumerate(rest.tolist()):
        if t == 10:
            ways.begin(1, 0)
            level, shape, rate = posterior(rest[:10], centre, first)
            fresh = level, rate / shape
        runs = 2 if t >= 10 else 1
        bits = ways.losses(value, runs)[:, 0]
        prior = [(centre, first, rest[:t]), *([(*fresh, rest[10:t])] if t >= 10 else [])]
        # the broad part is that of the last beginning's running run, as it stands
        mean, shape, rate = posterior(rest[:t], centre, first)
        broad = stats.cauchy.pdf(value, mean, 2.0 * np.sqrt(rate / shape))
        for run, (start, variance, seen) in enumerate(prior):
            mean, shape, rate = posterior(seen, start, variance)
            rows = MEAN_ROWS + len(seen)
            law = stats.t.pdf(value, 2 * shape, mean, np.sqrt(rate * (rows + 1) / (rows * shape)))
            assert bits[run] == pytest.approx(-log2((1 - OUTLIERS) * law + OUTLIERS * broad), rel=1e-9)
        ways.learn(runs)
    assert ways.level(1) == pytest.approx(rest[10:].mean())


def posterior(seen: np.ndarray, centre: float, variance: float) -> tuple[float, float, float]:
    """Mean, shape and rate of the normal-gamma law after rows, all at once."""
    n = len(seen)
    mean = (MEAN_ROWS * centre + seen.sum()) / (MEAN_ROWS + n)
    if not n:
        return mean, SHAPE, SHAPE * variance
    between = MEAN_ROWS * n * (seen.mean() - centre) ** 2 / (MEAN_ROWS + n)
    return mean, SHAPE + n / 2, SHAPE * variance + 0.5 * (n * seen.var() + between)


def test_odds_of_states_are_counts():
    ways = StateWays()
    for code in (0, 1):
        ways.ready(code)
    ways.begin(0, 0)
    counts = np.array([0.5, 0.5])
    for code in (0, 0, 1, 0):
        expected = (1 - 0.01) * counts[code] / counts.sum() + 0.01 / 2
        assert ways.losses(code, 1)[0, 0] == pytest.approx(-log2(expected))
        ways.learn(1)
        counts[code] += 1
    assert ways.losses(2, 1).tolist() == [[0.0] * 8]  # new: an event that tells no run from another


def logs() -> list[seqmix.Series]:
    rng = np.random.default_rng(11)
    numbers = np.concatenate([rng.normal(size=150), rng.normal(size=150) + 3]).round(1)
    numbers[[20, 21, 160]] = NAN
    states = ["wash" if x > 1.5 else "rinse" if x > 0 else "drain" for x in numbers]
    return [
        seqmix.Series.of(numbers.tolist()),
        seqmix.Series.of(states),
        seqmix.Series.of(b"milk" * 40 + b"lye!!" * 30),
    ]


@pytest.mark.parametrize("which", range(3))
def test_any_chunks_give_the_same_shifts(which):
    series = logs()[which]
    answers = []
    for size in (1, 7, 4096):
        search = _Search(series, 100.0, None, None)
        found = []
        for rows in series.chunks():
            for at in range(0, len(rows), size):
                found += [shift for shift, _ in search.absorb(rows[at : at + size])]
        answers.append((found, search.runs.odds))
    assert answers[0] == answers[1] == answers[2]
    assert answers[0][0]


def test_missing_rows_cost_and_teach_nothing():
    numbers = np.random.default_rng(3).normal(size=120)
    numbers[60:] += 3
    holes = np.insert(numbers, [30, 90], NAN)
    plain, holed = (seqmix.shifts(values.tolist()) for values in (numbers, holes))
    assert [shift.row for shift in plain.shifts] == [61]
    assert [shift.row for shift in holed.shifts] == [62]
    assert holed.odds == plain.odds
    assert holed.shifts[0].evidence_bits == plain.shifts[0].evidence_bits


def test_levels_and_a_higher_bar():
    numbers = np.random.default_rng(3).normal(size=120)
    numbers[60:] += 3
    low, high = (seqmix.shifts(numbers.tolist(), odds).shifts[0] for odds in (10, 10_000))
    assert low.known_row < high.known_row
    assert high.level_before == pytest.approx(numbers[4 : high.known_row].mean())
    assert high.level_after == pytest.approx(numbers[60 : high.known_row].mean())


STEADY: dict[str, Callable[[np.random.Generator], np.ndarray]] = {
    "normal": lambda rng: rng.normal(size=600),
    "autoregression 0.9": lambda rng: lfilter([1], [1, -0.9], rng.normal(size=600)),
    "autoregression 0.6": lambda rng: lfilter([1], [1, -0.6], rng.normal(size=600)),
    "random walk": lambda rng: rng.normal(size=600).cumsum(),
    "wandering level": lambda rng: 0.1 * rng.normal(size=600).cumsum() + rng.normal(size=600),
    "heavy tails": lambda rng: rng.standard_t(3, size=600),
    "lognormal": lambda rng: np.exp(rng.normal(size=600)),
    "counts": lambda rng: rng.poisson(3, size=600),
    "week": lambda rng: np.tile([4, 3, 5, 4, 6, 0, 1], 100)[:600] + rng.normal(size=600),
}


@pytest.mark.parametrize("name", STEADY)
def test_steady_logs_have_no_shift(name):
    period = 7 if name == "week" else None
    logs = [STEADY[name](np.random.default_rng(seed)).astype(float).tolist() for seed in range(4)]
    found = [bool(seqmix.shifts(log, period=period, models=["trend"]).shifts) for log in logs]
    assert sum(found) <= (name == "wandering level"), found  # a quiet stretch of it looks like a level that stays


def test_steady_states_hardly_have_a_shift():
    limits = np.cumsum([[0.1, 0.8, 0.1], [0.2, 0.2, 0.6], [0.7, 0.1, 0.2]], axis=1)
    found = []
    for seed in range(5):
        states = [0]
        for chance in np.random.default_rng(seed).random(600):
            states.append(int((chance > limits[states[-1]]).sum()))
        names = [("fill", "cap", "label")[state] for state in states]
        found.append(bool(seqmix.shifts(names, models=["memoryless"]).shifts))
    assert sum(found) <= 1, found
    text = np.random.default_rng(1).integers(0, 256, 600).astype(np.uint8).tobytes()
    assert seqmix.shifts(text, models=["memoryless"]).shifts == []


def test_a_large_shift_is_found_even_where_the_old_ways_were_new():
    for seed in range(3):
        values = np.random.default_rng(seed).normal(size=80)
        values[14:] += 6
        assert [shift.row for shift in seqmix.shifts(values.tolist(), models=["trend"]).shifts] == [15]


@pytest.mark.parametrize(
    "values",
    [[], [3.0], [5.0] * 100, [1e300] * 20, [1e300, -1e300] * 20, [1e-300, 1e300] * 20, [NAN] * 20, [0.0] * 20,
     ["fill"], ["fill"] * 100, b"", b"\0" * 100],
)  # fmt: skip
def test_odd_logs_have_no_shift(values):
    kind = "numbers" if values == [] else None
    found = seqmix.shifts(values, kind=kind) if kind else seqmix.shifts(values)
    assert (found.shifts, found.rows) == ([], len(values))
    assert 0.0 <= found.odds < 100.0


def test_more_states_than_contexts_and_more_runs_than_room():
    rng = np.random.default_rng(2)
    states = [f"P{code}" for code in [*range(70), *rng.integers(0, 70, 400), *rng.integers(0, 7, 100)]]
    found = seqmix.shifts(states, models=["memoryless"]).shifts
    assert [abs(shift.row - 471) < 10 for shift in found] == [True]


@pytest.mark.parametrize("odds", [1.0, 0.0, -5.0, NAN, float("inf")])
def test_odds_are_above_one(odds):
    with pytest.raises(OptionError, match="odds at which a shift is declared are above 1"):
        seqmix.shifts([1.0, 2.0], odds)
