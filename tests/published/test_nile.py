"""Dynamic linear models and autoregressions against statsmodels, and against exact formulas of Bayesian regression.

The flow of the Nile and the local level model with variances 15,099 and 1,469 (log-likelihood -632.54): Durbin &
Koopman 2012, from memory; recomputed here by the Kalman filter of statsmodels. Conjugate laws: West & Harrison 1997,
chapters 2 and 4, from memory.
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
import pytest
import statsmodels.api as sm
from scipy import stats

from seqmix.models import trend
from seqmix.models.autoregression import FADING, WAKE, Autoregression
from seqmix.models.laws import NumberLaw
from seqmix.models.protocol import Context
from seqmix.models.trend import Trend
from seqmix.series.rows import Rows

VARIANCE, STEP = 15_099.0, 1_469.0
NILE = sm.datasets.nile.load_pandas().data["volume"].to_numpy(float)


@pytest.fixture
def one_setting(monkeypatch: pytest.MonkeyPatch) -> Iterator[list[float]]:
    """A bank of one setting: damping, and noise of level, trend and season; change it before a `Trend` is made."""
    setting = [0.0, 0.0, 0.0, 0.0]
    monkeypatch.setattr(trend, "_grid", lambda period: np.array([[*setting, 0.0]]))
    yield setting


def rows_of(values: np.ndarray, width: float = 1.0) -> Rows:
    rows = Rows.of(values, None, 0)
    rows.cells = np.full(len(values), width)
    return rows


def laws_of(model: Trend, values: np.ndarray) -> list[NumberLaw]:
    """The law before each row."""
    rows, laws = rows_of(values), []
    for t in range(len(values)):
        law = model.predict()
        assert law is not None
        laws.append(law)
        model.absorb(rows[t : t + 1])
    return laws


def means_and_variances(model: Trend, values: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Of the law of each row from the third on, on the plain scale; variances in units of the observation's."""
    rows = rows_of(values)
    model.absorb(rows[:2])
    means, variances = [], []
    for t in range(2, len(values)):
        law = model.predict()
        assert law is not None
        unit = model.squares[0, 0] / (model.observed - 1)
        means.append(law.centres[~law.logs][0])
        variances.append(law.scales[~law.logs][0] ** 2 / unit)
        model.absorb(rows[t : t + 1])
    return np.array(means), np.array(variances)


def test_local_level_of_the_nile(one_setting: list[float]) -> None:
    one_setting[1] = STEP / VARIANCE
    means, variances = means_and_variances(Trend(Context()), NILE)
    model = sm.tsa.UnobservedComponents(NILE, "llevel", use_exact_diffuse=True)
    diffuse = model.filter([VARIANCE, STEP])
    late = slice(20, None)  # the level starts vague here (10,000 observation variances), with no variance at all there
    np.testing.assert_allclose(means[late], diffuse.forecasts[0, 2:][late], rtol=1e-6)
    np.testing.assert_allclose(variances[late] * VARIANCE, diffuse.forecasts_error_cov[0, 0, 2:][late], rtol=1e-6)
    # the same start: all rows, to the last digits
    model.ssm.initialize_known(NILE[:1], np.array([[1e4 * VARIANCE]]))
    known = model.filter([VARIANCE, STEP])
    np.testing.assert_allclose(means, known.forecasts[0, 2:], rtol=1e-9)
    np.testing.assert_allclose(variances * VARIANCE, known.forecasts_error_cov[0, 0, 2:], rtol=1e-9)


def test_likelihood_of_the_nile(one_setting: list[float]) -> None:
    """With both variances known, from the means and variances of the bank's laws; the first row is given."""
    one_setting[1] = STEP / VARIANCE
    means, variances = means_and_variances(Trend(Context()), NILE)
    deviations = np.sqrt(VARIANCE * variances)
    second = stats.norm(NILE[0], np.sqrt(2 * VARIANCE + STEP)).logpdf(NILE[1])
    total = float(second + stats.norm(means, deviations).logpdf(NILE[2:]).sum())
    diffuse = sm.tsa.UnobservedComponents(NILE, "llevel", use_exact_diffuse=True).filter([VARIANCE, STEP])
    assert total == pytest.approx(diffuse.llf_obs[1:].sum(), abs=2e-3)
    assert total == pytest.approx(-632.54, abs=0.01)


