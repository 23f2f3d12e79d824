"""Trend and season: what dynamic linear models must do beyond the contract."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest

from seqmix.models.laws import NumberLaw
from seqmix.models.numbers import FIRST
from seqmix.models.protocol import Context
from seqmix.models.trend import Season, Trend
from seqmix.series.rows import Rows


def rows_of(values: object, width: float = 0.1) -> Rows:
    held = np.asarray(values, dtype=np.float64)
    rows = Rows.of(held, None, 0)
    rows.cells = np.full(len(held), width)
    return rows


def season(n: int = 120, seed: int = 2) -> np.ndarray:
    rng = np.random.default_rng(seed)
    wave = np.tile([5.0, 9.0, 2.0, -1.0, 0.0, 3.0], n // 6 + 1)[:n]
    return np.round(40 + 0.2 * np.arange(n) + wave + rng.normal(size=n), 1)


def spread(law: NumberLaw) -> float:
    low, high = law.quantile([0.1, 0.9])
    return float(high - low)


def blank(kind: type[Trend]) -> Trend:
    return Season(Context((6,))) if kind is Season else Trend(Context())


@pytest.mark.parametrize("kind", [Trend, Season])
class TestBoth:
    def test_missing_rows_cost_nothing_and_widen_the_law(self, kind: type[Trend]) -> None:
        model = blank(kind)
        model.absorb(rows_of(season()))
        law = model.predict()
        assert law is not None
        before = spread(law)
        for _ in range(4):
            assert model.absorb(rows_of(np.full(6, np.nan))).tolist() == [0.0] * 6
            law = model.predict()
            assert law is not None
            assert spread(law) > before
            before = spread(law)

    def test_missing_rows_are_steps_of_time(self, kind: type[Trend]) -> None:
        """The law after k missing rows is the law of k + 1 steps ahead before them."""
        one, other = blank(kind), blank(kind)
        for model in (one, other):
            model.absorb(rows_of(season()[:100]))
        ahead = one.walk(6, 0)
        other.absorb(rows_of(np.full(5, np.nan)))
        law = other.predict()
        assert ahead is not None
        assert law is not None
        levels = np.array([0.1, 0.5, 0.9])
        # of steps ahead, the settings of the last thousandth are left out
        np.testing.assert_allclose(ahead[5].quantile(levels), law.quantile(levels), rtol=1e-2)

    def test_paths_follow_the_laws_of_the_walk(self, kind: type[Trend]) -> None:
        model = blank(kind)
        model.absorb(rows_of(season()))
        ahead = model.walk(12, 0)
        drawn = model.sample(12, 20_000, np.random.default_rng(3))
        assert ahead is not None
        assert drawn.shape == (20_000, 12)
        for step, law in enumerate(ahead):
            spots = law.quantile([0.05, 0.25, 0.5, 0.75, 0.95])
            shares = (drawn[:, step, None] <= spots).mean(axis=0)
            np.testing.assert_allclose(shares, [0.05, 0.25, 0.5, 0.75, 0.95], atol=0.015)

    def test_what_is_dropped_depends_on_row_numbers_alone(self, kind: type[Trend]) -> None:
        values = season(300)
        whole = blank(kind)
        whole.absorb(rows_of(values))
        for cuts in ([1, 2, 15, 17], [16, 32, 64], [100]):
            model = blank(kind)
            for a, b in pairwise([0, *cuts, 300]):
                model.absorb(rows_of(values[a:b]))
            assert model.alive.tolist() == whole.alive.tolist()
            for name in ("mean", "cov", "squares", "pairs"):
                assert np.array_equal(getattr(model, name), getattr(whole, name))

    def test_settings_are_dropped_and_the_leading_one_stays(self, kind: type[Trend]) -> None:
        model = blank(kind)
        counts = [len(model.alive)]
        for start in range(0, 600, 15):
            model.absorb(rows_of(season(600)[start : start + 15]))
            label = model.setting()
            counts.append(len(model.alive))
            assert label == model._label(int(model.alive[int(np.argmax(model._weights.now()))]))
        assert (np.diff(counts) <= 0).all()
        assert counts[-1] <= 48
        assert len(model._weights.now()) == counts[-1]

    def test_frozen_rows_drop_nothing(self, kind: type[Trend]) -> None:
        model = blank(kind)
        model.absorb(rows_of(season()[:60]))
        alive = len(model.alive)
        model.absorb(rows_of(season(600)[60:600]), frozen=True)
        assert len(model.alive) == alive

    def test_a_missing_first_row_changes_nothing_but_the_row_numbers(self, kind: type[Trend]) -> None:
        if kind is Trend:
            late = rows_of(np.concatenate([[np.nan] * 7, season()[:9]]))
            one, other = blank(kind), blank(kind)
            assert one.absorb(late)[7:].tolist() == other.absorb(rows_of(season()[:9])).tolist()
        model = blank(kind)
        assert model.absorb(rows_of([np.nan] * 20)).tolist() == [0.0] * 20
        assert model.predict() is FIRST

    def test_units_do_not_matter(self, kind: type[Trend]) -> None:
        """From the third row on, a log in other units has the same bits."""
        values = season()
        plain, scaled = blank(kind).absorb(rows_of(values)), blank(kind).absorb(rows_of(values * 1024.0, 102.4))
        np.testing.assert_allclose(plain[2:], scaled[2:], rtol=1e-6, atol=1e-6)

    def test_negative_values_leave_the_log_scale(self, kind: type[Trend]) -> None:
        model = blank(kind)
        model.absorb(rows_of(season()[:100]))
        model.absorb(rows_of([-3.0]))
        laws = model.walk(3, 0)
        assert laws is not None
        for law in laws:
            assert law.weights[law.logs].sum() < 2e-3  # fixed share hands back so much in a row to all settings


def test_a_straight_line_goes_on() -> None:
    model = Trend(Context())
    model.absorb(rows_of(3.0 + 0.5 * np.arange(40)))
    laws = model.walk(10, 0)
    assert laws is not None
    np.testing.assert_allclose([law.median for law in laws], 3.0 + 0.5 * np.arange(40, 50), atol=0.1)
    assert "trend" in model.setting()


def test_growth_goes_on_on_the_log_scale() -> None:
    values = np.round(100 * 1.03 ** np.arange(80) * np.exp(0.01 * np.random.default_rng(1).normal(size=80)), 1)
    model = Trend(Context())
    model.absorb(rows_of(values))
    assert model.setting().endswith("log scale")
    laws = model.walk(20, 0)
    assert laws is not None
    assert laws[19].median == pytest.approx(100 * 1.03**99, rel=0.05)


def test_a_season_is_found_and_repeats() -> None:
    model = Season(Context((6,)))
    model.absorb(rows_of(season()))
    laws = model.walk(12, 0)
    assert laws is not None
    came = 40 + 0.2 * np.arange(120, 132) + np.tile([5.0, 9.0, 2.0, -1.0, 0.0, 3.0], 2)
    np.testing.assert_allclose([law.median for law in laws], came, atol=1.5)


def test_a_season_takes_the_shortest_period_that_is_not_too_long() -> None:
    assert Season(Context((168, 24, 7))).period == 7
    assert Season(Context((168, 24))).period == 24
    assert not Season.fits(Context((168, 144)))
    assert not Season.fits(Context((1,)))
    assert not Season.fits(Context())


def test_seasonal_effects_keep_adding_to_nothing() -> None:
    model = Season(Context((6,)))
    model.absorb(rows_of(season(3000)))
    assert np.abs(model.mean[:, :, 2:].sum(axis=2)).max() < 1e-6
    assert np.abs(model.cov[:, 2:, 2:].sum(axis=2)).max() < 1e-6
    assert np.linalg.eigvalsh(model.cov).min() > -1e-9
