"""Compressors as models: the law from code lengths, and the schedule by which they sleep."""

from __future__ import annotations

import os
import time
from collections.abc import Iterator, Sequence
from itertools import pairwise
from math import exp, log2

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as some

from seqmix import testing
from seqmix.errors import OptionError
from seqmix.mixture.mixture import Mixture
from seqmix.models import compressed, registry
from seqmix.models.compressed import STRETCH, WINDOWS, Allowance, Compressed, Reader
from seqmix.models.compressed_bins import CompressedBins
from seqmix.models.history import History
from seqmix.models.protocol import Context
from seqmix.reading import LAST, with_last
from seqmix.series.rows import Rows

START, A_ROW = 50_000.0, 20.0  # microseconds: awake at first, then now and then


class Toy:
    """Two bytes, if the history has the last three of the candidate; else as many as it is long."""

    name = summary = source = "toy"
    cost = 4.0
    reach = 100
    informed = False

    def code_length(self, history: bytes, candidates: Sequence[bytes]) -> list[float]:
        return [8.0 * (2 if candidate[-3:] in history else len(candidate)) for candidate in candidates]


ToyModel = compressed.model_of(Toy)


def rows_of(codes: Sequence[int] | np.ndarray) -> Rows:
    return Rows(np.asarray(codes, dtype=np.int32), None, 0)


def in_order(codes: np.ndarray) -> np.ndarray:
    """The codes numbered by first appearance."""
    _, first, which = np.unique(codes, return_index=True, return_inverse=True)
    return np.argsort(np.argsort(first))[which].astype(np.int32)


def habits(rows: int, states: int = 6, seed: int = 3) -> np.ndarray:
    """A program of 40 rows, again and again, a tenth of them replaced."""
    rng = np.random.default_rng(seed)
    program = rng.integers(0, states, 40)
    codes = np.where(rng.random(rows) < 0.1, rng.integers(0, states, rows), np.resize(program, rows))
    return in_order(codes)


def pieces_of(model: Compressed | CompressedBins, rows: Rows, cuts: Sequence[int]) -> np.ndarray:
    return np.concatenate([model.absorb(rows[a:b]) for a, b in pairwise([0, *cuts, len(rows)])])


# ---- the law -------------------------------------------------------------------------------------------------------


def by_hand(codes: list[int], toy: Toy) -> list[float]:
    """Losses among the states seen, from the formula in the docstring of `Compressed`, in plain Python."""
    counts: list[float] = []
    factors, trust, losses = [0.3] * len(WINDOWS), 0.5, []
    for t, code in enumerate(codes):
        bits = 0.0
        if counts:
            begun = t // STRETCH * STRETCH
            far = max(begun - toy.reach, 0)
            history = bytes(codes[far:begun])
            plain = [count / sum(counts) for count in counts]
            asked = sorted({codes[i + 5] for i in range(far, t - 5) if codes[i : i + 5] == codes[t - 5 : t]})
            others = [state for state in range(len(counts)) if state not in asked]
            sharp, lengths = plain, {}
            if asked:
                spokesman = max(others, key=lambda state: (plain[state], -state)) if others else 0
                for state in range(len(counts)):
                    shown = state if state in asked else spokesman
                    ends = [bytes(codes[max(t - window, far) : t]) + bytes([shown]) for window in WINDOWS]
                    lengths[state] = [bits / 8 for bits in toy.code_length(history, ends)]
                least = [min(column) for column in zip(*lengths.values(), strict=True)]
                lengths = {x: [b - a for a, b in zip(least, line, strict=True)] for x, line in lengths.items()}
                heavy = [plain[x] * exp(-np.dot(factors, lengths[x])) for x in range(len(counts))]
                sharp = [mass / sum(heavy) for mass in heavy]
            if code < len(counts):
                mass = trust * sharp[code] + (1 - trust) * plain[code]
                bits = -log2(mass)
                trust = 0.99 * trust * sharp[code] / mass + 0.005
                for w in range(len(WINDOWS)) if asked else ():
                    mean = sum(sharp[x] * lengths[x][w] for x in lengths)
                    factors[w] += 0.02 * (mean - lengths[code][w])
        losses.append(bits)
        counts += [0.5] * (code + 1 - len(counts))
        counts[code] += 1
    return losses


