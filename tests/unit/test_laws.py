"""Laws of numbers: mixtures of parts and atoms, on the plain and the log scale."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from seqmix.models.laws import LAPLACE, NORMAL, UNIFORM, NumberLaw

SHAPES = (NORMAL, LAPLACE, UNIFORM, 1.0, 2.5, 30.0)


@st.composite
def laws(draw: st.DrawFn) -> NumberLaw:
    """Some parts of any shape and scale, atoms among them, on both scales."""
    count = draw(st.integers(1, 6))
    several = {"min_size": count, "max_size": count}
    scales = draw(st.lists(st.sampled_from([0.0, 1e-9, 0.01, 0.5, 2.0, 40.0]), **several))
    logs = draw(st.lists(st.booleans(), **several))
    return NumberLaw.of(
        draw(st.lists(st.floats(-20, 20), **several)),
        [min(scale, 2.0) if log else scale for scale, log in zip(scales, logs, strict=True)],
        draw(st.lists(st.sampled_from(SHAPES), **several)),
        draw(st.lists(st.floats(0.01, 1.0), **several)),
        logs,
    )


LEVELS = np.array([1e-6, 0.001, 0.05, 0.3, 0.5, 0.7, 0.95, 0.999])


class TestAnyLaw:
    @given(laws())
    @settings(max_examples=150, deadline=None)
    def test_quantiles_are_the_least_with_so_much_below(self, law: NumberLaw) -> None:
        spots = law.quantile(LEVELS)
        assert (np.diff(spots) >= 0).all()
        wide = 1e-9 * np.abs(spots) + 1e-12
        assert (law.cdf(spots + wide) >= LEVELS - 1e-9).all()
        assert (law.cdf(spots - wide) <= LEVELS + 1e-9).all()

    @given(laws())
    @settings(max_examples=50, deadline=None)
    def test_cdf_rises_from_0_to_1(self, law: NumberLaw) -> None:
        x = np.concatenate([-np.logspace(12, -12, 60), [0.0], np.logspace(-12, 12, 60)])
        below = law.cdf(x)
        assert (np.diff(below) >= -1e-15).all()
        assert (below >= 0).all()
        assert (below <= 1 + 1e-12).all()
        assert law.cdf(x.reshape(11, 11)).tolist() == below.reshape(11, 11).tolist()

    @given(laws(), st.integers(-40, 40), st.sampled_from([0.5, 1.0, 4.0]))
    @settings(max_examples=150, deadline=None)
    def test_bits_are_the_difference_of_the_cdf(self, law: NumberLaw, place: int, width: float) -> None:
        """Where the cell is wide beside the law; parts that are wide beside it have density times width."""
        x = place * width
        low, high = x - 0.5 * width, x + 0.5 * width
        expected = float(np.diff(law.cdf(np.nextafter([low, high], -np.inf)))[0])
        assert 2 ** -law.bits(x, width) == pytest.approx(expected, rel=0.02, abs=1e-9)

    @given(laws(), st.integers(0, 2**32 - 1))
    @settings(max_examples=30, deadline=None)
    def test_numbers_drawn_follow_the_law(self, law: NumberLaw, seed: int) -> None:
        drawn = law.draw(np.random.default_rng(seed), 20_000)
        assert drawn.shape == (20_000,)
        for spot in law.quantile([0.1, 0.5, 0.9]):
            here = abs(spot) * 1e-9 + 1e-12  # an atom counts with what is below it
            assert law.cdf(spot - here) - 0.02 <= (drawn <= spot).mean() <= law.cdf(spot + here) + 0.02

    @given(laws(), laws(), st.floats(0.01, 0.99))
    @settings(max_examples=50, deadline=None)
    def test_combined(self, one: NumberLaw, other: NumberLaw, weight: float) -> None:
        both = NumberLaw.combine([weight, 1 - weight], [one, other])
        x = np.linspace(-50, 50, 41)
        np.testing.assert_allclose(both.cdf(x), weight * one.cdf(x) + (1 - weight) * other.cdf(x), atol=1e-12)
        assert both.weights.sum() == pytest.approx(1)
        mass = weight * 2 ** -one.bits(3.0, 1.0) + (1 - weight) * 2 ** -other.bits(3.0, 1.0)
        assert 2 ** -both.bits(3.0, 1.0) == pytest.approx(mass, rel=1e-9, abs=1e-300)

    @given(laws(), st.sampled_from([1e-4, 0.05, 0.5]))
    @settings(max_examples=50, deadline=None)
    def test_lighter(self, law: NumberLaw, light: float) -> None:
        less = law.lighter(light)
        assert 1 <= len(less.weights) <= len(law.weights)
        assert less.weights.sum() == pytest.approx(1)
        x = np.linspace(-50, 50, 41)
        assert np.abs(less.cdf(x) - law.cdf(x)).max() <= light + 1e-12


def test_lighter_leaves_out_the_lightest_in_their_order() -> None:
    law = NumberLaw.of([1.0, 2.0, 3.0, 4.0], 1.0, NORMAL, [0.05, 0.6, 0.02, 0.33]).lighter(0.08)
    assert law.centres.tolist() == [2.0, 4.0]
    np.testing.assert_allclose(law.weights, np.array([0.6, 0.33]) / 0.93)
    assert len(NumberLaw.of([1.0, 2.0], 1.0).lighter(0.0).weights) == 2


def test_of_stretches_and_normalises() -> None:
    law = NumberLaw.of([1, 2, 3], 2.0, weights=[2, 1, 1], logs=[True, False, False])
    assert law.weights.tolist() == [0.5, 0.25, 0.25]
    assert law.scales.tolist() == [2.0] * 3
    assert law.shapes.tolist() == [NORMAL] * 3
    assert NumberLaw.of(4, 1).centres.tolist() == [4.0]


@pytest.mark.parametrize(
    ("law", "mean"),
    [
        (NumberLaw.of([1.0, 5.0], 3.0, [NORMAL, LAPLACE], [0.75, 0.25]), 2.0),
        (NumberLaw.of(4.0, 2.0, 1.5), 4.0),
        (NumberLaw.of(4.0, 2.0, UNIFORM), 4.0),
        (NumberLaw.of([4.0, 6.0], [0.0, 0.0], 1.0), 5.0),
        (NumberLaw.of(0.3, 0.8, NORMAL, logs=True), np.exp(0.3 + 0.32)),
        (NumberLaw.of(0.3, 0.8, LAPLACE, logs=True), np.exp(0.3) / (1 - 0.64)),
        (NumberLaw.of(0.3, 0.8, UNIFORM, logs=True), np.exp(0.3) * np.sinh(0.8) / 0.8),
        (NumberLaw.of(np.log(7.0), 0.0, 3.0, logs=True), 7.0),
        (NumberLaw.of(4.0, 2.0, 1.0), np.nan),  # Cauchy
        (NumberLaw.of([4.0, 4.0], 2.0, [NORMAL, 1.0], [0.999999, 0.000001]), np.nan),
        (NumberLaw.of(0.3, 0.01, 50.0, logs=True), np.nan),
        (NumberLaw.of(0.3, 1.0, LAPLACE, logs=True), np.nan),
        (NumberLaw.of(800.0, 1.0, NORMAL, logs=True), np.nan),  # too large for a float
    ],
)
def test_mean(law: NumberLaw, mean: float) -> None:
    assert law.mean == pytest.approx(mean, rel=1e-12, nan_ok=True)
    if np.isfinite(mean) and (law.shapes != 1.5).all():
        drawn = law.draw(np.random.default_rng(1), 200_000)
        assert drawn.mean() == pytest.approx(mean, abs=5 * drawn.std() / np.sqrt(200_000) + 1e-12)


def test_median() -> None:
    assert NumberLaw.of(7.25, 3.0, 2.0).median == pytest.approx(7.25, rel=1e-12)
    assert NumberLaw.of(2.0, 0.5, 4.0, logs=True).median == pytest.approx(np.exp(2.0), rel=1e-12)
    assert NumberLaw.of([1.0, 2.0, 3.0], 0.0).median == pytest.approx(2.0, rel=1e-12)


@pytest.mark.parametrize("shape", SHAPES)
def test_median_and_quantiles_of_narrow_parts_far_apart(shape: float) -> None:
    """Two values and next to nothing between them: Newton's steps from there lead anywhere."""
    places = ((-1.0, 2.0, 1e-9), (-3.0, -2.0, 1e-9), (0.0, 7.0, 0.01), (-1e6, 0.0, 1.0), (0.0, 1e-6, 1e-12))
    for low, high, scale in places:
        for share in np.linspace(0.02, 0.98, 32).tolist():
            law = NumberLaw.of([low, high], scale, shape, [share, 1 - share])
            spots = law.quantile([0.01, 0.5 * share, 0.5, share + 0.5 * (1 - share), 0.99])
            reach = 20 * scale if shape in (NORMAL, LAPLACE, UNIFORM, 30.0) else 2e4 * scale  # of heavy tails
            nearest = np.minimum(np.abs(spots - low), np.abs(spots - high))
            assert (nearest <= reach).all(), (low, high, share, spots)


