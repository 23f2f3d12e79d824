"""Laws of numbers against scipy, and their scores against closed forms.

Student's t, normal and Laplace laws: scipy.stats. Continuous ranked probability score: Gneiting & Raftery 2007 for
the normal law, Jordan, Krueger & Lerch 2019 for the Laplace and Student's t law (formulas from memory, each checked
here against an integral by scipy).
"""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest
from scipy import integrate, special, stats

from seqmix.kernels import numbers as kernel
from seqmix.kernels import view
from seqmix.models.laws import LAPLACE, NORMAL, UNIFORM, NumberLaw, log_peak, span

DF = (1.0, 1.3, 2.0, 2.5, 3.0, 4.0, 7.0, 10.0, 30.5, 100.0, 333.0, 1e3, 1e4, 1e5, 1e6, 1e7)
SHAPES = (NORMAL, LAPLACE, UNIFORM, 1.0, 1.3, 2.0, 4.0, 10.0, 100.0, 5e3, 1e6)


def standard(shape: float) -> stats.rv_continuous:
    """The same standard law of scipy."""
    if shape == NORMAL:
        return stats.norm()
    if shape == LAPLACE:
        return stats.laplace()
    return stats.uniform(-1, 2) if shape == UNIFORM else stats.t(shape)


@pytest.mark.parametrize("shape", [NORMAL, LAPLACE, UNIFORM, *DF])
class TestAgainstScipy:
    def test_density_at_the_centre(self, shape: float) -> None:
        assert log_peak(shape) == pytest.approx(standard(shape).logpdf(0.0), abs=1e-10)

    def test_cdf_in_both_tails(self, shape: float) -> None:
        law = NumberLaw.of(-3.0, 2.5, shape)
        z = np.concatenate([-np.logspace(6, -4, 400), [0.0], np.logspace(-4, 6, 400)])
        expected = standard(shape).cdf(z)
        sure = expected > 1e-290
        np.testing.assert_allclose(law.cdf(-3.0 + 2.5 * z)[sure], expected[sure], rtol=1e-10 if shape < 1e6 else 1e-9)
        assert (law.cdf(-3.0 + 2.5 * z)[~sure] < 1e-289).all()

    def test_quantiles(self, shape: float) -> None:
        law = NumberLaw.of(-3.0, 2.5, shape)
        # near 1, a level is known to some 1e-16 / (1 - level) of the tail only
        levels = np.concatenate([np.logspace(-9, -1, 33), [0.25, 0.5, 0.75, 0.9], 1 - np.logspace(-6, -2, 22)])
        found = law.quantile(levels)
        np.testing.assert_allclose(found, -3.0 + 2.5 * standard(shape).ppf(levels), rtol=1e-8, atol=1e-8)
        np.testing.assert_allclose(standard(shape).cdf((found + 3.0) / 2.5), levels, rtol=1e-8, atol=1e-11)

    def test_masses_of_cells(self, shape: float) -> None:
        """A cell on either side, from far narrower than the law to far wider, by differences of the smaller tail."""
        law, reference = NumberLaw.of(20.0, 0.5, shape), standard(shape)
        for width in (5.0, 1.0, 0.5, 0.25):
            for x in 20.0 + width * np.array([-40, -9, -3, -1, 0, 1, 3, 9, 40]):
                low, high = (np.array([x - width / 2, x + width / 2]) - 20.0) / 0.5
                if low > 0:
                    low, high = -high, -low
                expected = reference.cdf(high) - reference.cdf(low)
                if expected > 1e-280:
                    assert 2 ** -law.bits(x, width) == pytest.approx(expected, rel=1e-9)
                elif expected == 0 and shape == UNIFORM:
                    assert law.bits(x, width) == np.inf
        # density times width, where that is the mass to ten digits
        for z in (0.0, 0.7, -3.0):
            bits = law.bits(20.0 + 0.5 * z, 1e-7)
            expected = 0.0 if shape == UNIFORM and abs(z) > 1 else float(reference.pdf(z)) * 2e-7
            assert 2.0**-bits == pytest.approx(expected, rel=1e-8)


