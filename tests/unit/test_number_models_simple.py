"""The contract and the purpose of the models of few values, exact rules, counts and bins."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest

from seqmix.models.bins import Bins
from seqmix.models.counts import Counts, log_mass
from seqmix.models.numbers import NumbersModel
from seqmix.models.protocol import Context
from seqmix.models.rules import Rules, recurrence
from seqmix.models.values import Values
from seqmix.series.grid import Grid
from seqmix.series.rows import Rows

HOUR = 3_600_000_000
START = 1_700_000_000_000_000 // HOUR * HOUR
CONTEXT = Context(periods=(24,), cadence=HOUR, timed=True)

MODELS: tuple[type[NumbersModel], ...] = (Values, Rules, Counts, Bins)


def rows_of(values: object, widths: object = None) -> Rows:
    """An hourly log; widths of cells as the grid finds them unless given."""
    held = np.array(values, dtype=np.float64)
    rows = Rows.of(held, START + HOUR * np.arange(len(held)), 0)
    rows.cells = Grid().cells(held)[0] if widths is None else np.broadcast_to(widths, held.shape).astype(np.float64)
    return rows


def logs() -> dict[str, Rows]:
    rng = np.random.default_rng(5)
    few = rng.integers(0, 6, 400) * 1.0
    few[1::7], few[250] = 2.5, 17.25
    walk = np.round(np.cumsum(rng.normal(size=400) * np.where(np.arange(400) % 20 < 10, 0.2, 3.0)), 1)
    walk[300] = 4000.0
    counts = rng.poisson(np.exp(1 + np.sin(np.arange(400) * np.pi / 12))) * 1.0
    counts[200], counts[230:240], counts[320] = 900.0, 0.0, -3.0
    line = np.concatenate([np.arange(150) * 0.5, np.cumsum(np.arange(150)), np.tile([1.0, 4.0, 2.0, 2.0], 25)])
    plain = {"few": few, "walk": walk, "counts": counts, "line": line}
    for values in plain.values():
        values[[0, 77, *range(100, 104)]] = np.nan
    coarser = np.where(np.arange(400) < 100, rng.integers(0, 8, 400) * 0.5, rng.integers(0, 4, 400) * 1.0)
    return {name: rows_of(values) for name, values in plain.items()} | {
        "coarser": rows_of(coarser, np.where(np.arange(400) < 100, 0.5, 1.0)),
        "twos": rows_of(np.where(np.arange(300) < 120, 1, 2) * rng.poisson(6, 300), np.repeat([1.0, 2.0], [120, 180])),
        "many digits": rows_of(rng.normal(size=300).round(12)),
        "flat": rows_of(np.full(200, 5.0)),
        "tiny": rows_of(rng.integers(-9999, 9999, 200) * 1e-303, 1e-303),
        "huge": rows_of(np.where(rng.random(200) < 0.5, -1e300, 1e300), 1e286),
    }


LOGS = logs()


@pytest.mark.parametrize("model", MODELS)
@pytest.mark.parametrize("log", LOGS)
class TestEveryModel:
    def test_law_is_what_is_charged(self, model: type[NumbersModel], log: str) -> None:
        one, rows = model(CONTEXT), LOGS[log]
        for t in range(len(rows)):
            law = one.predict(int(rows.times[t]))
            bits = one.absorb(rows[t : t + 1])[0]
            if np.isnan(rows.values[t]):
                assert bits == 0
            elif law is None:
                assert np.isnan(bits)
            else:
                assert bits == pytest.approx(law.bits(float(rows.values[t]), float(rows.cells[t])), abs=1e-9)

    def test_any_chunking_and_a_restored_state_give_equal_bits(self, model: type[NumbersModel], log: str) -> None:
        rows = LOGS[log]
        whole = model(CONTEXT).absorb(rows)
        one, pieces = model(CONTEXT), []
        for a, b in pairwise([0, 1, 2, 3, 64, 65, 100, 129, 131, 190, len(rows)]):
            pieces.append(one.absorb(rows[a:b]))
            state = one.state()
            one = model(CONTEXT)
            one.restore(state)
        np.testing.assert_array_equal(whole, np.concatenate(pieces))

    def test_frozen_rows_are_followed_but_charged_by_their_law(self, model: type[NumbersModel], log: str) -> None:
        one, rows = model(CONTEXT), LOGS[log]
        one.absorb(rows[:140])
        for t in range(140, 190):
            law = one.predict(int(rows.times[t]))
            bits = one.absorb(rows[t : t + 1], frozen=True)[0]
            if law is not None and not np.isnan(rows.values[t]):
                assert bits == pytest.approx(law.bits(float(rows.values[t]), float(rows.cells[t])), abs=1e-9)

    def test_steps_ahead_are_laws_and_paths_agree_with_them(self, model: type[NumbersModel], log: str) -> None:
        one, rows = model(CONTEXT), LOGS[log]
        one.absorb(rows)
        times = [int(rows.times[-1]) + HOUR * step for step in range(1, 6)]
        laws, first = one.walk(5, 400, times), one.predict(times[0])
        drawn = one.sample(5, 2000, np.random.default_rng(1), times)
        assert drawn.shape == (2000, 5)
        assert (laws is None) == (first is None)
        if laws is not None and first is not None:
            assert len(laws) == 5
            spots = np.quantile(drawn[:, 0], [0.2, 0.4, 0.6, 0.8])
            np.testing.assert_allclose(laws[0].cdf(spots), first.cdf(spots), atol=1e-9)
            for step, law in enumerate(laws):
                assert law.weights.sum() == pytest.approx(1.0)
                for spot in np.quantile(drawn[:, step], [0.25, 0.75]) + 1e-7 * float(rows.cells[-1]):
                    assert float(law.cdf(spot)) == pytest.approx((drawn[:, step] <= spot).mean(), abs=0.1)


@pytest.mark.parametrize(
    ("values", "ahead"),
    [
        ([1, 4, 9, 16, 25, 36], 49),
        ([1, 1, 2, 3, 5, 8, 13], 21),
        ([2, 4, 8, 16, 32], 64),
        ([1, 8, 27, 64, 125, 216, 343], 512),
        ([3, 1, 4, 3, 1, 4, 3, 1, 4], 3),
        ([7, 7, 7, 7], 7),
        ([0.5, 1.0, 1.5, float("nan"), 2.5, 3.0], 3.5),
    ],
)
def test_rules_give_nearly_all_mass_to_what_they_foretell(values: list[float], ahead: float) -> None:
    one, rows = Rules(Context()), rows_of(values)
    one.absorb(rows)
    law = one.predict()
    assert law is not None
    assert 2 ** -law.bits(ahead, float(rows.cells[-1])) > 0.98


def test_a_broken_rule_is_forgiven() -> None:
    values = np.concatenate([np.arange(100), np.arange(500, 600)])
    bits = Rules(Context()).absorb(rows_of(values))
    assert np.nansum(bits) < 45


def test_recurrences() -> None:
    assert recurrence([1, 1, 2, 3, 5]) == [1, 1, 1]
    assert recurrence([27, 18, 12, 8]) == [3, 2]
    assert recurrence([1, 1, 2, 4, 7, 13, 24]) == [1, 1, 1, 1]
    assert recurrence([1, 1, 2, 3]) is None  # order 2, but nothing bears it out
    assert recurrence([3, 1, 4, 1, 5, 9, 2, 6, 5, 3, 5]) is None


def test_values_sleep_for_good_after_the_257th() -> None:
    values = np.concatenate([np.tile(np.arange(200.0), 6), np.arange(200.0, 300.0), np.zeros(50)])
    bits = Values(Context()).absorb(rows_of(values))
    assert not np.isnan(bits[1030:1257]).any()
    assert np.isnan(bits[1257:]).all()


def test_values_find_a_pattern_of_states() -> None:
    rng = np.random.default_rng(3)
    change = rng.random(3000) < 0.1
    states = np.cumsum(change) % 4
    bits = Values(Context()).absorb(rows_of(np.array([10.0, 2.5, 77.0, -3.0])[states]))
    assert np.mean((bits + np.log2(np.where(change, 0.1, 0.9)))[1000:]) < 0.03


def test_counts_come_near_the_entropy_of_a_known_rate() -> None:
    rng = np.random.default_rng(4)
    bits = Counts(Context()).absorb(rows_of(rng.poisson(4, 4000)))
    assert np.mean(bits[200:]) == pytest.approx(3.01, abs=0.05)  # entropy 3.0104


@pytest.mark.parametrize(("a", "b"), [(0.5, 0.3), (3.2, 1.0), (250.0, 5.0), (1e6, 1e4), (0.5, 1e-3)])
def test_negative_binomial_masses_add_to_one(a: float, b: float) -> None:
    masses = np.exp(log_mass(np.array(a), np.array(b), np.arange(200_000.0)))
    assert masses.sum() == pytest.approx(1.0, abs=1e-11)
    assert masses @ np.arange(200_000.0) == pytest.approx(a / b, rel=1e-9)


def test_negative_binomial_masses_against_scipy() -> None:
    stats = pytest.importorskip("scipy.stats")
    count = np.arange(300.0)
    for a, b in ((0.5, 0.3), (3.2, 1.0), (250.0, 5.0)):
        expected = stats.nbinom.logpmf(count, a, b / (1 + b))
        np.testing.assert_allclose(log_mass(np.array(a), np.array(b), count), expected, atol=1e-9)


def test_bins_see_that_large_steps_come_in_spells() -> None:
    rng = np.random.default_rng(6)
    scale = np.where(np.arange(4000) % 40 < 20, 0.1, 3.0)
    rows = rows_of(np.cumsum(rng.normal(size=4000) * scale).round(2), 0.01)
    known = np.mean(np.log2(scale / 0.01)) + 2.05  # bits of normal steps of known scale
    assert np.mean(Bins(Context()).absorb(rows)[2000:]) < known + 1.0  # one scale for all would cost 1.5 more