def test_losses_are_those_computed_by_hand():
    codes = habits(300)
    reader = Reader(Toy(), 0, None)
    want = np.full(len(codes), -1, dtype=np.int32)
    past = History(1).ahead(codes, None)
    found = reader.learn(past, codes, want, np.zeros((1, 1)))
    np.testing.assert_allclose(found, by_hand(codes.tolist(), Toy()), rtol=1e-9, atol=1e-12)
    assert found[200:].mean() < log2(6) - 0.5, "and the repeats were found"


def test_a_row_awake_is_paid_for_even_if_nothing_was_compressed():
    model = ToyModel(0, Allowance(START, A_ROW))
    rows = 20_000
    bits = model.absorb(rows_of(in_order(np.random.default_rng(5).integers(0, 200, rows))))
    assert model.reader.calls < rows / 100
    assert (~np.isnan(bits)).sum() * compressed._ROW <= START + A_ROW * rows


def test_without_a_repeat_the_law_is_that_of_plain_frequencies():
    model = ToyModel()
    model.absorb(rows_of([0, 1, 1, 2, 1]))
    law = model.predict()
    np.testing.assert_allclose(law.masses / (1 - law.unseen), np.array([1.5, 3.5, 1.5]) / 6.5)
    assert model.reader.calls == 0


@pytest.mark.parametrize("states", [1, 2, 191, 192, 193, 300])
def test_laws_add_up_to_one_for_any_alphabet(states):
    """From 193 states on a letter takes two bytes."""
    rng = np.random.default_rng(states)
    codes = np.concatenate([np.arange(states), np.resize(in_order(rng.integers(0, states, 50)), 200)])
    model = ToyModel()
    for a in range(0, len(codes), 40):
        model.absorb(rows_of(codes[a : a + 40]))
        law = model.predict()
        assert law.masses.sum() + law.unseen == pytest.approx(1, abs=1e-12)
        assert (law.masses > 0).all()
    assert law.masses[codes[-50]] > 0.1 or states == 300


@pytest.mark.parametrize("compressor", registry.COMPRESSORS)
def test_the_compressors_tell_what_they_have_seen(compressor):
    one = compressor()
    program = bytes(np.random.default_rng(1).integers(0, 20, 60, dtype=np.uint8))
    history = 8 * program
    nothing, *lengths = one.code_length(history, [b"", program, program[::-1], program])
    assert lengths[0] == lengths[2] < lengths[1] - 160
    assert 0 <= lengths[0] - nothing < 160
    assert one.code_length(history, [b"", program]) == [nothing, lengths[0]]
    assert one.code_length(b"", [program])[0] > 60 * log2(20)


def test_code_lengths_that_cannot_be_raise():
    class Short(Toy):
        def code_length(self, history: bytes, candidates: Sequence[bytes]) -> list[float]:
            return [8.0]

    with pytest.raises(ValueError, match="code lengths are finite, one a candidate"):
        compressed.model_of(Short)().absorb(rows_of(habits(100)))


def test_a_built_in_dictionary_counts_for_bytes_only():
    class Informed(Toy):
        informed = True

    model = compressed.model_of(Informed)
    text = np.frombuffer(b"the milk of the day", dtype=np.uint8).astype(np.int32)
    on_bytes, on_states = model(256), model()
    on_bytes.absorb(rows_of(text))
    on_states.absorb(rows_of(in_order(text)))
    assert on_bytes.reader.calls >= 24 * len(WINDOWS) * len(text)
    assert on_states.reader.calls == 0


# ---- the schedule --------------------------------------------------------------------------------------------------


def test_awake_rows_are_the_same_for_any_chunks_and_any_speed():
    class Slow(Toy):
        def code_length(self, history: bytes, candidates: Sequence[bytes]) -> list[float]:
            time.sleep(0.0001)
            return super().code_length(history, candidates)

    rows = rows_of(habits(6000))
    whole = ToyModel(0, Allowance(START, A_ROW)).absorb(rows)
    awake = ~np.isnan(whole)
    assert 300 < awake.sum() < 4000
    assert awake[:STRETCH].all()
    assert awake[3000:].any()
    for cuts in ([1, 2, 3, 33], [4096], list(range(97, 6000, 97))):
        np.testing.assert_array_equal(pieces_of(ToyModel(0, Allowance(START, A_ROW)), rows, cuts), whole)
    np.testing.assert_array_equal(compressed.model_of(Slow)(0, Allowance(START, A_ROW)).absorb(rows), whole)


