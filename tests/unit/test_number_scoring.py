"""Scores and forecasts of logs of numbers against brute force from the laws of single rows; and extreme logs."""

from __future__ import annotations

import copy
from itertools import pairwise

import numpy as np
import pytest

import seqmix
from seqmix import number_scoring
from seqmix.mixture.numbers import NumberMixture
from seqmix.models.calendar import HOUR
from seqmix.models.laws import NumberLaw
from seqmix.models.numbers import FIRST
from seqmix.models.protocol import Context
from seqmix.number_baselines import NumberBaseline, number_baselines
from seqmix.number_scoring import CENTRAL, PINBALL
from seqmix.series.rows import Rows

START = np.datetime64("2026-03-02T00:00", "us").astype(np.int64)  # a Monday


def log(rows: int = 90, seed: int = 1) -> np.ndarray:
    """Tank temperatures with a wave, some rows missing."""
    rng = np.random.default_rng(seed)
    values = 4 + np.sin(np.arange(rows) * np.pi / 12) + 0.3 * rng.normal(size=rows)
    values[[3, rows - 5, rows - 20]] = np.nan
    return np.round(values, 1)


def series(values: np.ndarray) -> seqmix.Series:
    return seqmix.Series.of(values, times=(START + HOUR * np.arange(len(values))).tolist())


def mixture(models: list[str] | None = None) -> NumberMixture:
    return NumberMixture(models, context=Context((24, 168), HOUR, True))


def measures(laws: list[tuple[NumberLaw, float, float]]) -> dict[str, float]:
    """Of laws, values and the widths of their cells: each measure by its definition, one row after the other."""
    sums = dict.fromkeys(("mae", "square", "crps", "pinball", *map(str, CENTRAL)), 0.0)
    for law, value, width in laws:
        median = float(law.quantile(0.5))
        sums["mae"] += abs(value - median)
        sums["square"] += (value - median) ** 2
        sums["crps"] += law.crps(value)
        for level in PINBALL:
            spot = float(law.quantile(level))
            loss = level * (value - spot) if value >= spot else (1 - level) * (spot - value)
            sums["pinball"] += loss / len(PINBALL)
        for share in CENTRAL:
            low, high = law.quantile([(1 - share) / 2, (1 + share) / 2])
            overlap = min(float(high), value + width / 2) - max(float(low), value - width / 2)
            sums[str(share)] += min(max(overlap / width, 0.0), 1.0)
    means = {name: total / len(laws) for name, total in sums.items()}
    return {**means, "rmse": means["square"] ** 0.5}


def agrees(found: dict[str, object], expected: dict[str, float]) -> None:
    """rel: laws of a score leave out their lightest ten-thousandth."""
    for name in ("mae", "rmse", "crps", "pinball"):
        assert found[name] == pytest.approx(expected[name], rel=0.01), name
    assert found["coverage"] == pytest.approx({f"{share:g}": expected[str(share)] for share in CENTRAL}, abs=0.02)