def test_missing_rows_of_the_nile(one_setting: list[float]) -> None:
    one_setting[1] = STEP / VARIANCE
    values = NILE.copy()
    values[[25, 26, 27, 40, 99]] = np.nan
    means, variances = means_and_variances(Trend(Context()), values)
    model = sm.tsa.UnobservedComponents(values, "llevel")
    model.ssm.initialize_known(NILE[:1], np.array([[1e4 * VARIANCE]]))
    known = model.filter([VARIANCE, STEP])
    np.testing.assert_allclose(means, known.forecasts[0, 2:], rtol=1e-9)
    cov = known.filter_results.predicted_state_cov[0, 0, 2:100] + VARIANCE
    np.testing.assert_allclose(variances * VARIANCE, cov, rtol=1e-9)


def test_damped_trend_and_season_against_statsmodels(one_setting: list[float]) -> None:
    """All parts of the state at once, by a general Kalman filter with the same matrices."""
    damping, level, slope, season, period = 0.9, 0.2, 0.03, 0.05, 4
    one_setting[:] = [damping, level, slope, season]
    rng = np.random.default_rng(11)
    values = np.round(50 + rng.normal(size=80).cumsum() + np.tile([3.0, -1.0, 0.0, -2.0], 20), 1)
    values[[17, 50, 51]] = np.nan
    means, variances = means_and_variances(Trend(Context(), period), values)
    size = 2 + period
    ssm = sm.tsa.statespace.MLEModel(values, k_states=size, k_posdef=size).ssm
    ssm["design"] = np.zeros((1, size, len(values)))
    for t in range(len(values)):
        ssm["design", 0, 0, t] = ssm["design", 0, 2 + t % period, t] = 1.0
    even = np.eye(period) - 1.0 / period
    ssm["transition"] = np.eye(size)
    ssm["transition", 0, 1] = ssm["transition", 1, 1] = damping
    ssm["selection"] = np.eye(size)
    ssm["state_cov"] = np.diag([level, slope, *[0.0] * period])
    ssm["state_cov", 2:, 2:] = season * even
    ssm["obs_cov", 0, 0] = 1.0
    start = np.diag([1e4, 1.0, *[0.0] * period])
    start[2:, 2:] = 100.0 * even
    ssm.initialize_known(np.array([values[0], *[0.0] * (size - 1)]), start)
    known = ssm.filter()
    design = ssm["design"][0]
    expected = np.einsum("jt,jt->t", design, known.predicted_state[:, :-1])
    spread = np.einsum("jt,jkt,kt->t", design, known.predicted_state_cov[:, :, :-1], design) + 1.0
    np.testing.assert_allclose(means, expected[2:], rtol=1e-8)
    np.testing.assert_allclose(variances, spread[2:], rtol=1e-8)


@pytest.mark.parametrize("values", [[3.1, 2.7, 3.4, 2.2], [120.0, 80.0, 95.0, 140.0, 101.0], [-4.0, 6.5, 0.5]])
def test_conjugate_law_of_a_constant_mean(one_setting: list[float], values: list[float]) -> None:
    """A mean with a normal prior, a variance with 1/variance for prior: by hand, after n values.

    The mean has the prior normal(first value, 10^4 variances): precision 10^-4 + n. Then the next value is Student's t
    with n - 1 degrees of freedom, its scale from the squares around the posterior mean and the prior's.
    """
    model = Trend(Context())
    model.absorb(rows_of(np.array(values)))
    n, y = len(values), np.array(values)
    precision = 1e-4 + n
    mean = (1e-4 * y[0] + y.sum()) / precision
    squares = ((y - mean) ** 2).sum() + 1e-4 * (mean - y[0]) ** 2
    by_hand = stats.t(n - 1, mean, np.sqrt(squares / (n - 1) * (1 + 1 / precision)))
    law = model.predict()
    assert law is not None
    sharp = ~law.logs
    sharp[-1] = False  # the broad law that every bank has a little of
    parts = (np.ones(len(sharp)), law.centres, law.scales, law.shapes, law.logs)
    plain = NumberLaw(*(part[sharp] for part in parts))
    x = np.linspace(-300, 300, 61)
    np.testing.assert_allclose(plain.cdf(x), by_hand.cdf(x), rtol=1e-9)


