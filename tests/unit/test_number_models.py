"""The contract: what must hold for every model of numbers, on any log."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest

from seqmix.mixture.numbers import NumberMixture
from seqmix.models import registry
from seqmix.models.numbers import Context, NumbersModel
from seqmix.series.rows import Rows

HOUR = 3_600_000_000
CONTEXT = Context((24, 168), HOUR, True)


def rows_of(values: np.ndarray, width: float) -> Rows:
    """Hourly rows on a grid of `width`."""
    n = len(values)
    times = 1_700_000_000_000_000 // HOUR * HOUR + np.arange(n, dtype=np.int64) * HOUR
    codes = np.where(np.isnan(values), -1, 0).astype(np.int32)
    return Rows(codes, times, 0, values.astype(np.float64), np.full(n, width))


def waves(n: int) -> Rows:
    """A daily wave with noise, missing rows, a jump and one negative value."""
    rng = np.random.default_rng(3)
    values = 20 + 6 * np.sin(np.arange(n) * 2 * np.pi / 24) + rng.normal(size=n).cumsum() * 0.1 + rng.normal(size=n)
    values[n // 2 :] += 4
    values = np.round(values, 1)
    values[[0, 30, 31, 32, n // 3]] = np.nan
    values[n // 4] = -2.5
    return rows_of(values, 0.1)


def small_counts(n: int) -> Rows:
    rng = np.random.default_rng(4)
    return rows_of(rng.poisson(3 + 2 * np.sin(np.arange(n) * 2 * np.pi / 24) ** 2).astype(float), 1.0)


def few_levels(n: int) -> Rows:
    rng = np.random.default_rng(5)
    return rows_of(np.array([10.0, 12.5, 15.0])[(np.arange(n) // 5 + (rng.random(n) < 0.1)) % 3], 2.5)


def squares(n: int) -> Rows:
    return rows_of(np.arange(1.0, n + 1) ** 2, 1.0)


LOGS = {"waves": waves, "counts": small_counts, "levels": few_levels, "squares": squares}


@pytest.mark.parametrize("log", LOGS)
@pytest.mark.parametrize("model", registry.NUMBER_MODELS)
class TestEveryNumberModel:
    def test_law_is_what_is_charged_and_adds_up(self, log: str, model: type[NumbersModel]) -> None:
        one, rows = model(CONTEXT), LOGS[log](220)
        assert rows.values is not None and rows.cells is not None and rows.times is not None
        for t in range(len(rows)):
            value, width = float(rows.values[t]), float(rows.cells[t])
            law = one.predict(int(rows.times[t]))
            bits = one.absorb(rows[t : t + 1])[0]
            if np.isnan(value):
                assert np.isnan(bits) or bits == 0
            elif law is None:
                assert np.isnan(bits)
            else:
                assert bits == pytest.approx(law.bits(value, width), abs=1e-7)
                assert law.weights.sum() == pytest.approx(1, abs=1e-9)
                if t in (60, 219):
                    middle, far = round(law.median / width), 3000
                    low, high = (middle - far - 0.5) * width, (middle + far + 0.5) * width
                    cells = (middle + np.arange(-far, far + 1)) * width
                    inside = sum(2.0 ** -law.bits(x, width) for x in cells.tolist())
                    below, above = law.cdf(np.nextafter(low, -np.inf)), law.cdf(np.nextafter(high, -np.inf))
                    assert inside + below + 1 - above == pytest.approx(1, abs=1e-9)

    def test_any_chunking_gives_equal_bits(self, log: str, model: type[NumbersModel]) -> None:
        rows = LOGS[log](700)
        whole = model(CONTEXT).absorb(rows)
        for cuts in ([1], [15, 16, 17, 64, 300], list(range(7, 700, 7))):
            one = model(CONTEXT)
            pieces = [one.absorb(rows[a:b]) for a, b in pairwise([0, *cuts, 700])]
            assert np.array_equal(np.concatenate(pieces), whole, equal_nan=True)

    def test_state_out_and_in_gives_equal_bits(self, log: str, model: type[NumbersModel]) -> None:
        rows = LOGS[log](500)
        for cut in (1, 5, 300):
            first = model(CONTEXT)
            first.absorb(rows[:cut])
            state = first.state()
            rest = first.absorb(rows[cut:])
            second = model(CONTEXT)
            second.restore(state)
            assert np.array_equal(second.absorb(rows[cut:]), rest, equal_nan=True)

    def test_steps_ahead_agree_with_sampled_paths(self, log: str, model: type[NumbersModel]) -> None:
        rows = LOGS[log](400)
        one = model(CONTEXT)
        one.absorb(rows)
        assert rows.times is not None
        times = [int(rows.times[-1]) + HOUR * (i + 1) for i in range(6)]
        laws = one.walk(6, 500, times)
        law = one.predict(times[0])
        assert (laws is None) == (law is None)
        if laws is None or law is None:
            return
        assert laws[0].median == pytest.approx(law.median, rel=0.02, abs=0.2)
        paths = one.sample(6, 3000, np.random.default_rng(1), times)
        assert paths.shape == (3000, 6)
        assert np.isfinite(paths).all()
        for step in (0, 5):
            share = laws[step].cdf(np.quantile(paths[:, step], [0.25, 0.5, 0.75]) + rows.cells[0] / 2)
            assert (share > [0.1, 0.3, 0.5]).all()
            assert (laws[step].cdf(np.quantile(paths[:, step], [0.25, 0.5]) - rows.cells[0] / 2) < [0.45, 0.7]).all()


def test_any_chunking_of_a_mixture_gives_equal_bits() -> None:
    rows = waves(900)
    whole = NumberMixture(context=CONTEXT).absorb(rows)
    one = NumberMixture(context=CONTEXT)
    assert np.array_equal(np.concatenate([one.absorb(rows[a:b]) for a, b in pairwise([0, 3, 130, 131, 900])]), whole)
    assert np.isfinite(whole).all()


def test_many_rows_at_once_are_those_rows_in_chunks() -> None:
    values = small_counts(5000).values
    whole, parts = (NumberMixture(["counts", "rules"], context=Context()) for _ in range(2))
    bits = whole.absorb(values)
    assert np.array_equal(
        bits, np.concatenate([parts.absorb(values[a:b]) for a, b in pairwise([0, 7, 4096, 4100, 5000])])
    )
    assert (whole.bits, whole.model_bits.tolist()) == (parts.bits, parts.model_bits.tolist())
    assert whole.bits == pytest.approx(bits.sum())


def test_the_loss_of_a_mixture_is_that_of_its_law() -> None:
    rows = waves(200)
    one = NumberMixture(context=CONTEXT, resolution=0.1)
    assert rows.values is not None and rows.times is not None
    for t, value in enumerate(rows.values.tolist()):
        law = one.predict(int(rows.times[t]))
        bits = one.absorb(rows[t : t + 1])[0]
        assert bits == 0 if np.isnan(value) else bits == pytest.approx(law.bits(value, 0.1), abs=1e-6)


def test_static_and_default_bounds_hold() -> None:
    rows = waves(600)
    for rates, slack in ((), 1e-6), ((0.05, 0.005, 0.0005), 1 + 1e-6):
        one = NumberMixture(context=CONTEXT, rates=rates)
        one.absorb(rows)
        assert (one.bits <= one.model_bits + one.weights.costs + slack).all()
