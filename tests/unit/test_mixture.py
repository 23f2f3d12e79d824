"""The mixture: what it charges, what it weighs, and what it hands over."""

from __future__ import annotations

import subprocess
import sys
import threading
from collections.abc import Callable, Sequence
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from seqmix.errors import OptionError
from seqmix.mixture import mixture as module
from seqmix.mixture.mixture import Mixture
from seqmix.mixture.weights import RATES, Weights
from seqmix.models import registry
from seqmix.models.protocol import Ask, Context, Model, StatesLaw, Walk
from seqmix.series.rows import Rows

MINUTE = 60_000_000
KINDS = [("states", False), ("states", True), ("bytes", False)]


def log(kind: str, timed: bool, rows: int, seed: int = 3) -> Rows:
    """Habits and noise, some rows missing, new states until late."""
    rng = np.random.default_rng(seed)
    codes = np.arange(rows) // 3 % 7
    noisy = rng.random(rows) < 0.2
    codes[noisy] = rng.integers(0, 7 + 20 * np.arange(rows) // rows)[noisy]
    codes[rng.random(rows) < 0.03] = -1
    codes = np.where(codes < 0, -1, codes * 9 + 20) if kind == "bytes" else numbered(codes)
    times = 1_700_000_000_000_000 + np.arange(rows, dtype=np.int64) * MINUTE if timed else None
    return Rows(codes.astype(np.int32), times, 0)


def numbered(codes: np.ndarray | list[int]) -> np.ndarray:
    """The same states numbered in order of first appearance; -1 stays."""
    numbers = {-1: -1}
    return np.array([numbers.setdefault(int(code), len(numbers) - 1) for code in codes], dtype=np.int32)


def in_pieces(mixture: Mixture, rows: Rows, edges: Sequence[int]) -> np.ndarray:
    return np.concatenate([mixture.absorb(rows[a:b]) for a, b in zip([0, *edges], [*edges, len(rows)], strict=True)])


class Coin:
    """States 0 and 1, always with the same masses; asleep wherever `sleeps` says so. Follows the protocol, no more."""

    kinds = ("states",)

    def __init__(
        self, name: str, one: float, cost: float = 1.0, sleeps: Callable[[np.ndarray], np.ndarray] | None = None
    ) -> None:
        self.name = name
        self.prior_cost = cost
        self.law = np.array([1 - one, one])
        self.sleeps = sleeps
        self.rows = 0

    def absorb(self, rows: Rows, ask: Ask | None = None, frozen: bool = False) -> np.ndarray:
        numbers = self.rows + np.arange(len(rows))
        asleep = self.sleeps(numbers) if self.sleeps else np.zeros(len(rows), dtype=bool)
        self.rows += len(rows)
        if ask is not None:
            ask.laws[:, :2] = np.where(asleep[ask.at, None], 0.0, self.law)
        bits = np.where(rows.codes < 0, 0.0, -np.log2(self.law[np.maximum(rows.codes, 0)]))
        return np.where(asleep, np.nan, bits)

    def predict(self, time: int | None = None) -> StatesLaw:
        return StatesLaw(self.law, 0.0)

    def sample(self, steps: int, paths: int, rng: np.random.Generator, times: Any = None) -> np.ndarray:
        return (rng.random((paths, steps)) < self.law[1]).astype(np.int32)

    def walk(self, steps: int, paths: int, times: Any = None) -> Walk:
        return Walk(np.tile([*self.law, 0.0], (steps, 1)), steps)

    def setting(self) -> str:
        return ""

    def state(self) -> dict[str, Any]:
        return {"rows": self.rows}

    def restore(self, state: dict[str, Any]) -> None:
        self.rows = state["rows"]


def flips(rows: int, one: float = 0.5, seed: int = 1) -> np.ndarray:
    codes = (np.random.default_rng(seed).random(rows) < one).astype(np.int32)
    codes[:2] = 0, 1
    return codes


# ---- losses


@pytest.mark.parametrize(("kind", "timed"), KINDS)
def test_any_chunking_gives_equal_bits(kind: str, timed: bool) -> None:
    rows = log(kind, timed, 5000)
    whole = Mixture(kind=kind, timed=timed).absorb(rows)
    assert whole.shape == (5000,)
    for edges in ([1], [4095], [2, 3, 700, 2748], list(range(61, 5000, 61))):
        assert np.array_equal(in_pieces(Mixture(kind=kind, timed=timed), rows, edges), whole)


@pytest.mark.parametrize(("kind", "timed"), KINDS)
def test_threads_change_nothing(kind: str, timed: bool, monkeypatch: pytest.MonkeyPatch) -> None:
    rows, used = log(kind, timed, 3000), set()

    class Watched(Coin):
        def absorb(self, rows: Rows, ask: Ask | None = None, frozen: bool = False) -> np.ndarray:
            used.add(threading.current_thread())
            return np.full(len(rows), 1.0)

    def bits(least: int) -> np.ndarray:
        monkeypatch.setattr(Mixture, "worth_threads", least)
        used.clear()
        Mixture([Watched(str(i), 0.5) for i in range(200)]).absorb(np.zeros(5, dtype=np.int32))
        return Mixture(kind=kind, timed=timed).absorb(rows)

    monkeypatch.setattr(module.os, "sched_getaffinity", lambda _: {0, 1, 2}, raising=False)
    alone = bits(1 << 40)
    assert used == {threading.main_thread()}
    assert np.array_equal(bits(1), alone)


MANY_STATES = """
import sys
import numpy as np
from seqmix.mixture import mixture as module
module.os.sched_getaffinity = lambda _: {0, 1, 2, 3}
module.Mixture.worth_threads = int(sys.argv[1])
sys.setswitchinterval(1e-6)
codes = np.maximum.accumulate(np.arange(12_000) // 2)
codes[1::2] = np.random.default_rng(1).integers(0, codes[1::2] + 1)
print(module.Mixture().absorb(codes).sum().hex())
"""


def test_threads_change_nothing_where_there_are_many_states() -> None:
    """In a process of its own: models that learn side by side once broke the digits that they share."""

    def bits(least: int) -> str:
        command = [sys.executable, "-c", MANY_STATES, str(least)]
        return subprocess.run(command, capture_output=True, text=True, check=True, timeout=120).stdout

    alone = bits(1 << 40)
    assert [bits(1) for _ in range(3)] == [alone] * 3


@pytest.mark.parametrize("least", [1, 1 << 40])
def test_a_model_that_fails_is_heard(least: int, monkeypatch: pytest.MonkeyPatch) -> None:
    class Broken(Coin):
        def absorb(self, rows: Rows, ask: Ask | None = None, frozen: bool = False) -> np.ndarray:
            raise OverflowError("broken")

    monkeypatch.setattr(Mixture, "worth_threads", least)
    with pytest.raises(OverflowError, match="broken"):
        Mixture([Coin("a", 0.5), Broken("b", 0.5), Coin("c", 0.5)]).absorb(flips(10))


@pytest.mark.parametrize(("kind", "timed"), KINDS)
def test_charges_the_law_it_would_have_printed(kind: str, timed: bool) -> None:
    rows = log(kind, timed, 260)
    states = 256 if kind == "bytes" else int(rows.codes.max()) + 1
    ask = Ask.of(len(rows), np.arange(len(rows)), states)
    whole = Mixture(kind=kind, timed=timed).absorb(rows, ask)
    one = Mixture(kind=kind, timed=timed)
    for t in range(len(rows)):
        law = one.predict(None if rows.times is None else int(rows.times[t]))
        assert abs(law.masses.sum() + law.unseen - 1) < 1e-12
        known = len(law.masses)
        np.testing.assert_allclose(ask.laws[t, :known], law.masses, rtol=1e-9, atol=1e-15)
        assert not ask.laws[t, known:-1].any()
        assert abs(ask.laws[t, -1] - law.unseen) < 1e-12
        code = int(rows.codes[t])
        mass = 1.0 if code < 0 else law.masses[code] if code < known else law.unseen
        assert abs(whole[t] + np.log2(mass)) < 1e-9
        assert one.absorb(rows[t : t + 1])[0] == whole[t]


def test_asking_does_not_change_losses() -> None:
    rows = log("states", True, 700)
    ask = Ask.of(len(rows), [0, 3, 698], int(rows.codes.max()) + 1)
    assert np.array_equal(Mixture(timed=True).absorb(rows, ask), Mixture(timed=True).absorb(rows))


def test_sums_it_keeps() -> None:
    rows, one = log("states", False, 900), Mixture(share=0.0)
    bits = one.absorb(rows)
    assert one.rows == 900
    assert one.seen == int(rows.codes.max()) + 1
    assert one.bits == pytest.approx(bits.sum())
    alone = [model.absorb(rows).sum() for model in registry.make("states", Context(), share=0.0)]
    np.testing.assert_allclose(one.model_bits, alone)
    assert one.awake.tolist() == [int((rows.codes >= 0).sum())] * len(one.models)


@pytest.mark.parametrize(
    ("kind", "codes"),
    [("states", [1]), ("states", [0, 2]), ("states", [0, 1, 5, 3]), ("bytes", [256]), ("bytes", [300])],
)
def test_codes_that_cannot_be_are_refused(kind: str, codes: list[int]) -> None:
    one = Mixture(kind=kind)
    with pytest.raises(ValueError, match=r"order of first appearance|bytes"):
        one.absorb(codes)
    assert one.rows == 0


def test_missing_rows_and_no_rows_cost_nothing() -> None:
    one = Mixture()
    assert one.absorb([]).shape == (0,)
    one.absorb([0, 1, 0, 0])
    before = one.bits
    assert one.absorb([-1, -1, -1]).tolist() == [0, 0, 0]
    assert (one.bits, one.rows) == (before, 7)


def test_frozen_rows_teach_nothing() -> None:
    rows, one = log("states", False, 900), Mixture()
    one.absorb(rows[:600])
    weights = one.weights.now()
    for t in range(600, 640):
        law, code = one.predict(), int(rows.codes[t])
        bits = one.absorb(rows[t : t + 1], frozen=True)[0]
        mass = 1.0 if code < 0 else law.masses[code] if code < len(law.masses) else law.unseen
        assert abs(bits + np.log2(mass)) < 1e-9
        assert np.array_equal(one.weights.now(), weights)


def test_frozen_rows_of_an_unseen_state_keep_laws_whole() -> None:
    """State 3 comes again and again in rows that teach nothing: it stays unseen, and the laws add to 1."""
    one = Mixture()
    one.absorb([0, 1, 2] * 60)
    ask = Ask.of(60, np.arange(60), 4)
    bits = one.absorb([0, 3, 3] * 20, ask, frozen=True)
    np.testing.assert_allclose(ask.laws.sum(axis=1), 1, atol=1e-12)
    came = np.array([0, 4, 4] * 20)  # the unseen stands last
    np.testing.assert_allclose(bits, -np.log2(ask.laws[np.arange(60), came]), rtol=1e-9)


# ---- weights


@pytest.mark.parametrize(("kind", "timed"), KINDS)
def test_weights_add_to_one(kind: str, timed: bool) -> None:
    rows, one = log(kind, timed, 1200), Mixture(kind=kind, timed=timed)
    prior = np.exp2(-np.array([model.prior_cost for model in one.models]))
    np.testing.assert_allclose(one.weights.now(), prior / prior.sum())
    for at in range(0, 1200, 60):
        one.absorb(rows[at : at + 60])
        weights = one.weights.now()
        assert weights.shape == (len(one.names),)
        assert (weights >= 0).all()
        assert abs(weights.sum() - 1) < 1e-12


@pytest.mark.parametrize(("kind", "timed"), KINDS)
@pytest.mark.parametrize(("rates", "more"), [((), 0.0), (RATES, 1.0)], ids=["static", "default"])
@pytest.mark.parametrize("shape", ["habits", "noise", "constant", "turns"])
def test_bound(kind: str, timed: bool, rates: tuple[float, ...], more: float, shape: str) -> None:
    rows = log(kind, timed, 2000)
    codes = {
        "habits": rows.codes,
        "noise": numbered(np.random.default_rng(5).integers(0, 6, 2000)),
        "constant": np.zeros(2000, dtype=np.int32),
        "turns": numbered(np.where(np.arange(2000) // 400 % 2, np.arange(2000) % 3, np.arange(2000) // 7 % 2)),
    }[shape]
    one = Mixture(kind=kind, timed=timed, rates=rates)
    one.absorb(Rows(codes, rows.times, 0))
    assert (one.bits - one.model_bits - one.weights.costs).max() <= more + 1e-6


@given(st.lists(st.integers(-1, 5), min_size=1, max_size=120))
@settings(max_examples=25, deadline=None)
def test_bound_on_any_log(labels: list[int]) -> None:
    codes = numbered(labels)
    static, default = Mixture(rates=()), Mixture()
    static.absorb(codes)
    default.absorb(codes)
    assert (static.bits - static.model_bits - static.weights.costs).max() <= 1e-6
    assert (default.bits - default.model_bits - default.weights.costs).max() <= 1 + 1e-6
    assert default.bits <= static.bits + 1 + 1e-6


@pytest.mark.parametrize("rates", [(), (0.3,), RATES, (1e-12,)], ids=str)
@pytest.mark.parametrize("huge", [1e3, 1e6, 1e12])
def test_extreme_losses(rates: tuple[float, ...], huge: float) -> None:
    rng = np.random.default_rng(4)
    weights = Weights([1.0, 2.0, 3.0, 60.0], rates)
    nothing = np.full(1, -1, dtype=np.int32)
    blocks = [np.where(rng.random((1, 4)) < 0.5, 0.0, huge) for _ in range(200)]
    for losses in [*blocks, np.full((1, 4), huge), np.array([[huge, huge, huge, 0.0]]), np.zeros((1, 4))]:
        bits, _ = weights.mix(losses, nothing)
        assert losses.min() - 1e-6 <= bits[0] <= losses.max() + 1e-6
        now = weights.now()
        assert np.isfinite(now).all()
        assert (now >= 0).all()
        assert abs(now.sum() - 1) < 1e-9


def test_extreme_losses_when_frozen() -> None:
    """The only model that foresaw the row is 3,000 bits behind: the loss is 3,000 bits, not without end."""
    nothing = np.full(1, -1, dtype=np.int32)
    weights = Weights([1.0, 1.0], ())
    weights.mix(np.array([[0.0, 3000.0]]), nothing)
    bits, _ = weights.mix(np.array([[1e6, 0.0]]), nothing, frozen=True)
    assert bits[0] == pytest.approx(3000)


# ---- sleeping models


def test_sleeping_model() -> None:
    """Two coins, and one that is awake on every fourth row only, by the formulas of static Bayes."""
    codes = flips(400, 0.8)
    sharp = Coin("sharp", 0.95, 2.0, lambda t: t % 4 != 0)
    one = Mixture([Coin("even", 0.5, 1.0), Coin("high", 0.8, 3.0), sharp], rates=())
    bits = one.absorb(codes)
    laws = np.array([0.5, 0.8, 0.95])
    weights = np.exp2([-1.0, -3.0, -2.0])
    weights /= weights.sum()
    expected = []
    for t, code in enumerate(codes):
        awake = np.array([True, True, t % 4 == 0])
        said = laws if code else 1 - laws
        mixed = (weights[awake] @ said[awake]) / weights[awake].sum()
        weights[awake] *= said[awake] / mixed
        expected.append(-np.log2(mixed))
    np.testing.assert_allclose(bits, expected, rtol=1e-9)
    np.testing.assert_allclose(one.weights.now(), weights, rtol=1e-9, atol=1e-30)
    assert one.awake.tolist() == [400, 400, 100]
    there = np.arange(400) % 4 == 0
    own = -np.log2(np.where(codes[there], 0.95, 0.05)).sum()
    # asleep, a model is charged what the mixture lost
    assert one.model_bits[2] == pytest.approx(own + bits[~there].sum())
    assert bits[there].sum() <= own + one.weights.costs[2] + 1e-6


def test_weight_of_a_sleeper_stands_still() -> None:
    one = Mixture([Coin("a", 0.5), Coin("b", 0.9), Coin("asleep", 0.7, 1.0, lambda t: t >= 0)], rates=())
    before = one.weights.now()[2]
    one.absorb(flips(300, 0.9))
    assert one.weights.now()[2] == pytest.approx(before, rel=1e-9)


def test_chunking_with_a_sleeper() -> None:
    def new() -> Mixture:
        return Mixture([Coin("a", 0.3), Coin("b", 0.6), Coin("c", 0.9, 1.0, lambda t: t % 3 == 1)])

    rows = Rows(flips(500), None, 0)
    assert np.array_equal(in_pieces(new(), rows, [1, 2, 250, 251]), new().absorb(rows))


@pytest.mark.parametrize("frozen", [False, True])
def test_laws_asked_for_are_charged_while_one_sleeps(frozen: bool) -> None:
    codes = flips(50, 0.8)
    one = Mixture([Coin("a", 0.5), Coin("b", 0.8), Coin("c", 0.95, 1.0, lambda t: t % 2 == 1)])
    one.absorb(flips(20, 0.8, seed=2))
    ask = Ask.of(50, np.arange(50), 2)
    bits = one.absorb(codes, ask, frozen=frozen)
    np.testing.assert_allclose(ask.laws.sum(axis=1), 1, atol=1e-12)
    np.testing.assert_allclose(-np.log2(ask.laws[np.arange(50), codes]), bits, rtol=1e-9)


# ---- which models


def test_models_stand_in_the_order_of_the_library() -> None:
    names = [model.name for model in registry.MODELS]
    assert Mixture(timed=True).names == names
    assert Mixture(["tree", "memoryless", "markov"]).names == ["memoryless", "markov", "tree"]
    assert Mixture().names == [model.name for model in registry.MODELS if not model.needs_times]
    assert Mixture(kind="bytes").names == [model.name for model in registry.MODELS if "bytes" in model.kinds]


def test_models_given_as_objects() -> None:
    coins = [Coin("b", 0.2, 2.0), Coin("a", 0.9, 1.0)]
    assert all(isinstance(coin, Model) for coin in coins)
    one = Mixture(coins)
    assert one.names == ["b", "a"]
    np.testing.assert_allclose(one.weights.now(), [1 / 3, 2 / 3])
    np.testing.assert_allclose(one.predict().masses, [(0.8 + 0.2) / 3, (0.2 + 1.8) / 3])
    assert one.absorb([0])[0] == pytest.approx(-np.log2(1 / 3))


def test_a_library_model_beside_one_of_ones_own() -> None:
    one = Mixture([*registry.make("states", Context(), ["markov"]), Coin("own", 0.9)])
    assert one.names == ["markov", "own"]
    one.absorb([0, 1])
    assert np.isfinite(one.absorb(flips(200, 0.9))).all()


@pytest.mark.parametrize(
    ("names", "kind", "message"),
    [
        (["markow"], "states", "no model is called 'markow'; did you mean markov?"),
        (["tree", "lz77"], "states", "no model is called 'lz77'; did you mean lz78?"),
        (["clock"], "states", "the model clock is for a log with times; leave it out"),
        (["dwell"], "bytes", "the model dwell is for states, not bytes; leave it out"),
        (["tree", "tree"], "states", "name at least one model, and each only once"),
        ([], "states", "name at least one model, and each only once"),
    ],
)
def test_models_that_cannot_be_had(names: list[str], kind: str, message: str) -> None:
    with pytest.raises(OptionError) as caught:
        Mixture(names, kind=kind)
    assert str(caught.value) == message


def test_unknown_name_like_no_other_gives_the_list() -> None:
    with pytest.raises(OptionError) as caught:
        Mixture(["zzz"])
    known = ", ".join(model.name for model in registry.MODELS)
    assert str(caught.value) == f"no model is called 'zzz'; there are {known}"


@pytest.mark.parametrize(("kind", "timed"), KINDS)
def test_asking_for_the_laws_of_no_row_is_not_asking(kind: str, timed: bool) -> None:
    rows, asked, silent = log(kind, timed, 600), Mixture(kind=kind, timed=timed), Mixture(kind=kind, timed=timed)
    bits = asked.absorb(rows, Ask.of(len(rows), [], int(rows.codes.max()) + 1))
    assert np.array_equal(bits, silent.absorb(rows))


# ---- state


@pytest.mark.parametrize(("kind", "timed"), KINDS)
def test_state_out_and_in_gives_equal_bits(kind: str, timed: bool) -> None:
    rows, first = log(kind, timed, 1500), Mixture(kind=kind, timed=timed)
    first.absorb(rows[:1000])
    state = first.state()
    assert all(isinstance(value, np.ndarray | int | float | str | None) for value in state.values())
    rest = first.absorb(rows[1000:])
    second = Mixture(kind=kind, timed=timed)
    second.restore(state)
    assert np.array_equal(second.absorb(rows[1000:]), rest)
    assert np.array_equal(second.weights.now(), first.weights.now())
    assert np.array_equal(second.model_bits, first.model_bits)
    assert (second.bits, second.rows, second.seen) == (first.bits, first.rows, first.seen)


def test_state_is_a_copy() -> None:
    rows, one = log("states", False, 800), Mixture()
    one.absorb(rows[:400])
    state = one.state()
    before = {name: np.array(value) for name, value in state.items()}
    one.absorb(rows[400:])
    assert all(np.array_equal(state[name], value) for name, value in before.items())


def test_state_of_a_model_of_ones_own() -> None:
    def new() -> Mixture:
        return Mixture([Coin("a", 0.5), Coin("b", 0.9, 1.0, lambda t: t >= 100)])

    rows = Rows(flips(200, 0.8), None, 0)
    first, second = new(), new()
    first.absorb(rows[:120])
    second.restore(first.state())
    assert np.array_equal(second.absorb(rows[120:]), first.absorb(rows[120:]))


# ---- several steps ahead


@pytest.mark.parametrize(("kind", "timed"), KINDS)
def test_walk_starts_with_predict_and_agrees_with_paths(kind: str, timed: bool) -> None:
    rows, one = log(kind, timed, 900), Mixture(kind=kind, timed=timed)
    one.absorb(rows)
    when = None if rows.times is None else [int(rows.times[-1]) + (i + 1) * MINUTE for i in range(3)]
    law = one.predict(when[0] if when else None)
    walk = one.walk(3, when)
    assert walk.exact >= 1
    np.testing.assert_allclose(walk.laws[0], [*law.masses, law.unseen], atol=1e-15)
    np.testing.assert_allclose(walk.laws.sum(axis=1), 1, atol=1e-12)
    paths = one.sample(3, 4000, np.random.default_rng(6), when)
    assert paths.shape == (4000, 3)
    for step in range(3):
        shares = np.bincount(paths[:, step], minlength=one.seen + 1) / 4000
        assert np.abs(shares - walk.laws[step]).max() < 0.04


def test_paths_of_a_mixture_of_coins_are_of_one_coin_each() -> None:
    """The joint law of a Bayes mixture: a coin is drawn by weight, and then thrown again and again."""
    paths = Mixture([Coin("low", 0.0), Coin("high", 1.0)]).sample(6, 1001, np.random.default_rng(7))
    assert set(map(tuple, paths.tolist())) == {(0,) * 6, (1,) * 6}
    assert abs(paths[:, 0].mean() - 0.5) < 0.001
    assert len(set(paths[:10, 0])) == 2  # in random order
