"""The contract: what must hold for every model of the library, on any log."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest

from seqmix.models import registry
from seqmix.models.protocol import Ask, Model, StatesModel
from seqmix.series.rows import Rows

MINUTE = 60_000_000


def log(kind: str, rows: int, seed: int = 7) -> Rows:
    """A log with habits, noise, missing rows and, for states, new ones until late."""
    rng = np.random.default_rng(seed)
    codes = np.zeros(rows, dtype=np.int64)
    for t in range(1, rows):
        codes[t] = rng.integers(0, 14) if rng.random() < 0.15 else (codes[t - 1] + (t % 5 == 0)) % 9
    if kind == "bytes":
        codes = np.array([32, 97, 98, 65, 46, 10, 200, 0, 255, 99, 100, 101, 48, 49])[codes]
    else:
        _, first = np.unique(codes, return_index=True)
        rank = np.empty(14, dtype=np.int64)
        rank[codes[np.sort(first)]] = np.arange(len(first))
        codes = rank[codes]
    codes[rng.random(rows) < 0.02] = -1
    times = 1_700_000_000_000_000 + np.arange(rows, dtype=np.int64) * MINUTE if kind == "states" else None
    return Rows(codes.astype(np.int32), times, 0)


def every() -> list[tuple[str, type[StatesModel]]]:
    return [(kind, model) for model in registry.MODELS for kind in model.kinds]


def make(kind: str, model: type[StatesModel]) -> StatesModel:
    return model(256 if kind == "bytes" else 0)


def in_pieces(model: StatesModel, rows: Rows, cuts: list[int]) -> np.ndarray:
    edges = [0, *cuts, len(rows)]
    return np.concatenate([model.absorb(rows[a:b]) for a, b in pairwise(edges)])


@pytest.mark.parametrize(("kind", "model"), every())
class TestEveryModel:
    def test_follows_the_protocol(self, kind: str, model: type[StatesModel]) -> None:
        one = make(kind, model)
        assert isinstance(one, Model)
        assert one.prior_cost > 0
        assert one.summary and one.source

    def test_law_adds_up_and_is_what_is_charged(self, kind: str, model: type[StatesModel]) -> None:
        one, rows = make(kind, model), log(kind, 400)
        for t in range(len(rows)):
            row = rows[t : t + 1]
            code = int(row.codes[0])
            law = one.predict(None if row.times is None else int(row.times[0]))
            assert abs(law.masses.sum() + law.unseen - 1) < 1e-12
            assert (law.masses > 0).all()
            bits = one.absorb(row)[0]
            if code < 0:
                assert bits == 0
            else:
                mass = law.masses[code] if code < len(law.masses) else law.unseen
                assert np.isfinite(bits)
                assert abs(bits + np.log2(mass)) < 1e-9

    def test_laws_asked_for_are_the_laws_predicted(self, kind: str, model: type[StatesModel]) -> None:
        rows = log(kind, 600)
        states = 256 if kind == "bytes" else int(rows.codes.max()) + 1
        at = [0, 1, 5, 99, 311, 598, 599]
        whole, ask = make(kind, model), Ask.of(len(rows), at, states)
        plain = make(kind, model).absorb(rows)
        assert np.array_equal(whole.absorb(rows, ask), plain)
        stepwise = make(kind, model)
        done = 0
        for line, t in enumerate(at):
            stepwise.absorb(rows[done:t])
            done = t
            law = stepwise.predict(None if rows.times is None else int(rows.times[t]))
            known = len(law.masses)
            np.testing.assert_allclose(ask.laws[line, :known], law.masses, rtol=1e-9, atol=1e-15)
            assert not ask.laws[line, known:-1].any()
            assert abs(ask.laws[line, -1] - law.unseen) < 1e-12

    def test_any_chunking_gives_equal_bits(self, kind: str, model: type[StatesModel]) -> None:
        rows = log(kind, 3000)
        whole = make(kind, model).absorb(rows)
        for cuts in ([1], [64, 65, 127, 700], [1500], list(range(37, 3000, 37))):
            assert np.array_equal(in_pieces(make(kind, model), rows, cuts), whole)

    def test_state_out_and_in_gives_equal_bits(self, kind: str, model: type[StatesModel]) -> None:
        rows = log(kind, 1500)
        first = make(kind, model)
        first.absorb(rows[:900])
        state = first.state()
        assert all(isinstance(value, np.ndarray | int | float | str | None) for value in state.values())
        rest = first.absorb(rows[900:])
        second = make(kind, model)
        second.restore(state)
        assert np.array_equal(second.absorb(rows[900:]), rest)

    def test_new_states_and_missing_rows_only(self, kind: str, model: type[StatesModel]) -> None:
        one = make(kind, model)
        missing = Rows(np.full(5, -1, dtype=np.int32), np.arange(5, dtype=np.int64), 0)
        assert not one.absorb(missing).any()
        new = Rows(np.arange(200, dtype=np.int32), np.arange(200, dtype=np.int64), 5)
        assert np.isfinite(one.absorb(new)).all()

    def test_first_step_of_walk_is_predict(self, kind: str, model: type[StatesModel]) -> None:
        one, rows = make(kind, model), log(kind, 700)
        one.absorb(rows)
        when = None if rows.times is None else [int(rows.times[-1]) + (i + 1) * MINUTE for i in range(4)]
        walk = one.walk(4, 300, when)
        law = one.predict(when[0] if when else None)
        np.testing.assert_allclose(walk.laws.sum(axis=1), 1, atol=1e-12)
        np.testing.assert_allclose(walk.laws[0, :-1], law.masses, atol=1e-3)
        assert walk.exact >= 1

    def test_walk_agrees_with_sampled_paths(self, kind: str, model: type[StatesModel]) -> None:
        one, rows = make(kind, model), log(kind, 700)
        one.absorb(rows)
        when = None if rows.times is None else [int(rows.times[-1]) + (i + 1) * MINUTE for i in range(3)]
        paths = one.sample(3, 4000, np.random.default_rng(5), when)
        assert paths.shape == (4000, 3)
        walk = one.walk(3, 2000, when)
        for step in range(3):
            shares = np.bincount(paths[:, step], minlength=walk.laws.shape[1]) / len(paths)
            assert np.abs(shares - walk.laws[step]).max() < 0.05

    def test_frozen_rows_are_followed_but_teach_nothing(self, kind: str, model: type[StatesModel]) -> None:
        rows = log(kind, 900)
        one = make(kind, model)
        one.absorb(rows[:600])
        for t in range(600, 640):
            law = one.predict(None if rows.times is None else int(rows.times[t]))
            code = int(rows.codes[t])
            before = one.state()
            bits = one.absorb(rows[t : t + 1], frozen=True)[0]
            mass = 1.0 if code < 0 else law.masses[code] if code < len(law.masses) else law.unseen
            assert abs(bits + np.log2(mass)) < 1e-9
            learned = {"lines", "by_seen", "by_node", "by_trust", "curves", "events", "counts", "edges", "visits",
                       "places", "singles", "times_seen", "behind", "shares", "period"}  # fmt: skip
            after = one.state()
            assert all(np.array_equal(after[k], before[k]) for k in before if k.split(".")[-1] in learned)
