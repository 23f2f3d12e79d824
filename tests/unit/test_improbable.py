"""How improbable a row was: against sums over every outcome, on rows from a known law, and at a rate of alarms."""

from __future__ import annotations

from itertools import pairwise
from math import log2

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats

from seqmix.improbable import Alarms, Improbable, of_number, of_state
from seqmix.models.laws import NORMAL, UNIFORM, NumberLaw

CLOSE, FACTOR = 0.05, 1.6
"""A p-value of a number is by stretches of cells: within this share of itself from 0.05 on, within a factor below."""

LAWS = {
    "normal": (NumberLaw.of(20.0, 1.5), 0.1),
    "normal, cells as wide as itself": (NumberLaw.of(20.2, 1.0), 1.0),
    "student": (NumberLaw.of(-3.0, 0.5, 3.0), 0.05),
    "far apart": (NumberLaw.of([0.0, 40.0], [1.0, 2.0], NORMAL, [0.7, 0.3]), 0.25),
    "a broad part": (NumberLaw.of([5.0, 5.0], [0.5, 12.0], NORMAL, [0.98, 0.02]), 0.1),
    "log scale": (NumberLaw.of(3.0, 0.4, NORMAL, logs=True), 0.5),
    "even": (NumberLaw.of(10.0, 4.0, UNIFORM), 0.125),
    "atoms": (NumberLaw.of([3.0, 7.0, 5.0], [0.0, 0.0, 2.0], NORMAL, [0.5, 0.2, 0.3]), 0.5),
}


def every_cell(law: NumberLaw, width: float) -> tuple[np.ndarray, np.ndarray]:
    """Middles of cells, on the grid of multiples of `width`, and their masses."""
    low, high = law.quantile([1e-7, 1 - 1e-7])
    low, high = max(low, law.centres.min() - 1e5 * width), min(high, 60.0 + 1e5 * width)
    places = np.arange(np.floor(low / width) - 1, np.ceil(high / width) + 2) * width
    return places, law.cdf(places + width / 2) - law.cdf(places - width / 2)


def by_every_cell(law: NumberLaw, value: float, width: float) -> tuple[float, float]:
    """The p-value and the expected loss, cell by cell."""
    _, masses = every_cell(law, width)
    own = float(law.cdf(value + width / 2) - law.cdf(value - width / 2))
    there = masses > 0
    rest = max(1.0 - masses.sum(), 0.0)
    return float(masses[masses <= own * (1 + 1e-9)].sum()) + rest, float(
        -(masses[there] * np.log2(masses[there])).sum()
    )


@given(st.lists(st.integers(0, 40), min_size=1, max_size=30).filter(any), st.data())
def test_a_state_is_as_improbable_as_all_that_are_no_likelier(counts, data):
    masses = np.array(counts, dtype=float) / sum(counts)
    code = data.draw(st.sampled_from([code for code, count in enumerate(counts) if count]))
    found = of_state(masses, code)
    assert found.p_value == pytest.approx(sum(n for n in counts if n <= counts[code]) / sum(counts), rel=1e-12)
    assert found.expected_bits == pytest.approx(sum(-m * log2(m) for m in masses if m), abs=1e-12)
    assert found.p_value in np.minimum(found.levels, 1.0)
    assert found.levels[-1] == pytest.approx(1.0)
    assert (np.diff(found.levels) > 0).all()
    assert found.whole.all()


def test_states_that_cannot_come_change_no_bit():
    masses = np.array([0.4, 0.1, 0.3, 0.2])
    more = np.array([0.4, 0.0, 0.1, 0.3, 0.0, 0.2])
    one, other = of_state(masses, 1), of_state(more, 2)
    assert (one.p_value, one.expected_bits) == (other.p_value, other.expected_bits)
    assert np.array_equal(one.levels, other.levels)


@pytest.mark.parametrize("name", LAWS)
def test_a_number_is_as_improbable_as_all_cells_that_are_no_likelier(name):
    law, width = LAWS[name]
    median = float(np.rint(law.median / width) * width)
    levels = [1e-4, 1e-3, 0.01, 0.1, 0.3, 0.5, 0.6, 0.8, 0.95, 0.999]
    for value in np.rint(law.quantile(levels) / width) * width:
        p, expected = by_every_cell(law, value, width)
        found = of_number(law, float(value), width, median)
        if p >= 0.05:
            assert found.p_value == pytest.approx(p, rel=CLOSE), value
        assert p / FACTOR < found.p_value < p * FACTOR, value
        assert found.expected_bits == pytest.approx(expected, abs=0.1), value
        assert 0 <= found.levels[0] <= found.levels[-1] <= 1 + 1e-9
        assert len(found.whole) == len(found.levels) < 500


def test_a_second_peak_far_from_the_median_hides_nothing():
    law = NumberLaw.of([0.0, 4000.0], [1.0, 2.0], NORMAL, [0.9, 0.1])
    for value in (4.5, 30.0, 3000.0, 4020.0):
        assert of_number(law, value, 0.1, 0.1).p_value < 1e-4
    assert of_number(law, 4001.0, 0.1, 0.1).p_value == pytest.approx(0.1 * 0.617, rel=0.25)


def test_numbers_far_out_are_ever_less_probable():
    law = NumberLaw.of([0.0, 0.0], [1.0, 1.0], [NORMAL, 1.0], [0.99, 0.01])
    found = [of_number(law, 10.0**k, 0.01, 0.0).p_value for k in range(1, 13)]
    assert all(0 < after < before for before, after in pairwise(found))
    assert found[2] == pytest.approx(0.01 * 2 / (np.pi * 1e3), rel=CLOSE)