def test_normal_and_laplace_masses_beyond_the_reach_of_doubles() -> None:
    """By the logarithms of the tails: the bits of a value a thousand scales away are a number, and the right one."""
    for z in (30.0, 50.0, 300.0, 1000.0):
        laplace = NumberLaw.of(0.0, 1.0, LAPLACE).bits(z, 2.0)
        assert laplace == pytest.approx((z - 1 - np.log(0.5 * -np.expm1(-2.0))) / np.log(2), rel=1e-12)
        normal = NumberLaw.of(0.0, 1.0, NORMAL).bits(z, 2.0)
        assert normal == pytest.approx(-stats.norm.logsf(z - 1) / np.log(2), rel=0.01)


def test_cdf_of_a_mixture_on_both_scales() -> None:
    shapes = [NORMAL, 3.0, NORMAL, LAPLACE]
    law = NumberLaw.of([1.0, 0.5, 2.0, 3.0], [0.3, 0.6, 0.0, 1.5], shapes, [4, 3, 1, 2], [False, True, False, False])
    x = np.linspace(-6, 12, 401)
    expected = 0.4 * stats.norm.cdf(x, 1.0, 0.3) + 0.1 * (x >= 2.0) + 0.2 * stats.laplace.cdf(x, 3.0, 1.5)
    expected += 0.3 * np.where(x > 0, stats.t.cdf((np.log(np.maximum(x, 1e-300)) - 0.5) / 0.6, 3.0), 0.0)
    np.testing.assert_allclose(law.cdf(x), expected, rtol=1e-12)


# ---- masses over all cells add to 1 ------------------------------------------------------------------------


def masses(law: NumberLaw, points: np.ndarray, width: float) -> np.ndarray:
    """Mass of the cell around each point: `bits`, without the time of a call each."""
    out, parts = np.empty(len(points)), law._parts
    work = view(np.empty(len(law.weights)))
    for i, x in enumerate(points.tolist()):
        out[i] = kernel.mixed_bits(*span(x, width), *parts, work)
    assert law.bits(float(points[0]), width) == (out[0] if out[0] < 1e300 else np.inf)
    return np.exp2(-out)


def whole(law: NumberLaw, width: float, centre: float, cells: int) -> float:
    """Mass of so many cells on either side of the centre's, and of all that lies beyond."""
    middle = round(centre / width)
    points = (middle + np.arange(-cells, cells + 1.0)) * width
    low, high = float(points[0]) - 0.5 * width, float(points[-1]) + 0.5 * width
    # an edge belongs to the cell above it
    below, above = law.cdf([np.nextafter(low, -np.inf), np.nextafter(high, -np.inf)])
    return float(masses(law, points, width).sum() + below + (1 - above))


WIDTHS = (1e-6, 1e-4, 1e-3, 0.019, 0.021, 0.1, 0.199, 0.201, 0.5, 1.0, 3.0, 10.0, 1e3, 1e6)


def enough(width: float) -> int:
    """Cells until what lies beyond is even enough: within a cell the density is then as good as straight."""
    return int(np.clip((1e8 / width) ** (1 / 3), 400, 5000))


@pytest.mark.parametrize("width", WIDTHS)
@pytest.mark.parametrize("shape", SHAPES)
def test_masses_add_to_one(shape: float, width: float) -> None:
    """width: of a cell, in scales of the law."""
    for centre in (0.0, 0.37 * width - 12.6):
        law = NumberLaw.of(centre, 1.0, shape)
        assert whole(law, width, centre, enough(width)) == pytest.approx(1.0, abs=1e-9)


