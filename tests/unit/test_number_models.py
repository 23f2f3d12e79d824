"""The contract: what must hold for every model of numbers, on any log."""

from __future__ import annotations

from collections.abc import Callable
from itertools import pairwise

import numpy as np
import pytest

from seqmix.mixture import mixture
from seqmix.mixture.numbers import NumberMixture
from seqmix.models import registry
from seqmix.models.compressed_bins import CompressedBins
from seqmix.models.numbers import NumbersModel
from seqmix.models.protocol import Context
from seqmix.series.rows import Rows
from seqmix.testing import CONTEXT, NUMBER_CHECKS, NUMBER_LOGS, made, small_counts, waves


@pytest.mark.parametrize("log", NUMBER_LOGS)
@pytest.mark.parametrize("model", registry.NUMBER_MODELS)
@pytest.mark.parametrize("check", NUMBER_CHECKS)
def test_every_model_keeps_the_contract(check: Callable[..., None], model: type[NumbersModel], log: str) -> None:
    check(made(model, "numbers"), NUMBER_LOGS[log](300 if issubclass(model, CompressedBins) else 700))


def test_any_chunking_of_a_mixture_gives_equal_bits() -> None:
    rows = waves(900)
    whole = NumberMixture(context=CONTEXT).absorb(rows)
    one = NumberMixture(context=CONTEXT)
    assert np.array_equal(np.concatenate([one.absorb(rows[a:b]) for a, b in pairwise([0, 3, 130, 131, 900])]), whole)
    assert np.isfinite(whole).all()


@pytest.mark.parametrize("size", [1e-3, 1e60])
def test_any_chunking_of_a_log_that_begins_with_zeros(size: float) -> None:
    values = np.concatenate([np.zeros(30), size * np.arange(1, 40)])
    whole, parts = NumberMixture(), NumberMixture()
    bits = whole.absorb(values)
    assert np.array_equal(np.concatenate([parts.absorb(values[a:b]) for a, b in pairwise([0, 11, 29, 69])]), bits)
    assert all(np.isfinite(law.median) for law in parts.walk(3))


def test_laws_told_by_a_mixture_are_those_it_predicts() -> None:
    """Rows before the unit is chosen, and those without a value, too."""
    rows = waves(300)
    assert rows.values is not None and rows.times is not None
    for size in (1.0, 1e60):
        values = rows.values * size
        values[:2] = 0.0
        scaled = Rows.of(values, rows.times, 0)
        one, stepwise = NumberMixture(context=CONTEXT), NumberMixture(context=CONTEXT)
        told = [one.tell(scaled[a:b]) for a, b in pairwise([0, 1, 60, 300])]
        losses = np.concatenate([bits for bits, _ in told])
        for t, law in enumerate(law for _, laws in told for law in laws):
            if np.isnan(values[t]):
                assert law is None
            elif t < 70 or t % 50 == 0:
                wanted = stepwise.predict(int(rows.times[t]))
                assert np.array_equal(law.weights, wanted.weights), t
                assert np.array_equal(law.centres, wanted.centres), t
            assert stepwise.absorb(scaled[t : t + 1])[0] == losses[t], t


def test_threads_change_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(mixture.os, "sched_getaffinity", lambda _: {0, 1, 2}, raising=False)
    bits = []
    for least in (1, 1 << 40, 1):
        monkeypatch.setattr(NumberMixture, "worth_threads", least)
        bits.append(NumberMixture(context=CONTEXT).absorb(waves(500)))
    assert np.array_equal(bits[0], bits[1])
    assert np.array_equal(bits[2], bits[1])


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
