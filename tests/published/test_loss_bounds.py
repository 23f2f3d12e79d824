"""Static Bayes, fixed share and specialists against their published loss bounds, and against plain formulas.

Static Bayes: the loss is at most that of any model plus its prior cost (minus log2 of its prior).
Fixed share with a rate (Herbster & Warmuth 1998): the loss is at most that of any sequence of models, plus the
prior cost of the first and, for each row after it, log2(1 / (1 - rate)) where the model stays and log2(1 / rate) +
the prior cost of the next one where it changes. Specialists (Freund, Schapire, Singer & Warmuth 1997): over the rows
where one is awake, the mixture loses at most that one's loss there plus its prior cost. Half and half costs one bit
more; each of R rates log2(R) more. All in bits, all for any losses whatever.
"""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra import numpy as arrays
from logs import by_appearance

from seqmix.mixture.mixture import Mixture
from seqmix.mixture.weights import RATES, Weights
from seqmix.models import registry
from seqmix.models.protocol import Context, Model
from seqmix.series.rows import CHUNK, Rows

DATA = Path(__file__).parents[1] / "data"


def mixed(weights: Weights, losses: np.ndarray) -> np.ndarray:
    """Loss of the mixture on each row."""
    return weights.mix(losses, np.full(len(losses), -1, dtype=np.int32))[0]


def costs_of(models: int, seed: int) -> np.ndarray:
    return np.random.default_rng(seed).integers(1, 9, models).astype(float)


