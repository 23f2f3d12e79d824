"""Any log of numbers: the same in any pieces, and what is said of it are numbers that can be."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest

from seqmix.improbable import of_number
from seqmix.mixture.numbers import LIGHT, NumberMixture
from seqmix.models.protocol import Context
from seqmix.series.rows import Rows

SIZES = (1.0, 1.0, 1.0, 1e-3, 1e5, 1e-150, 1e120, 1e250)


def any_log(rng: np.random.Generator) -> np.ndarray:
    """Noise, counts, rules and walks, of any size and fineness, with holes and with numbers out of all measure."""
    n = int(rng.integers(3, 100))
    makers = (
        lambda: rng.normal(size=n),
        lambda: rng.normal(size=n).cumsum(),
        lambda: np.exp(3 * rng.normal(size=n)),
        lambda: rng.standard_cauchy(n),
        lambda: rng.poisson(rng.choice([0.2, 5.0, 300.0]), n).astype(float),
        lambda: rng.choice([0.0, 1.0, 5.5], n),
        lambda: np.arange(n) ** 2.0,
        lambda: np.tile(rng.normal(size=4), n)[:n],
        lambda: 2.0 ** rng.integers(-60, 60, n),
        lambda: np.zeros(n),
    )
    values = makers[int(rng.integers(len(makers)))]() * rng.choice(SIZES)
    if rng.random() < 0.5:
        values = np.round(values, int(rng.integers(0, 4)))
    if rng.random() < 0.4:
        values[rng.random(n) < 0.15] = np.nan
    if rng.random() < 0.2:
        values[: int(rng.integers(0, n))] = 0.0
    if rng.random() < 0.2:
        values[int(rng.integers(0, n))] = 1e300
    return values


@pytest.mark.filterwarnings("error")
@pytest.mark.parametrize("seed", range(20))
def test_any_log_of_numbers(seed: int) -> None:
    rng = np.random.default_rng(seed)
    values = any_log(rng)
    context = Context((7,)) if rng.random() < 0.5 else Context()
    cuts = [0, *sorted(set(rng.integers(1, len(values), 3).tolist())), len(values)]
    whole, pieces, told = (NumberMixture(context=context) for _ in range(3))
    bits = whole.absorb(values)
    assert np.isfinite(bits).all()
    assert (bits >= 0).all()
    assert np.array_equal(np.concatenate([pieces.absorb(values[a:b]) for a, b in pairwise(cuts)]), bits)
    for a, b in pairwise(cuts):
        some, laws = told.tell(Rows.of(values[a:b], None, a))
        assert np.array_equal(some, bits[a:b])
        for t, law in enumerate(laws):
            if law is not None:
                value, width = told.latest_cells[:, t].tolist()
                found = of_number(law, value, width, law.lighter(LIGHT).median)
                assert 0.0 <= found.p_value <= 1.0
                assert np.isfinite(found.expected_bits)
    for law in whole.walk(3):
        quantiles = law.quantile([0.05, 0.25, 0.5, 0.75, 0.95])
        assert np.isfinite(quantiles).all()
        assert (np.diff(quantiles) >= 0).all()


@pytest.mark.parametrize("last", [2.9e22, -2.9e22, 1e300])
def test_counts_and_then_a_number_that_is_none(last: float) -> None:
    values = np.array([0.0, 1.0, 3.0, 2.0] * 20 + [last, 1.0, 2.0])
    bits = NumberMixture(["counts", "trend"], context=Context()).absorb(values)
    assert np.isfinite(bits).all()