class TestAgainstBruteForce:
    def test_measures_and_bits(self) -> None:
        values, scored = log(), 26
        one, laws, bits, tenths = mixture(), [], [], np.zeros(10)
        rows = next(iter(series(values).chunks()))
        one.absorb(rows[: len(values) - scored])
        for t in range(len(values) - scored, len(values)):
            assert rows.times is not None
            law = one.predict(int(rows.times[t]))
            bits.append(float(one.absorb(rows[t : t + 1])[0]))
            if not np.isnan(values[t]):
                laws.append((law, float(values[t]), 0.1))
                low, high = law.cdf([values[t] - 0.05, values[t] + 0.05])
                tenths[int(10 * (low + high) / 2)] += 1
                grid = bits[-1] - law.bits(float(values[t]), 0.1)  # that the row needs no finer one
                assert 0 < grid < 0.06
        each: list[float] = []
        score = seqmix.score(series(values), last=scored, on_row=lambda rows, losses: each.extend(losses.tolist()))
        assert score.rows == score.law_rows == len(laws) == scored - 2
        assert each == pytest.approx(bits, abs=1e-9)
        assert score.bits == pytest.approx(sum(bits), abs=1e-9)
        assert score.bits_per_row == pytest.approx(score.bits / score.rows)
        agrees(vars(score), measures(laws))
        assert np.abs(np.array(score.pit) - tenths).sum() <= 2
        assert sum(score.pit) == score.rows
        assert score.record()["mae"] == score.mae
        assert "ahead" not in score.record()

    def test_steps_ahead_from_a_moving_origin(self) -> None:
        values, scored, steps = log(), 14, 3
        one = mixture(["trend", "autoregression"])
        rows = next(iter(series(values).chunks()))
        assert rows.times is not None
        one.absorb(rows[: len(values) - scored])
        laws: list[list[tuple[NumberLaw, float, float]]] = [[] for _ in range(steps)]
        for t in range(len(values) - scored, len(values)):
            times = [int(rows.times[t]) + HOUR * step for step in range(steps)]
            for step, law in enumerate(one.walk(steps, times)):
                if t + step < len(values) and not np.isnan(values[t + step]):
                    laws[step].append((law, float(values[t + step]), 0.1))
            one.absorb(rows[t : t + 1])
        score = seqmix.score(series(values), last=scored, steps=steps, models=["trend", "autoregression"])
        assert [ahead["step"] for ahead in score.ahead] == [1, 2, 3]
        for ahead, some in zip(score.ahead, laws, strict=True):
            assert ahead["rows"] == len(some)
            agrees(ahead, measures(some))
        assert score.record()["ahead"] == score.ahead
        # without the steps, all the rest is the same
        plain = seqmix.score(series(values), last=scored, models=["trend", "autoregression"]).record()
        assert {**score.record(), "ahead": 0} == {**plain, "ahead": 0}

    def test_later_rows_are_looked_at_now_and_then_and_stand_for_those_between(
        self, monkeypatch: pytest.MonkeyPatch
    ) -> None:
        monkeypatch.setattr(number_scoring, "LAWS_ASKED", 20)
        rng = np.random.default_rng(5)
        values = np.round(rng.normal(size=60).cumsum(), 1)
        one = mixture(["trend"])
        error, weights = 0.0, 0
        for t in range(60):
            stride = 1 if t < 20 else 2 if t < 40 else 4
            if t % stride == 0:
                error += stride * abs(values[t] - one.predict().median)
                weights += stride
            one.absorb(values[t : t + 1])
        score = seqmix.score(values, last="all", models=["trend"], period=[24, 168], steps=2)
        assert score.law_rows == 20 + 10 + 5
        assert weights == sum(score.pit) == score.rows == 60
        assert score.mae == pytest.approx(error / weights, rel=1e-3)
        assert [ahead["rows"] for ahead in score.ahead] == [35, 35]
        assert score.ahead[0]["mae"] == pytest.approx(score.mae, rel=0.01)
        assert score.ahead[1]["mae"] > score.mae

    def test_regret_and_bound(self) -> None:
        score = seqmix.score(series(log(120)), last=30)
        bits = {model["name"]: model["bits"] for model in score.models}
        assert score.best_model == min(bits, key=lambda name: bits[name])
        assert score.regret_bits == pytest.approx(score.bits - min(bits.values()))
        assert score.bound_bits is not None
        assert score.regret_bits <= score.bound_bits + 1e-6

    def test_frozen_weights_and_a_log_of_missing_rows(self) -> None:
        score = seqmix.score(series(log(60)), last=20, frozen=True)
        assert score.bound_bits is None
        assert all(model["weight_before"] == model["weight_after"] for model in score.models)
        empty = seqmix.score(seqmix.Series.of([float("nan")] * 20), last="all")
        assert (empty.rows, empty.bits, empty.mae, empty.coverage, empty.best_model) == (0, 0.0, None, None, None)
        assert sum(empty.pit) == 0

    def test_intervals_of_a_known_law_hold(self) -> None:
        """Normal noise around nothing: coverage as stated, flat PIT, CRPS and MAE of the normal law."""
        values = np.round(10 * np.random.default_rng(3).normal(size=700), 1)
        score = seqmix.score(values, last=400, models=["trend"])
        assert score.coverage == pytest.approx({"0.5": 0.5, "0.8": 0.8, "0.9": 0.9}, abs=0.07)
        assert score.mae == pytest.approx(10 * np.sqrt(2 / np.pi), rel=0.1)
        assert score.rmse == pytest.approx(10, rel=0.1)
        assert score.crps == pytest.approx(10 / np.sqrt(np.pi), rel=0.1)
        assert min(score.pit) > 20
        assert score.bits_per_row == pytest.approx(np.log2(100) + 0.5 * np.log2(2 * np.pi * np.e), abs=0.15)