def test_awake_and_asleep_go_by_whole_stretches():
    awake = ~np.isnan(ToyModel(0, Allowance(START, A_ROW)).absorb(rows_of(habits(6400))))
    by_stretch = awake.reshape(-1, STRETCH)
    assert (by_stretch.all(axis=1) | ~by_stretch.any(axis=1)).all()


@pytest.mark.parametrize("share", [0.05, 0.3, 0.9])
def test_what_is_spent_stays_inside_the_share_and_one_stretch(share):
    codes = habits(6000)
    models = registry.make("states", Context(), None, share)
    readers = [model.reader for model in models if isinstance(model, Compressed)]
    again = [model for model in registry.make("states", Context(), None, share) if isinstance(model, Compressed)]
    assert [reader._compressor.name for reader in readers] == ["deflate", "bzip2", "zstd", "brotli"]
    rows = rows_of(codes)
    for model in models:
        if isinstance(model, Compressed):
            reader, allowance = model.reader, model._allowance
            assert allowance == Allowance(*(share / (1 - share) / 4 * np.array([100_000.0, 5.0])))
            most = 40.0 + len(reader.windows) * 7 * reader._compressor.cost
            bits = []
            for a in range(0, len(rows), STRETCH):
                bits.append(model.absorb(rows[a : a + STRETCH]))
                assert reader.spent <= allowance.start + allowance.row * a + STRETCH * most
            whole = again.pop(0).absorb(rows)
            np.testing.assert_array_equal(np.concatenate(bits), whole)
            assert reader.spent > 0 or allowance.start < STRETCH * most


def test_share_of_nothing_of_everything_and_of_no_others():
    def named(models: Sequence[object]) -> set[str]:
        return {model.name for model in models if isinstance(model, Compressed | CompressedBins)}

    every = {compressor.name for compressor in registry.COMPRESSORS}
    for kind in ("states", "bytes", "numbers"):
        assert named(registry.make(kind, Context(), None, 0.0)) == set()
        assert named(registry.make(kind, Context(), None, 0.1)) == every
        for names, share in ((None, 1.0), (["deflate", "zstd"], 0.1)):
            made = [model for model in registry.make(kind, Context(), names, share) if model.name in every]
            assert all(model._allowance is None for model in made)
        with pytest.raises(OptionError, match="the model zstd is for a share of the run time over 0; leave it out"):
            registry.make(kind, Context(), ["tree" if kind != "numbers" else "trend", "zstd"], 0.0)
    with pytest.raises(OptionError, match=r"a share of the run time lies between 0 and 1, not 1\.5"):
        registry.make("states", Context(), None, 1.5)
    always = ToyModel(0, None).absorb(rows_of(habits(1000)))
    assert not np.isnan(always).any()


def asleep(start: float) -> Compressed:
    """A model that has spent what it had, at a row in the middle of a stretch."""
    model = ToyModel(0, Allowance(start, 1e-3))
    model.absorb(rows_of(habits(3000)[:2990]))
    assert model.predict() is None
    assert model.sleeps(200)
    return model


def test_roused_it_wakes_for_the_last_rows_that_the_first_allowance_pays():
    rows = rows_of(habits(3054)[2990:])
    cost = asleep(30_000.0).reader._row_cost()
    for start in (30_000.0, 40 * cost):
        model = asleep(start)
        model.rouse(64)
        assert not model.sleeps(64)
        awake = ~np.isnan(pieces_of(model, rows, [10, 11, 50]))
        paid = min(int(start / cost), 64)
        assert awake.tolist() == [False] * (64 - paid) + [True] * paid
        assert model.predict() is not None
    assert paid == 40


def test_one_that_is_not_roused_sleeps_on_and_one_always_awake_needs_no_call():
    model = asleep(30_000.0)
    assert np.isnan(model.absorb(rows_of(habits(3054)[2990:]))).all()
    always = ToyModel(0, None)
    always.rouse(0)
    assert not np.isnan(always.absorb(rows_of(habits(200)))).any()


