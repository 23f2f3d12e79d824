"""Autoregression: no explosion, logs that the log scale cannot follow, and what it must find."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest

from seqmix.models.autoregression import WAKE, Autoregression
from seqmix.models.calendar import DAY, HOUR
from seqmix.models.protocol import Context
from seqmix.models.regressions import WIDE
from seqmix.models.rhythm import Rhythm, find_period
from seqmix.series.rows import Rows

ROWS, STEPS = 300, 500


def rows_of(values: object, width: float = 0.1, cadence: int | None = None) -> Rows:
    held = np.asarray(values, dtype=np.float64)
    times = None if cadence is None else np.arange(len(held), dtype=np.int64) * cadence
    rows = Rows.of(held, times, 0)
    rows.cells = np.maximum(width, np.spacing(np.nan_to_num(np.abs(held))))
    return rows


def hard() -> dict[str, np.ndarray]:
    """Logs whose least squares have roots outside the unit circle, or nearly none at all."""
    rng = np.random.default_rng(7)
    t = np.arange(ROWS)
    return {
        "growth": np.round(1.05**t, 1),
        "decay": np.round(1e6 * 0.93**t, 3),
        "swinging growth": np.round((-1.05) ** t, 1),
        "oscillation that grows": np.round(1.04**t * np.sin(t), 1),
        "cubes": t**3.0,
        "walk": np.round(rng.normal(size=ROWS).cumsum(), 1),
        "steps": np.repeat(rng.integers(0, 9, 15), 20).astype(float),
        "jump at the end": np.concatenate([np.zeros(ROWS - 1), [1e6]]),
        "outlier": np.where(t == 120, 1e9, np.round(rng.normal(size=ROWS), 1)),
        "constant": np.full(ROWS, 4.2),
        "two values": np.tile([1.0, 3.0], ROWS // 2),
        "heavy tails": np.round(rng.standard_cauchy(ROWS), 1),
        "zeros and rare counts": rng.poisson(0.05, ROWS).astype(float),
    }


@pytest.mark.parametrize(
    ("log", "periods"), [*((log, ()) for log in hard()), *((log, (12,)) for log in ("growth", "walk", "outlier"))]
)
@pytest.mark.filterwarnings("error::RuntimeWarning")
def test_no_explosion(log: str, periods: tuple[int, ...]) -> None:
    """500 steps ahead, forecasts stay within three ranges of what was seen, on the scale that foretells them."""
    values = hard()[log]
    model = Autoregression(Context(periods))
    assert np.isfinite(model.absorb(rows_of(values))[WAKE:]).all()
    low, high = values.min(), values.max()
    span = WIDE * max(high - low, 1e-6)
    with np.errstate(over="ignore"):  # three ranges of logarithms may be beyond floats
        tops = [high + span]
        if (values[:WAKE] > 0).all():  # else there is no log scale
            tops.append(high * (high / values[values > 0].min()) ** WIDE)
    floor, roof = low - span, min(max(tops), np.exp(700.0))
    laws = model.walk(STEPS, 0)
    assert laws is not None
    assert len(laws) == STEPS
    slack = 1e-6 * span + 1e-6 * roof
    for law in laws[1:]:
        centres = np.where(law.logs, np.exp(np.minimum(law.centres, 700.0)), law.centres)
        assert (centres >= floor - slack).all()
        assert (centres <= roof + slack).all()
        assert np.isfinite(law.scales).all()
    spots = np.array([law.quantile([0.1, 0.5, 0.9]) for law in laws[:: STEPS // 10]])
    assert np.isfinite(spots).all()
    paths = model.sample(STEPS, 100, np.random.default_rng(1))
    assert np.isfinite(paths).all()
    assert (paths >= floor - slack).all()
    assert (paths <= roof + slack).all()


@pytest.mark.parametrize("values", [[0.0, 3.0] * 40, [-5.0, 2.0, 7.0] * 30, -np.arange(1.0, 80), np.zeros(50)])
def test_zeros_and_negative_values_from_the_start_have_no_log_scale(values: object) -> None:
    model = Autoregression(Context())
    bits = model.absorb(rows_of(values))
    assert np.isfinite(bits[WAKE:]).all()
    assert np.isnan(bits[:WAKE]).all()
    law = model.predict()
    assert law is not None
    assert not law.logs.any()
    assert "log scale" not in model.setting()


def test_a_first_zero_late_in_a_log() -> None:
    rng = np.random.default_rng(3)
    values = np.round(np.exp(rng.normal(size=400).cumsum() * 0.1), 2)
    with_zeros = values.copy()
    with_zeros[200:220] = 0.0
    model, other = Autoregression(Context()), Autoregression(Context())
    bits, same = model.absorb(rows_of(with_zeros, 0.01)), other.absorb(rows_of(values, 0.01))
    assert bits[WAKE:200].tolist() == same[WAKE:200].tolist()
    assert np.isfinite(bits[WAKE:]).all()
    assert bits[200:].mean() < same[200:].mean() + 8


@pytest.mark.parametrize("value", [4.2, 0.0, -1e6, 1e-6])
def test_constant_logs_are_soon_cheap(value: float) -> None:
    model = Autoregression(Context())
    bits = model.absorb(rows_of(np.full(300, value), 0.1))
    assert (bits[WAKE:] < 3).all()
    assert bits[200:].max() < 0.1
    laws = model.walk(50, 0)
    assert laws is not None
    np.testing.assert_allclose([law.median for law in laws], value, atol=0.05)


def test_any_chunking_gives_equal_bits_and_equal_banks() -> None:
    rng = np.random.default_rng(4)
    values = np.round(20 + np.sin(np.arange(900) / 4) + rng.normal(size=900), 1)
    values[[0, 5, 6, 7, 100, 400, 401]] = np.nan
    rows = rows_of(values, 0.1, HOUR)
    context = Context((24,), HOUR, True)
    whole = Autoregression(context)
    expected = whole.absorb(rows)
    for cuts in ([1, 2, 3, 4, 9, 10, 11], [15, 16, 17, 64, 500], list(range(50, 900, 50))):
        model = Autoregression(context)
        bits = np.concatenate([model.absorb(rows[a:b]) for a, b in pairwise([0, *cuts, 900])])
        assert np.array_equal(bits, expected, equal_nan=True)
        mine, theirs = model.state(), whole.state()
        assert mine.keys() == theirs.keys()
        assert all(np.array_equal(mine[name], theirs[name]) for name in mine)


def test_missing_rows_are_filled_by_the_value_before() -> None:
    """They cost nothing; the regressions look back on the last value, and learn nothing."""
    rng = np.random.default_rng(5)
    values = np.round(rng.normal(size=100).cumsum(), 1)
    model = Autoregression(Context())
    model.absorb(rows_of(values))
    means = model._sides[0].means.copy()
    assert model.absorb(rows_of(np.full(5, np.nan))).tolist() == [0.0] * 5
    assert np.array_equal(model._sides[0].means, means)
    past = model._sides[0].past
    assert np.ptp(past[-6:]) == 0
    assert past[-1] * model._sides[0].unit + model._sides[0].middle == pytest.approx(values[-1])


def test_asleep_until_eight_values_are_there() -> None:
    model = Autoregression(Context())
    values = np.array([np.nan, 1, 2, np.nan, 3, 4, 5, 6, 7, np.nan])
    assert np.isnan(model.absorb(rows_of(values))).all()
    assert model.predict() is None
    assert model.walk(3, 0) is None
    assert model.setting() == ""
    bits = model.absorb(rows_of([8.0, 9.0]))
    assert np.isnan(bits[0])
    assert np.isfinite(bits[1])
    assert model.predict() is not None


def test_what_is_known_of_a_made_log_is_found() -> None:
    """An autoregression of order 2: bits near those of who knows it, steps ahead near its own forecasts."""
    rng = np.random.default_rng(6)
    values = np.zeros(3000)
    for t in range(2, 3000):
        values[t] = 1.4 * values[t - 1] - 0.7 * values[t - 2] + rng.normal()
    values = np.round(values, 2)
    model = Autoregression(Context())
    bits = model.absorb(rows_of(values, 0.01))
    known = 0.5 * np.log2(2 * np.pi * np.e) - np.log2(0.01)
    assert bits[1000:].mean() < known + 0.03
    expected = list(values[-2:])
    for _ in range(10):
        expected.append(1.4 * expected[-1] - 0.7 * expected[-2])
    laws = model.walk(10, 0)
    assert laws is not None
    np.testing.assert_allclose([law.median for law in laws], expected[2:], atol=0.2)
    widths = [float(np.diff(law.quantile([0.1, 0.9]))[0]) / 2 / 1.2816 for law in laws]
    ripple = [1.0, 1.4]
    for _ in range(8):
        ripple.append(1.4 * ripple[-1] - 0.7 * ripple[-2])
    np.testing.assert_allclose(widths, np.sqrt(np.cumsum(np.square(ripple))), rtol=0.1)


def test_errors_that_the_hour_of_day_tells_the_size_of() -> None:
    rng = np.random.default_rng(8)
    size = np.where(np.arange(4000) % 24 < 8, 1.0, 5.0)
    values = np.round(100 + size * rng.normal(size=4000), 1)
    model = Autoregression(Context((24,), HOUR, True))
    bits = model.absorb(rows_of(values, 0.1, HOUR))
    known = 0.5 * np.log2(2 * np.pi * np.e) + np.log2(size / 0.1)
    assert (bits - known)[2000:].mean() < 0.2
    assert "hour of the day" in model.setting()
    laws = model.walk(24, 0, [(4000 + step) * HOUR for step in range(24)])
    assert laws is not None
    widths = np.array([float(np.diff(law.quantile([0.1, 0.9]))[0]) for law in laws])
    calm = (4000 + np.arange(24)) % 24 < 8
    assert widths[calm].max() < 0.35 * widths[~calm].min()


# ---- a period found in the rows ----------------------------------------------------------------------------


@pytest.mark.parametrize("period", [5, 7, 12, 50, 144])
def test_a_period_is_found(period: int) -> None:
    rng = np.random.default_rng(period)
    wave = np.tile(rng.normal(size=period) * 3, 2000 // period + 1)[:2000]
    values = np.round(wave + rng.normal(size=2000), 1)
    assert find_period(values) == period
    model = Rhythm(Context())
    bits = model.absorb(rows_of(values))
    assert model.setting() == f"period {period} rows"
    assert np.nanmean(bits[1200:]) < 0.5 * np.log2(2 * np.pi * np.e) - np.log2(0.1) + 0.4


def test_no_period_where_there_is_none() -> None:
    rng = np.random.default_rng(9)
    for values in (rng.normal(size=1000), rng.normal(size=1000).cumsum(), np.zeros(1000), np.arange(1000.0)):
        assert find_period(values) == 0
        model = Rhythm(Context())
        assert np.isnan(model.absorb(rows_of(values))).all()
        assert model.predict() is None
    assert find_period(np.tile([1.0, 5.0, 2.0], 3)) == 0  # too short to tell


def test_a_period_that_the_clock_knows_is_left_to_the_others() -> None:
    values = np.tile([1.0, 5.0, 2.0, 7.0], 100) + np.random.default_rng(1).normal(size=400) * 0.1
    assert Rhythm(Context((4,), DAY, True)).absorb(rows_of(values, 0.01, DAY)).tolist() != []
    model = Rhythm(Context((4,), DAY, True))
    model.absorb(rows_of(values, 0.01, DAY))
    assert model.predict() is None