@pytest.mark.parametrize("size", [1e-120, 1e250])
def test_measures_are_in_the_unit_of_the_log(size: float) -> None:
    """The models see numbers so far from 1 times a power of two."""
    score = seqmix.score((size * np.random.default_rng(3).normal(size=400)).tolist(), last=200, models=["trend"])
    assert score.coverage == pytest.approx({"0.5": 0.5, "0.8": 0.8, "0.9": 0.9}, abs=0.1)
    assert score.mae == pytest.approx(size * np.sqrt(2 / np.pi), rel=0.15)
    assert score.crps == pytest.approx(size / np.sqrt(np.pi), rel=0.15)


# ---- baselines ---------------------------------------------------------------------------------------------


def cells_of(values: np.ndarray, width: float = 0.1) -> Rows:
    rows = Rows.of(values, None, 0)
    rows.cells = np.full(len(values), width)
    return rows


def guess(name: str, before: np.ndarray) -> float:
    """What a baseline foretells from the rows before (NaN where missing)."""
    there = before[~np.isnan(before)]
    if name == "mean so far":
        return float(there.mean())
    first = int(np.flatnonzero(~np.isnan(before))[0])
    filled = before[first:].copy()
    for t in range(1, len(filled)):
        filled[t] = filled[t - 1] if np.isnan(filled[t]) else filled[t]
    back = 24 if name == "value 24 rows ago" else 1
    return float(filled[-back] if len(filled) >= back else filled[-1])


BASELINES = ["last value", "value 24 rows ago", "mean so far"]


def blank(name: str) -> NumberBaseline:
    return next(one for one in number_baselines((7, 24)) if one.name == name)


def test_names_of_the_baselines() -> None:
    assert [one.name for one in number_baselines((7, 24))] == BASELINES
    assert [one.name for one in number_baselines(())] == ["last value", "mean so far"]


@pytest.mark.parametrize("name", BASELINES)
class TestBaselines:
    def test_the_loss_is_that_of_a_law_around_the_guess(self, name: str) -> None:
        values = log(120)
        values[0] = np.nan
        one = blank(name)
        for t in range(len(values)):
            before = values[:t]
            if (~np.isnan(before)).sum() >= 2:
                law = one._errors.law(guess(name, before), one._errors.weights[0])
                assert law.weights.sum() == pytest.approx(1)
                assert (law.weights > 0).all()
                expected = law.bits(float(values[t]), 0.1)
            elif (~np.isnan(before)).sum() == 1:
                first = float(before[~np.isnan(before)][0])
                expected = NumberLaw.of(first, 0.1 * abs(first), 1.0).bits(float(values[t]), 0.1)
            else:
                expected = FIRST.bits(float(values[t]), 0.1)
            found = float(one.absorb(cells_of(values[t : t + 1]))[0])
            assert found == (0.0 if np.isnan(values[t]) else pytest.approx(expected, abs=1e-9))

    def test_masses_over_all_cells_add_to_one(self, name: str) -> None:
        one = blank(name)
        one.absorb(cells_of(log(60)))
        points = np.round(np.arange(-4000, 4001) * 0.1, 1)
        law = one._errors.law(guess(name, log(60)), one._errors.weights[0])
        inside = 0.0
        for x in points.tolist():
            inside += 2.0 ** -law.bits(x, 0.1)
        beyond = float(law.cdf(-400.05) + 1 - law.cdf(400.05))
        assert inside + beyond == pytest.approx(1, abs=1e-9)
        for x in (3.1, 4.0, -17.0, 250.0):  # and that is what a row is charged
            bits = copy.deepcopy(one).absorb(cells_of(np.array([x])))
            assert float(bits[0]) == pytest.approx(law.bits(x, 0.1), abs=1e-9)

    def test_any_chunking_gives_equal_bits(self, name: str) -> None:
        values = log(300)
        values[:2] = np.nan
        rows = cells_of(values)
        expected = blank(name).absorb(rows)
        for cuts in ([1, 2, 3, 4, 5], [23, 24, 25, 26, 200], list(range(10, 300, 10))):
            one = blank(name)
            pieces = [one.absorb(rows[a:b]) for a, b in pairwise([0, *cuts, 300])]
            assert np.concatenate(pieces).tolist() == expected.tolist()