def test_conjugate_law_of_a_straight_line(one_setting: list[float]) -> None:
    """Level and trend without noise are a Bayesian regression on the row number: all rows at once, by hand."""
    one_setting[0] = 1.0
    y = np.array([10.0, 12.5, 14.0, 17.5, 18.0, 21.5, 22.0])
    model = Trend(Context())
    model.absorb(rows_of(y))
    n = len(y)
    x = np.stack([np.ones(n), np.arange(n)], axis=1)
    before = np.array([y[0], 0.0])
    precision = np.diag([1e-4, 1.0]) + x.T @ x
    after = np.linalg.solve(precision, np.diag([1e-4, 1.0]) @ before + x.T @ y)
    squares = y @ y + before @ np.diag([1e-4, 1.0]) @ before - after @ precision @ after
    ahead = model.walk(3, 0)
    assert ahead is not None
    for step, law in enumerate(ahead):
        point = np.array([1.0, n + step])
        spread = 1 + point @ np.linalg.solve(precision, point)
        by_hand = stats.t(n - 1, point @ after, np.sqrt(squares / (n - 1) * spread))
        assert law.centres[0] == pytest.approx(by_hand.mean(), rel=1e-9)
        assert law.scales[0] * np.sqrt((n - 1) / (n - 3)) == pytest.approx(by_hand.std(), rel=1e-7)


def compared(context: Context, values: np.ndarray, width: float) -> int:
    """Hold each regression of a bank that read `values` against least squares; how many there were."""
    model = Autoregression(context)
    model.absorb(rows_of(values, width))
    side, start = model._sides[0], Autoregression(context)._sides[0]
    start.begin(values[:WAKE], width)
    y = (values - start.middle) / start.unit
    joined = np.concatenate([np.full(start.reach, y[0]), y])
    count = 0
    for place, at in enumerate(side.alive):
        choice = side.choices[at]
        if FADING[choice.fading] < 1 or choice.dated:
            continue
        count += 1
        size = len(choice.lags) + 1
        lagged = [joined[start.reach - lag : start.reach - lag + len(y)] for lag in choice.lags]
        ridge = np.diag(1 / np.sqrt(np.diag(start.covs[at, :size, :size])))  # the prior, as rows of its own
        x = np.concatenate([np.stack([np.ones(len(y)), *lagged], axis=1), ridge])
        target = np.concatenate([y, ridge @ start.means[at, :size]])
        expected, *_ = np.linalg.lstsq(x, target, rcond=None)
        np.testing.assert_allclose(side.means[place, :size], expected, rtol=0, atol=1e-8)
        np.testing.assert_allclose(side.covs[place, :size, :size], np.linalg.inv(x.T @ x), rtol=0, atol=1e-8)
        residual = target - x @ expected
        assert side.squares[place] == pytest.approx(start.squares[at] + residual @ residual, rel=1e-9)
    return count


def test_recursive_least_squares_are_least_squares() -> None:
    """Without forgetting, every regression of the bank is one ridge regression on all rows, by numpy."""
    rng = np.random.default_rng(5)
    values = np.round(100 + 5 * rng.normal(size=60).cumsum() + 20 * np.sin(np.arange(60) * np.pi / 3), 1)
    for count in (8, 15):  # after the sixteenth row, settings are dropped
        assert compared(Context((6,)), values[:count], 0.1) > 20


def test_many_rows_of_recursive_least_squares() -> None:
    """The same after 3,000 rows, for those regressions that are still there."""
    rng = np.random.default_rng(6)
    values = np.zeros(3000)
    for t in range(2, 3000):
        values[t] = 1.2 * values[t - 1] - 0.5 * values[t - 2] + rng.normal()
    assert compared(Context(), np.round(values, 2), 0.01)