def test_missing_rows_asleep_and_awake():
    codes = habits(400)
    codes[[25, 40, 41, 300]] = -1
    bits = ToyModel(0, None).absorb(rows_of(codes))
    assert (bits[[25, 40, 41, 300]] == 0).all()
    there = np.flatnonzero(codes >= 0)
    # a missing row is no letter: up to the end of the stretch the others cost as if it had not been
    np.testing.assert_array_equal(bits[there][:31], ToyModel(0, None).absorb(rows_of(codes[there]))[:31])
    model = asleep(30_000.0)
    assert np.isnan(model.absorb(rows_of([-1, 0, -1, -1]))).all()
    mixture = Mixture(["markov", "deflate"], share=1.0)
    assert not np.isnan(mixture.absorb(codes)).any()
    assert mixture.awake.tolist() == [396, 396]


@given(some.integers(0, 400), some.lists(some.integers(1, 150), max_size=8))
@settings(max_examples=60, deadline=None)
def test_with_last_gives_the_same_rows_and_the_last_ones_apart(count, sizes):
    rows = rows_of(np.arange(count))

    def chunks() -> Iterator[Rows]:
        at = 0
        for size in [*sizes, count]:
            if at < count:
                yield rows[at : at + size]
            at += size

    given_out = list(with_last(chunks()))
    assert np.concatenate([[], *(part.codes for part, _ in given_out)]).tolist() == list(range(count))
    assert all(len(part) for part, _ in given_out)
    for part, left in given_out:
        to_come = count - int(part.codes[0])
        assert left == (to_come if to_come <= LAST else -1)
    if count:
        assert min(count, LAST) in [left for _, left in given_out]


# ---- state, threads ------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("allowance", [None, Allowance(START, A_ROW)])
@pytest.mark.parametrize("cut", [1, 50, 64, 210, 900, 1999])
def test_goes_on_from_a_state_in_the_middle_of_a_stretch_and_of_a_change_of_letters(allowance, cut):
    """Some 200 rows in, a letter comes to take two bytes."""
    codes = np.concatenate([habits(150), np.arange(6, 230), habits(1626)])
    rows = rows_of(codes)
    first, second = ToyModel(0, allowance), ToyModel(0, allowance)
    first.absorb(rows[:cut])
    state = first.state()
    rest = first.absorb(rows[cut:])
    second.restore(state)
    np.testing.assert_array_equal(pieces_of(second, rows[cut:], [1]) if cut < 1999 else second.absorb(rows[cut:]), rest)
    whole = ToyModel(0, allowance).absorb(rows)
    np.testing.assert_array_equal(whole[cut:], rest)


def test_a_state_is_good_after_it_was_roused():
    rows = rows_of(habits(3054)[2990:])
    first, second = asleep(30_000.0), ToyModel(0, Allowance(30_000.0, 1e-3))
    first.rouse(64)
    first.absorb(rows[:20])
    second.restore(first.state())
    np.testing.assert_array_equal(second.absorb(rows[20:]), first.absorb(rows[20:]))


def test_one_thread_or_two_give_the_same(monkeypatch):
    codes = habits(5000)
    found = []
    for cores in (1, 2):
        monkeypatch.setattr(os, "sched_getaffinity", lambda _, cores=cores: set(range(cores)), raising=False)
        mixture = Mixture(["markov", "deflate", "bzip2", "zstd", "brotli"], share=0.5)
        bits = mixture.absorb(codes)
        law = mixture.predict()
        found.append((bits, mixture.awake, mixture.model_bits, law.masses))
    for one, two in zip(*found, strict=True):
        np.testing.assert_array_equal(one, two)


def test_numbers_sleep_by_the_same_schedule_whatever_the_chunks():
    rows = testing.waves(1500)
    deflate = next(model for model in registry.NUMBER_MODELS if model.name == "deflate")
    allowance = Allowance(10_000.0, 5.0)
    whole = deflate(testing.CONTEXT, allowance).absorb(rows)
    awake = ~np.isnan(whole) & (rows.codes >= 0)
    assert 0 < awake.sum() < 500
    for cuts in ([1, 127, 128, 129], list(range(50, 1500, 50))):
        np.testing.assert_array_equal(pieces_of(deflate(testing.CONTEXT, allowance), rows, cuts), whole)