def test_a_better_guess_loses_less() -> None:
    rng = np.random.default_rng(2)
    walk = np.round(rng.normal(size=800).cumsum(), 1)
    noise = np.round(rng.normal(size=800), 1)
    wave = np.round(20 * np.sin(np.arange(800) * np.pi / 12) + 0.3 * rng.normal(size=800), 1)
    for values, best in ((walk, "last value"), (noise, "mean so far"), (wave, "value 24 rows ago")):
        bits = {name: float(blank(name).absorb(cells_of(values)).sum()) for name in BASELINES}
        assert min(bits, key=lambda name: bits[name]) == best


# ---- thresholds --------------------------------------------------------------------------------------------


@pytest.mark.parametrize("kind", ["fine", "coarse"])
def test_thresholds_against_paths_drawn_by_hand(kind: str) -> None:
    """A threshold is over or under for a recorded value, so a value on the threshold is neither."""
    rng = np.random.default_rng(4)
    values = np.round(rng.normal(size=150).cumsum(), 1) if kind == "fine" else rng.poisson(4, 150).astype(float)
    half = 0.05 if kind == "fine" else 0.5
    last = float(values[-1])
    above, below = [last, last + 2, last + 60], [last, last - 3]
    forecast = seqmix.forecast(values, steps=6, above=above, below=below)
    one = NumberMixture()
    one.absorb(values)
    paths = one.sample(6, 20_000, np.random.default_rng(9))
    for x in above:
        name = f"{x:.15g}"
        for step, law in zip(forecast.steps, forecast.laws, strict=True):
            assert step.above[name] == pytest.approx(float(1 - law.cdf(x + half)), abs=1e-12)
            assert step.above[name] == pytest.approx((paths[:, step.step - 1] > x + half).mean(), abs=0.06)
        assert forecast.ever_above[name] == pytest.approx((paths > x + half).any(axis=1).mean(), abs=0.03)
        assert forecast.ever_above[name] >= max(step.above[name] for step in forecast.steps) - 0.06
    for x in below:
        name = f"{x:.15g}"
        for step in forecast.steps:
            assert step.below[name] == pytest.approx((paths[:, step.step - 1] < x - half).mean(), abs=0.06)
        assert forecast.ever_below[name] == pytest.approx((paths < x - half).any(axis=1).mean(), abs=0.03)


def test_with_one_step_ahead_ever_is_now() -> None:
    values = np.random.default_rng(4).poisson(4, 150)
    forecast = seqmix.forecast(values, steps=1, above=[2, 4, 6], below=[3, 5])
    for name, chance in forecast.steps[0].above.items():
        assert forecast.ever_above[name] == pytest.approx(chance, abs=0.03)
    for name, chance in forecast.steps[0].below.items():
        assert forecast.ever_below[name] == pytest.approx(chance, abs=0.03)
    known = 1 - np.exp(-4) * (1 + 4 + 8 + 64 / 6 + 256 / 24)
    assert forecast.steps[0].above["4"] == pytest.approx(known, abs=0.1)


def test_over_under_and_on_a_threshold_add_to_one() -> None:
    values = np.random.default_rng(4).poisson(4, 150)
    forecast = seqmix.forecast(values, steps=3, above=4, below=4)
    for step, law in zip(forecast.steps, forecast.laws, strict=True):
        on = 2 ** -law.bits(4.0, 1.0)
        assert step.above["4"] + step.below["4"] + on == pytest.approx(1, abs=1e-3)


# ---- extreme logs ------------------------------------------------------------------------------------------