@pytest.mark.parametrize("value", [-1e300, -1.0, 0.0, 1e-300, 1e300])
def test_odd_numbers_have_a_p_value(value):
    for law in (NumberLaw.of(0.0, 1.0), NumberLaw.of(1.0, 2.0, NORMAL, logs=True), NumberLaw.of(0.0, 0.0)):
        found = of_number(law, value, 0.1, law.median)
        assert 0.0 <= found.p_value <= 1.0
        assert 0.0 <= found.expected_bits < 100.0


@pytest.mark.parametrize("name", ["normal", "student", "far apart", "log scale"])
def test_p_values_of_rows_from_the_law_are_even(name):
    law, width = LAWS[name]
    median = law.median
    rows = np.rint(law.draw(np.random.default_rng(2), 2000) / width) * width
    cells, at = np.unique(rows, return_inverse=True)
    p_values = np.array([of_number(law, value, width, median).p_value for value in cells.tolist()])[at]
    for level in (0.01, 0.03, 0.1, 0.3, 0.5, 0.8):
        _, masses = every_cell(law, width)
        steps = np.cumsum(np.sort(masses))
        # a law of cells has steps: at most `level`, and no step less than that
        expected = steps[steps <= level * (1 + CLOSE)].max(initial=0.0)
        least = steps[steps <= level / (1 + CLOSE)].max(initial=0.0)
        spread = 4 * np.sqrt(level / 2000)
        assert least - spread < (p_values <= level).mean() < expected + spread, level


def outcomes(masses: np.ndarray) -> list[Improbable]:
    return [of_state(masses, code) for code in range(len(masses))]


@pytest.mark.parametrize("rate", [1e-4, 1e-3, 0.02])
@pytest.mark.parametrize("share", [0.3, 1.0, 3.0, 9.0])
def test_the_rate_is_kept_where_the_least_mass_allows_it(rate, share):
    """Chances are exact: what each row may spend, times the law, summed over the rows."""
    least = share * rate
    masses = np.array([least, 2 * least, 0.5, 0.5 - 3 * least])
    rows = outcomes(masses)
    alarms = Alarms(rate)
    total = kept = 0.0
    for row in range(1, 3001):
        before = alarms.kept
        chance = sum(mass for mass, found in zip(masses, rows, strict=True) if found.p_value <= before + rate)
        rung = alarms.rings(rows[2])  # the same is spent whatever comes
        assert not rung
        total += chance
        kept = alarms.kept
        assert total <= rate * row * (1 + 1e-9)
        assert 0.0 <= kept <= 10 * rate
    assert 0.5 * rate < total / 3000 < 1.5 * rate


def test_the_long_run_rate_of_laws_that_change():
    rng, rate, rows = np.random.default_rng(3), 0.005, 20_000
    alarms, rung = Alarms(rate), 0
    for _ in range(rows):
        masses = rng.dirichlet(np.full(8, 0.2))
        rung += alarms.rings(of_state(masses, int(rng.choice(8, p=masses))))
    assert 0.5 * rate < rung / rows < 1.5 * rate


def test_the_long_run_rate_of_numbers():
    law, rate = NumberLaw.of(20.0, 1.0), 0.01
    values = np.round(law.draw(np.random.default_rng(4), 20_000), 1)
    cells, at = np.unique(values, return_inverse=True)
    found = [of_number(law, value, 0.1, 20.0) for value in cells.tolist()]
    alarms = Alarms(rate)
    rung = sum(alarms.rings(found[cell]) for cell in at.tolist())
    assert 0.5 * rate < rung / len(values) < 1.5 * rate


@pytest.mark.parametrize("masses", [[0.5, 0.5], [0.25] * 4, [1.0]])
def test_nothing_rings_where_nothing_is_improbable(masses):
    alarms, rng = Alarms(0.01), np.random.default_rng(5)
    rows = outcomes(np.array(masses))
    assert not any(alarms.rings(rows[code]) for code in rng.integers(0, len(masses), 2000).tolist())
    assert alarms.kept <= 0.1


@settings(max_examples=50)
@given(st.lists(st.lists(st.integers(1, 2000), min_size=2, max_size=6), min_size=1, max_size=60), st.floats(1e-4, 0.3))
def test_no_more_is_spent_than_there_is(laws, rate):
    alarms, spent = Alarms(rate), 0.0
    for row, counts in enumerate(laws, 1):
        masses = np.array(counts) / sum(counts)
        budget = min(alarms.kept + rate, 10 * rate)
        found = outcomes(masses)
        chance = sum(mass for mass, one in zip(masses, found, strict=True) if one.p_value <= budget)
        rung = alarms.rings(found[0])
        assert rung == (found[0].p_value <= budget)
        spent += chance
        assert spent <= rate * row * (1 + 1e-9)


@pytest.mark.parametrize("width", [1e-2, 1e-7, 1e-15, 1e-18])
@pytest.mark.parametrize("z", [0.01, 0.7, 2.5, 4.0])
def test_a_grid_as_fine_as_floats_is_that_of_the_density(width, z):
    """Under a normal law the density at z is undercut by all that lies further out."""
    found = of_number(NumberLaw.of(3.0, 1.0), 3.0 + z, width, 3.0)
    assert found.p_value == pytest.approx(2 * stats.norm.sf(z), rel=0.1)
    assert found.expected_bits == pytest.approx(np.log2(np.sqrt(2 * np.pi * np.e) / width), abs=0.1)