def test_atoms() -> None:
    """An atom belongs to the cell that its point lies in: an edge to the cell above it."""
    law = NumberLaw.of([3.0, 3.5, 7.0], [0.0, 0.0, 0.5], NORMAL, [0.25, 0.5, 0.25])
    assert law.bits(3.0, 1.0) == pytest.approx(2.0, abs=1e-9)
    assert law.bits(4.0, 1.0) == pytest.approx(1.0, abs=1e-6)
    assert law.bits(3.25, 0.5) == pytest.approx(2.0, abs=1e-9)
    assert law.cdf([2.999, 3.0, 3.499, 3.5]).tolist() == pytest.approx([0, 0.25, 0.25, 0.75], abs=1e-9)
    assert NumberLaw.of(3.0, 0.0).bits(5.0, 1.0) == np.inf
    assert law.quantile([0.1, 0.25, 0.26, 0.75]).tolist() == pytest.approx([3.0, 3.0, 3.5, 3.5], rel=1e-9)


def test_a_law_of_a_logarithm_knows_nothing_below_zero() -> None:
    law = NumberLaw.of(0.0, 3.0, 2.0, logs=True)
    assert law.bits(-4.0, 1.0) == np.inf
    assert law.bits(0.0, 1.0) == pytest.approx(-np.log2(law.cdf(0.5)), rel=1e-12)
    assert law.cdf([-1.0, 0.0]).tolist() == [0.0, 0.0]
    assert (law.quantile([1e-6, 0.01]) > 0).all()