def matrices() -> dict[str, np.ndarray]:
    """Random and adversarial losses, (rows, models)."""
    rng = np.random.default_rng(2024)
    turns = np.full((3000, 4), 3.0)  # the best model changes every 250 rows
    turns[np.arange(3000), np.arange(3000) // 250 % 4] = 0.1
    traitor = rng.exponential(1.0, (2000, 3))  # perfect for long, then the worst of all
    traitor[:1500, 0] = 0.0
    traitor[1500:, 0] = 40.0
    return {
        "even": rng.exponential(2.0, (2000, 8)),
        "nearly alike": 1.0 + 1e-6 * rng.random((2000, 5)),
        "one good": rng.exponential(2.0, (2000, 6)) * [1, 1, 0.3, 1, 1, 1],
        "turns": turns,
        "traitor": traitor,
        "huge": np.where(rng.random((1000, 4)) < 0.5, 0.0, 1e6),
        "zeros": np.zeros((500, 3)),
        "against the heaviest": against_the_heaviest(),
        "against the heaviest, switching": against_the_heaviest(RATES),
    }


def against_the_heaviest(rates: tuple[float, ...] = ()) -> np.ndarray:
    """Each row costs the model with most weight 8 bits, the others nothing."""
    weights = Weights(costs_of(5, 5), rates)
    losses = np.zeros((1500, 5))
    for row in losses:
        row[np.argmax(weights.now())] = 8.0
        mixed(weights, row[None, :])
    return losses


MATRICES = matrices()
every_matrix = pytest.mark.parametrize("losses", MATRICES.values(), ids=MATRICES)


def cheapest_sequence(losses: np.ndarray, costs: np.ndarray, rate: float) -> float:
    """Least loss and cost together, over all sequences of models (dynamic programming)."""
    best = costs + losses[0]
    for row in losses[1:]:
        best = row + np.minimum(best - np.log2(1 - rate), best.min() - np.log2(rate) + costs)
    return float(best.min())


def slack(losses: np.ndarray) -> float:
    """What sums in double precision may be off by, in bits."""
    return 1e-6 + 1e-13 * float(np.nansum(losses))


@every_matrix
def test_static_bayes(losses: np.ndarray) -> None:
    weights = Weights(costs_of(losses.shape[1], 5), ())
    assert mixed(weights, losses).sum() <= (losses.sum(axis=0) + weights.costs).min() + slack(losses)


@every_matrix
@pytest.mark.parametrize("rate", [0.3, 0.05, 0.0005])
def test_fixed_share(losses: np.ndarray, rate: float) -> None:
    weights = Weights(costs_of(losses.shape[1], 5), (rate,))
    assert mixed(weights, losses).sum() <= cheapest_sequence(losses, weights.costs, rate) + 1 + slack(losses)


@every_matrix
def test_half_and_half(losses: np.ndarray) -> None:
    weights = Weights(costs_of(losses.shape[1], 5))
    bits = mixed(weights, losses).sum()
    assert bits <= (losses.sum(axis=0) + weights.costs).min() + 1 + slack(losses)
    for rate in RATES:
        camp = 1 + np.log2(len(RATES))
        assert bits <= cheapest_sequence(losses, weights.costs, rate) + camp + slack(losses)


@every_matrix
@pytest.mark.parametrize("seed", [1, 2])
def test_specialists(losses: np.ndarray, seed: int) -> None:
    losses = asleep(losses, seed)
    weights = Weights(costs_of(losses.shape[1], 5), ())
    bits = mixed(weights, losses)
    for i, cost in enumerate(weights.costs):
        awake = ~np.isnan(losses[:, i])
        assert bits[awake].sum() <= losses[awake, i].sum() + cost + slack(losses)


def asleep(losses: np.ndarray, seed: int) -> np.ndarray:
    """The same losses, most models asleep by chance or in turns; the first one never sleeps."""
    rng = np.random.default_rng(seed)
    rows, models = losses.shape
    sleeps = rng.random((rows, models)) < rng.random(models)
    sleeps[:, -1] = np.arange(rows) % 8 > 0
    sleeps[:, 0] = False
    return np.where(sleeps, np.nan, losses)


some_losses = arrays.arrays(
    np.float64,
    st.tuples(st.integers(1, 30), st.integers(1, 5)),
    elements=st.one_of(st.floats(0, 20), st.floats(0, 1e5), st.sampled_from([0.0, 1.0, 1e-12, 1e6])),
)


@given(some_losses, st.sampled_from([0.5, 0.05, 1e-4]), st.integers(0, 99))
@settings(max_examples=150, deadline=None)
def test_bounds_hold_for_any_losses(losses: np.ndarray, rate: float, seed: int) -> None:
    costs = costs_of(losses.shape[1], seed)
    static, switching = Weights(costs, ()), Weights(costs, (rate,))
    least = (losses.sum(axis=0) + static.costs).min()
    assert mixed(static, losses).sum() <= least + slack(losses)
    bits = mixed(switching, losses).sum()
    assert bits <= least + 1 + slack(losses)
    assert bits <= cheapest_sequence(losses, switching.costs, rate) + 1 + slack(losses)


# ---- the same formulas in plain Python, in the log domain: the mixture is no better than it may be, either


def plain(losses: np.ndarray, costs: np.ndarray, rates: tuple[float, ...]) -> list[float]:
    """The loss of each row by the definitions: static Bayes and fixed share, half and half, sleepers left out."""
    camps = [0.0] if not rates else [-1.0] + [-1.0 - np.log2(len(rates))] * len(rates)
    weights = [-costs.astype(float) for _ in camps]  # log2
    out = []
    for row in losses:
        awake = ~np.isnan(row)
        said = []
        for r, own in enumerate(weights):
            mass = np.logaddexp2.reduce(own[awake] - row[awake]) - np.logaddexp2.reduce(own[awake])
            said.append(mass)
            own[awake] -= row[awake] + mass
            if r:
                rate = rates[r - 1]
                own[:] = np.logaddexp2(own + np.log2(1 - rate), np.log2(rate) - costs)
        before = np.logaddexp2.reduce(camps)
        camps = [camp + mass for camp, mass in zip(camps, said, strict=True)]
        out.append(float(before - np.logaddexp2.reduce(camps)))
    return out


@pytest.mark.parametrize("rates", [(), (0.02,), RATES], ids=["static", "one rate", "three rates"])
@pytest.mark.parametrize("name", ["even", "turns", "traitor", "against the heaviest"])
@pytest.mark.parametrize("sleeping", [False, True])
def test_plain_formulas(name: str, rates: tuple[float, ...], sleeping: bool) -> None:
    losses = asleep(MATRICES[name], 3) if sleeping else MATRICES[name]
    weights = Weights(costs_of(losses.shape[1], 5), rates)
    np.testing.assert_allclose(mixed(weights, losses), plain(losses, weights.costs, rates), rtol=1e-9, atol=1e-9)


# ---- real logs


def real(name: str) -> tuple[str, np.ndarray]:
    if name == "alice29, the first 20,000 bytes":
        return "bytes", np.frombuffer((DATA / "alice29.txt").read_bytes()[:20_000], dtype=np.uint8).astype(np.int32)
    bases = np.array(list((DATA / "dna_phix174.txt").read_text().strip()))
    return "states", by_appearance(bases)


@pytest.fixture(scope="module", params=["alice29, the first 20,000 bytes", "phiX174"])
def real_losses(request: pytest.FixtureRequest) -> tuple[np.ndarray, np.ndarray]:
    """Losses of every model of the library on a real log, (rows, models), and their prior costs."""
    kind, codes = real(request.param)
    chunks = [Rows(codes[at : at + CHUNK], None, at) for at in range(0, len(codes), CHUNK)]
    models = registry.make(kind, Context(), share=0.0)  # those that never sleep
    losses = np.stack([np.concatenate([model.absorb(rows) for rows in chunks]) for model in models], axis=1)
    return losses, np.array([model.prior_cost for model in models])


def test_bounds_on_real_logs(real_losses: tuple[np.ndarray, np.ndarray]) -> None:
    losses, costs = real_losses
    static, both = Weights(costs, ()), Weights(costs)
    least = (losses.sum(axis=0) + static.costs).min()
    assert mixed(static, losses).sum() <= least + 1e-6
    bits = mixed(both, losses).sum()
    assert bits <= least + 1 + 1e-6
    for rate in RATES:
        assert bits <= cheapest_sequence(losses, both.costs, rate) + 1 + np.log2(3) + 1e-6


def test_specialists_on_real_logs(real_losses: tuple[np.ndarray, np.ndarray]) -> None:
    losses, costs = real_losses
    losses = asleep(losses, 4)
    weights = Weights(costs, ())
    bits = mixed(weights, losses)
    for i, cost in enumerate(weights.costs):
        awake = ~np.isnan(losses[:, i])
        assert bits[awake].sum() <= losses[awake, i].sum() + cost + 1e-6


@pytest.mark.parametrize("name", ["alice29, the first 20,000 bytes", "phiX174"])
def test_compressors_that_sleep_keep_the_bound_of_specialists(name: str) -> None:
    """Freund, Schapire, Singer & Warmuth 1997: on its waking rows, no more than the model's loss and its prior cost."""
    kind, codes = real(name)
    models = registry.make(kind, Context(), share=0.5)
    mixture = Mixture(models, kind=kind, rates=())
    losses = []

    def watched(model: Model) -> Callable[..., np.ndarray]:
        absorb = model.absorb

        def both(*of: Any) -> np.ndarray:
            bits = absorb(*of)
            losses.append((model.name, bits))
            return bits

        return both

    for model in models:
        model.absorb = watched(model)
    bits = np.concatenate([mixture.absorb(codes[at : at + 500]) for at in range(0, 10_000, 500)])
    slept = 0
    for name, cost in zip(mixture.names, mixture.weights.costs, strict=True):
        own = np.concatenate([part for one, part in losses if one == name])[: len(bits)]
        awake = ~np.isnan(own)
        slept += int((~awake).sum())
        assert bits[awake].sum() <= own[awake].sum() + cost + 1e-6
    assert slept > 1000


@pytest.mark.parametrize("name", ["alice29, the first 20,000 bytes", "phiX174"])
@pytest.mark.parametrize(("rates", "more"), [((), 0.0), (RATES, 1.0)], ids=["static", "default"])
def test_whole_mixture_on_real_logs(name: str, rates: tuple[float, ...], more: float) -> None:
    kind, codes = real(name)
    mixture = Mixture(kind=kind, rates=rates)
    mixture.absorb(codes[:5000])
    assert (mixture.bits - mixture.model_bits - mixture.weights.costs).max() <= more + 1e-6
