"""The contract: what must hold for every model of the library, on any log; and that its checks can fail."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import pytest

from seqmix import testing
from seqmix.models import registry
from seqmix.models.compressed import Compressed
from seqmix.models.memoryless import Memoryless
from seqmix.models.protocol import Model, StatesLaw, StatesModel
from seqmix.series.rows import Rows


def rows_for(model: type) -> int:
    """Compressors take some thousand times the time of other models."""
    return 300 if issubclass(model, Compressed) else 3000


def every() -> list[tuple[str, type[StatesModel]]]:
    return [(kind, model) for model in registry.MODELS for kind in model.kinds]


@pytest.mark.parametrize("check", testing.STATES_CHECKS)
@pytest.mark.parametrize(("kind", "model"), every())
def test_every_model_keeps_the_contract(kind: str, model: type[StatesModel], check: Callable[..., None]) -> None:
    check(testing.made(model, kind), testing.states_log(kind, rows_for(model)))


@pytest.mark.parametrize(("kind", "model"), every())
def test_follows_the_protocol(kind: str, model: type[StatesModel]) -> None:
    assert isinstance(testing.made(model, kind)(), Model)


@pytest.mark.parametrize(("kind", "model"), every())
def test_frozen_rows_are_followed_but_teach_nothing(kind: str, model: type[StatesModel]) -> None:
    rows = testing.states_log(kind, 400)
    one = testing.made(model, kind)()
    one.absorb(rows[:300])
    for t in range(300, 330):
        law = one.predict(None if rows.times is None else int(rows.times[t]))
        code = int(rows.codes[t])
        before = one.state()
        bits = one.absorb(rows[t : t + 1], frozen=True)[0]
        mass = 1.0 if code < 0 else law.masses[code] if code < len(law.masses) else law.unseen
        assert abs(bits + np.log2(mass)) < 1e-9
        learned = {"lines", "by_seen", "by_node", "by_trust", "curves", "events", "counts", "edges", "visits",
                   "places", "singles", "times_seen", "behind", "shares", "period", "factors", "trust"}  # fmt: skip
        after = one.state()
        assert all(np.array_equal(after[k], before[k]) for k in before if k.split(".")[-1] in learned)


class TestTheContractCanFail:
    """A model with one thing wrong, and what the contract says of it."""

    @staticmethod
    def broken(**wrong: Any) -> type[StatesModel]:
        return type("Broken", (Memoryless,), wrong)

    def check(self, model: type[StatesModel], message: str) -> None:
        with pytest.raises(AssertionError, match=message):
            testing.check_model(model, ["states"], rows=200)

    def test_charges_less_than_its_law_says(self) -> None:
        self.check(self.broken(absorb=lambda *of, **more: 0.9 * Memoryless.absorb(*of, **more)), "its law says")

    def test_a_law_that_is_too_much(self) -> None:
        def predict(self: Memoryless, time: int | None = None) -> StatesLaw:
            law = Memoryless.predict(self, time)
            return StatesLaw(law.masses * 1.01, law.unseen)

        self.check(self.broken(predict=predict), "does not add up")

    def test_forgets_at_the_edge_of_a_chunk(self) -> None:
        def absorb(self: Memoryless, rows: Rows, ask: Any = None, frozen: bool = False) -> np.ndarray:
            if len(rows) != 7:
                return Memoryless.absorb(self, rows, ask, frozen)
            bits = Memoryless.absorb(self, rows, ask, frozen)
            bits[-1] += 1e-12
            return bits

        self.check(self.broken(absorb=absorb), "other chunks")

    def test_a_state_that_leaves_something_out(self) -> None:
        self.check(self.broken(state=lambda self: {}, restore=lambda self, state: None), "gone on from a state")

    def test_no_source(self) -> None:
        self.check(self.broken(source=""), "source")