@pytest.mark.parametrize("scale", [0.01, 1.0])
@pytest.mark.parametrize("width", WIDTHS)
@pytest.mark.parametrize("shape", SHAPES)
def test_masses_add_to_one_on_the_log_scale(shape: float, width: float, scale: float) -> None:
    """width: of a cell, in scales of the law at its centre."""
    law = NumberLaw.of(2.0, scale, shape, logs=True)
    middle = np.exp(2.0)
    assert whole(law, width * scale * middle, middle, enough(width) // 2) == pytest.approx(1.0, abs=1e-9)


@pytest.mark.parametrize("width", [1e-5, 1e-3, 0.05, 0.1, 0.5, 2.0, 100.0])
def test_masses_of_mixtures_add_to_one(width: float) -> None:
    rng = np.random.default_rng(8)
    for logs in (False, True):
        scales = np.exp(rng.normal(size=12) - logs)
        law = NumberLaw.of(rng.normal(size=12), scales, rng.choice(SHAPES, 12), rng.random(12), logs)
        atoms = NumberLaw.of(np.round(np.array([0.0, 3.0, 7.0]) * width, 12), 0.0)
        both = NumberLaw.combine([0.7, 0.3], [law, atoms])
        assert whole(both, width, 1.0, 2 * enough(width)) == pytest.approx(1.0, abs=1e-9)


@pytest.mark.parametrize("shape", [NORMAL, LAPLACE, 1.0, 5.0, 1e3])
def test_masses_far_out_add_to_what_lies_there(shape: float) -> None:
    """A thousand cells in the tail against the cdf of scipy, relative to their mass."""
    for start in (5.0, 15.0, 30.0):
        for width in (1e-3, 0.03):
            points = start + (np.arange(1000) + 0.5) * width
            reference = standard(shape)
            expected = reference.cdf(-start) - reference.cdf(-(start + 1000 * width))
            if expected > 1e-290:
                law = NumberLaw.of(0.0, 1.0, shape)
                assert masses(law, points, width).sum() == pytest.approx(expected, rel=1e-3)


# ---- continuous ranked probability score -------------------------------------------------------------------


def crps(shape: float, z: float) -> float:
    """Of a standard law, in closed form."""
    if shape == NORMAL:  # Gneiting & Raftery 2007, from memory
        return float(z * (2 * stats.norm.cdf(z) - 1) + 2 * stats.norm.pdf(z) - 1 / np.sqrt(np.pi))
    if shape == LAPLACE:  # Jordan, Krueger & Lerch 2019, from memory
        return abs(z) + np.exp(-abs(z)) - 0.75
    # the same for Student's t
    spread = 2 * np.sqrt(shape) / (shape - 1) * special.beta(0.5, shape - 0.5) / special.beta(0.5, shape / 2) ** 2
    law = stats.t(shape)
    return float(z * (2 * law.cdf(z) - 1) + 2 * law.pdf(z) * (shape + z * z) / (shape - 1) - spread)


@pytest.mark.parametrize("shape", [NORMAL, LAPLACE, 1.5, 2.0, 3.0, 5.0, 12.0, 200.0])
@pytest.mark.parametrize("z", [0.0, 0.3, -1.0, 2.5, -8.0, 100.0])
def test_crps_of_one_part(shape: float, z: float) -> None:
    cdf = standard(shape).cdf
    by_integral = integrate.quad(lambda y: cdf(y) ** 2, -np.inf, z)[0]
    by_integral += integrate.quad(lambda y: cdf(-y) ** 2, z, np.inf)[0]
    assert crps(shape, z) == pytest.approx(by_integral, rel=1e-6)
    for scale in (1.0, 250.0):
        found = NumberLaw.of(7.0, scale, shape).crps(7.0 + scale * z)
        assert found / scale == pytest.approx(crps(shape, z), rel=1e-4, abs=1e-4)


def test_crps_of_a_mixture_with_a_wide_part() -> None:
    """As the models give it: a narrow bulk and a little weight on scales a hundred times as wide."""
    law = NumberLaw.of([0.0, 1.0, 0.0], [1.0, 0.5, 100.0], [4.0, NORMAL, LAPLACE], [0.6, 0.37, 0.03])
    spots, weights = np.polynomial.legendre.leggauss(200)
    for x in (0.0, 1.5, -4.0, 60.0):
        cuts = sorted({-3e3, -300.0, -20.0, -3.0, 0.0, 1.0, 3.0, 20.0, 300.0, 3e3, x})
        expected = 0.0
        for a, b in pairwise(cuts):
            y = a + (b - a) * (spots + 1) / 2
            expected += float(weights @ (law.cdf(y) - (y >= x)) ** 2) * (b - a) / 2
        assert law.crps(x) == pytest.approx(expected, rel=1e-3)