def extreme() -> dict[str, np.ndarray]:
    rng = np.random.default_rng(6)
    n = 70
    walk = np.round(rng.normal(size=n).cumsum(), 2)
    turn = np.arange(n) % 2
    return {
        "1e300": walk * 1e298,
        "1e-300": walk * 1e-300,
        "positive 1e300": (20 + walk) * 1e298,
        "positive 1e-300": (20 + walk) * 1e-300,
        "from -1e300 to 1e300": np.where(turn, 1e300, -1e300),
        "from 1e-300 to 1e300": np.where(turn, 1e300, 1e-300),
        "the largest floats": np.where(turn, 1.7e308, -1.7e308),
        "the smallest floats": np.full(n, 5e-324),
        "tiny steps": 1e6 + 1e-12 * rng.integers(0, 9, n),
        "small steps": 1e6 + 1e-9 * rng.integers(0, 9, n),
        "negative": -100 + walk,
        "all equal": np.full(n, 4.2),
        "all 0": np.zeros(n),
        "two values": rng.integers(0, 2, n) * 3.5 + 1,
        "0 and 1": rng.integers(0, 2, n).astype(float),
        "one row": walk[:1],
        "two rows": walk[:2],
        "two equal rows": np.array([7.0, 7.0]),
        "eight rows": walk[:8],
        "nine rows": walk[:9],
        "all missing": np.full(n, np.nan),
        "missing first": np.concatenate([[np.nan], walk]),
        "missing last": np.concatenate([walk, [np.nan] * 20]),
        "mostly missing": np.where(np.arange(n) % 10, np.nan, walk),
        "huge outlier": np.where(np.arange(n) == 40, 1e12, walk),
        "outlier of 1e300": np.where(np.arange(n) == 40, 1e300, walk),
        "outlier in the last row": np.concatenate([walk, [1e9]]),
        "all digits of doubles": rng.random(n) * 4096,
        "growth": np.exp(2.0 * np.arange(n)),
        "doubling": 2.0 ** np.arange(n),
        "decay": 1e6 * 0.5 ** np.arange(n),
    }


@pytest.mark.parametrize("name", extreme())
@pytest.mark.filterwarnings("error::RuntimeWarning")
class TestExtremeLogs:
    def test_bits_are_finite(self, name: str) -> None:
        bits = NumberMixture(context=Context((7,))).absorb(extreme()[name])
        assert np.isfinite(bits).all()
        assert (bits >= 0).all()

    def test_medians_and_quantiles_are_finite_and_sane(self, name: str) -> None:
        values = extreme()[name]
        forecast = seqmix.forecast(values.tolist(), steps=12)
        spots = np.array([forecast.quantile(level) for level in (0.1, 0.5, 0.9)])
        assert np.isfinite(spots).all()
        assert (np.diff(spots, axis=0) >= -1e-9 * np.abs(spots).max(axis=0)).all()
        seen = values[~np.isnan(values)]
        if len(seen) > 1 and name not in ("growth", "doubling"):
            low, high = seen.min(), seen.max()
            # three ranges beyond what was seen, as the guard of the autoregression has it; in eighths: never infinite
            reach = 3 * (high / 8 - low / 8) + 0.125 * forecast.resolution
            assert (spots[1] / 8 >= low / 8 - reach).all()
            assert (spots[1] / 8 <= high / 8 + reach).all()
        assert np.isfinite(forecast.paths(50)).all()
        for step in forecast.steps:
            assert step.mean is None or np.isfinite(step.mean)

    def test_scores_are_numbers(self, name: str) -> None:
        score = seqmix.score(extreme()[name].tolist(), last=4, steps=2)
        assert np.isfinite(score.bits)
        for measure in (score.mae, score.rmse, score.crps, score.pinball):
            assert measure is None or measure >= 0  # and no NaN; the square of 1e300 is infinite


def test_after_an_outlier_intervals_come_back() -> None:
    """A hundred rows after one wild value, the next ones are foretold from what is usual."""
    rng = np.random.default_rng(6)
    values = np.round(rng.normal(size=300), 1)
    values[150] = 1e6
    forecast = seqmix.forecast(values, steps=12)
    assert np.abs(forecast.median).max() < 3
    widths = forecast.quantile(0.9) - forecast.quantile(0.1)
    assert widths.max() < 30