@pytest.mark.parametrize("size", [1e-300, 1e-30, 1.0, 1e30, 1e300])
@pytest.mark.parametrize("shape", SHAPES)
@pytest.mark.filterwarnings("error::RuntimeWarning")
def test_any_size(shape: float, size: float) -> None:
    """What holds at 1 holds at 1e-300 and 1e300."""
    law, same = NumberLaw.of(2.0 * size, size, shape), NumberLaw.of(2.0, 1.0, shape)
    levels = np.array([0.01, 0.25, 0.5, 0.9])
    np.testing.assert_allclose(law.quantile(levels) / size, same.quantile(levels), rtol=1e-9)
    spots = np.array([-3.0, 1.5, 2.0, 8.0])
    np.testing.assert_allclose(law.cdf(spots * size), same.cdf(spots), rtol=1e-9)
    for width in (0.001, 0.15, 3.0):
        assert law.bits(2.5 * size, width * size) == pytest.approx(same.bits(2.5, width), rel=1e-9)
    assert law.crps(2.5 * size) / size == pytest.approx(same.crps(2.5), rel=1e-9)


def test_bits_far_out_are_finite_and_grow() -> None:
    for shape in (NORMAL, LAPLACE, 1.0, 30.0):
        law = NumberLaw.of(0.0, 1.0, shape)
        for width in (0.01, 1.0):
            bits = [law.bits(x, width) for x in np.logspace(0, 12, 49).tolist()]
            assert np.isfinite(bits).all()
            assert (np.diff(bits) > 0).all()
