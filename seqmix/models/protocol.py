"""What every model is: a name, a prior cost, and the abilities to absorb, predict, sample, and hand over its state.

`Model` is the protocol that the mixture relies on. `StatesModel` is what the models of states and bytes
share: a history, a law of the unseen, and a bank of `Setting`s of one explanation, mixed inside by Bayes.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, Protocol, runtime_checkable

import numpy as np
import numpy.typing as npt

from seqmix.keep import Kept
from seqmix.mixture.weights import Weights
from seqmix.models.history import Codes, Fork, History, Past
from seqmix.models.novelty import Novelty
from seqmix.series.rows import Rows

Floats = npt.NDArray[np.float64]

FEWEST_PATHS = 512
"""Continuations that even a light model or setting may follow."""


@dataclass(frozen=True)
class Context:
    """What models may know of a log beforehand.

    periods: rows per repeat, from the clock or the user. cadence: microseconds a row. timed: rows have times.
    """

    periods: tuple[int, ...] = ()
    cadence: int | None = None
    timed: bool = False


class Ask:
    """Rows of a chunk whose whole law is wanted, not just the loss.

    want (n,) int32: the line of `laws` for each row, or -1. laws (asked, states + 1): masses of the states,
    in code order, and of an unseen one, last.
    """

    def __init__(self, want: npt.NDArray[np.int32], states: int) -> None:
        self.want = want
        self.at = np.flatnonzero(want >= 0)
        self.laws = np.zeros((max(len(self.at), 1), states + 1))

    @classmethod
    def of(cls, rows: int, at: Sequence[int] | npt.NDArray[np.intp], states: int) -> Ask:
        """Ask for the rows `at` (ascending) of a chunk of `rows`."""
        want = np.full(rows, -1, dtype=np.int32)
        want[np.asarray(at, dtype=np.intp)] = np.arange(len(at), dtype=np.int32)
        return cls(want, states)

    def again(self) -> Ask:
        """The same rows, laws still blank."""
        return Ask(self.want, self.laws.shape[1] - 1)

    def add_up(self, weights: Floats, parts: Sequence[Ask]) -> None:
        """Laws mixed by weights (asked, models) from those of each model."""
        self.laws[:] = added_up(weights, [part.laws for part in parts])


@dataclass(frozen=True)
class StatesLaw:
    """The law of the next row: `masses` (states,) in code order and `unseen`; they add to 1."""

    masses: Floats
    unseen: float


@dataclass(frozen=True)
class Walk:
    """Where continuations lead: laws (steps, states + 1), unseen last; the first `exact` steps are exact."""

    laws: Floats
    exact: int


@runtime_checkable
class Model(Protocol):
    """One explanation of a log of states or bytes.

    Codes number the states in order of first appearance, -1 is a missing row: it costs nothing and teaches
    nothing. Any way of cutting the rows into chunks must give the same losses to the last bit.
    """

    name: str
    kinds: tuple[str, ...]
    prior_cost: float  # bits

    def absorb(self, rows: Rows, ask: Ask | None = None, frozen: bool = False) -> Floats:
        """Loss of each row in bits, (n,), predicted before it is learned; fills `ask.laws`. NaN = asleep.

        frozen: the rows are followed, nothing is learned from them.
        """

    def predict(self, time: int | None = None) -> StatesLaw | None:
        """Law of the next row, at `time` (microseconds) where the log has times. None = asleep."""

    def sample(
        self, steps: int, paths: int, rng: np.random.Generator, times: Sequence[int | None] | None = None
    ) -> Codes:
        """Joint continuations, (paths, steps) codes; the number of states seen stands for an unseen one."""

    def walk(self, steps: int, paths: int, times: Sequence[int | None] | None = None) -> Walk:
        """Law of each of the next steps, over at most `paths` continuations."""

    def setting(self) -> str:
        """The leading setting of a bank, in a few words; empty where there is one only."""

    def state(self) -> dict[str, Any]:
        """Everything learned, as numpy arrays and plain scalars."""

    def restore(self, state: dict[str, Any]) -> None:
        """Go on from a `state()`."""


class Setting(Kept, ABC):
    """One setting of an explanation. All its laws are over the states seen so far; novelty comes on top."""

    label: str

    @abstractmethod
    def learn(
        self, past: Past, codes: Codes, want: npt.NDArray[np.int32], laws: Floats, frozen: bool = False
    ) -> Floats:
        """Loss of each row in bits among the states seen, (n,); 0 for a new state and a missing row."""

    @abstractmethod
    def laws(self, fork: Fork, place: npt.NDArray[np.int64], states: int) -> Floats:
        """Law after each path of a fork, (paths, states), nothing learned. `place`: see `start`."""

    def start(self, paths: int) -> npt.NDArray[np.int64]:
        """Where this setting stands, once for each path: (paths, k) numbers of its own, k may be 0."""
        return np.zeros((paths, 0), dtype=np.int64)

    def move(self, place: npt.NDArray[np.int64], fork: Fork, codes: Codes) -> npt.NDArray[np.int64]:
        """`place` after each path has gone on by its state of `codes` (the fork is still before it)."""
        return place


class StatesModel(Kept, ABC):
    """A bank of settings of one explanation of states or bytes. See `Model` for the abilities.

    Sampled and enumerated continuations are frozen at the present row: contexts move along a path, counts stay.
    """

    name: str
    kinds: tuple[str, ...] = ("states", "bytes")
    prior_cost: float  # bits
    summary: str  # one line
    source: str  # the paper
    needs_times: bool = False
    fewest_paths: int = FEWEST_PATHS

    kept = ("seen",)

    def __init__(self, alphabet: int = 0) -> None:
        """`alphabet`: the number of states where it is known beforehand (256 for bytes), 0 where it grows."""
        self.seen = alphabet
        self.settings, self._history = self.bank(alphabet)
        self._novelty = Novelty(alphabet)
        self._weights = Weights(np.zeros(len(self.settings)), rates=(0.005,))

    @abstractmethod
    def bank(self, alphabet: int) -> tuple[list[Setting], History]:
        """The settings of this explanation, and the history that they look at."""

    def parts(self) -> dict[str, Kept]:
        own: dict[str, Kept] = {"history": self._history, "novelty": self._novelty, "weights": self._weights}
        return own | {f"setting{i}": setting for i, setting in enumerate(self.settings)}

    def absorb(self, rows: Rows, ask: Ask | None = None, frozen: bool = False) -> Floats:
        if not len(rows):
            return np.zeros(0)
        codes = rows.codes
        if not frozen:
            self.seen = max(self.seen, int(codes.max()) + 1)
        asked = ask or Ask(np.full(len(rows), -1, dtype=np.int32), 0)
        past = self._history.ahead(codes, rows.times)
        losses = np.empty((len(rows), len(self.settings)))
        laws = []
        for i, setting in enumerate(self.settings):
            laws.append(asked.again().laws)
            losses[:, i] = setting.learn(past, codes, asked.want, laws[i], frozen)
        past.close()
        bits, weights = self._weights.mix(losses, asked.want, frozen)
        novel, unseen = self._novelty.absorb(codes, frozen)
        if ask is not None and len(ask.at):
            ask.laws[:] = added_up(weights, laws)
            ask.laws *= (1.0 - unseen[ask.at])[:, None]
            ask.laws[:, -1] = unseen[ask.at]
        # a missing row costs nothing, but NaN, asleep, stays
        return np.where((codes < 0) & ~np.isnan(bits), 0.0, bits + novel)

    def predict(self, time: int | None = None) -> StatesLaw:
        fork = self._history.fork(1, time)
        laws = [setting.laws(fork, setting.start(1), self.seen) for setting in self.settings]
        unseen = self._novelty.unseen()
        law = added_up(self._weights.now()[None, :], laws)[0] * (1.0 - unseen)
        return StatesLaw(law, unseen)

    def _whole(self, setting: Setting, fork: Fork, place: npt.NDArray[np.int64]) -> Floats:
        """Laws of one setting after each path with the unseen mass: (paths, states + 1)."""
        out = np.empty((fork.size, self.seen + 1))
        unseen = self._novelty.unseen()
        out[:, :-1] = setting.laws(fork, place, self.seen) * (1.0 - unseen)
        out[:, -1] = unseen
        return out

    def sample(
        self, steps: int, paths: int, rng: np.random.Generator, times: Sequence[int | None] | None = None
    ) -> Codes:
        when: list[int | None] = [None] * steps if times is None else list(times)
        out = np.empty((0, steps), dtype=np.int32)
        for setting, share in zip(self.settings, split(self._weights.now(), paths, rng), strict=True):
            if share:
                fork = self._history.fork(share, when[0])
                place = setting.start(share)
                for step in range(steps):
                    codes = draw(self._whole(setting, fork, place), rng)
                    place = setting.move(place, fork, codes)
                    fork.push(codes, when[step + 1] if step + 1 < steps else None)
                out = np.concatenate([out, fork.path])
        return out

    def walk(self, steps: int, paths: int, times: Sequence[int | None] | None = None) -> Walk:
        when: list[int | None] = [None] * steps if times is None else list(times)
        laws = np.zeros((steps, self.seen + 1))
        exact = steps
        for i, weight in leading(self._weights.now()):
            part, steps_exact = self._walk_setting(
                self.settings[i], steps, max(int(paths * weight), self.fewest_paths), when
            )
            laws += weight * part
            exact = min(exact, steps_exact)
        return Walk(laws, exact)

    def _walk_setting(self, setting: Setting, steps: int, paths: int, when: list[int | None]) -> tuple[Floats, int]:
        """Follow every continuation while there are at most `paths`, then so many spread evenly over their mass."""
        laws = np.zeros((steps, self.seen + 1))
        exact = steps
        fork = self._history.fork(1, when[0])
        place = setting.start(1)
        mass = np.ones(1)
        for step in range(steps):
            ahead = self._whole(setting, fork, place)
            laws[step] = mass @ ahead
            if step + 1 == steps:
                break
            whole = mass[:, None] * ahead
            which, codes = np.nonzero(whole > 1e-7)
            if len(which) <= paths:
                mass = whole[which, codes]
                mass /= mass.sum()
            else:
                exact = min(exact, step + 1)
                flat = np.cumsum(whole.ravel())
                spots = (np.arange(paths) + 0.5) / paths * flat[-1]
                which, codes = np.divmod(np.minimum(np.searchsorted(flat, spots), whole.size - 1), whole.shape[1])
                mass = np.full(paths, 1.0 / paths)
            fork.select(which)
            place = setting.move(place[which], fork, codes.astype(np.int32))
            fork.push(codes.astype(np.int32), when[step + 1])
        return laws, exact

    def setting(self) -> str:
        return self.settings[int(np.argmax(self._weights.now()))].label if len(self.settings) > 1 else ""

    def sleeps(self, rows: int) -> bool:
        """Whether none of the next `rows` rows will be predicted."""
        return False

    def rouse(self, left: int) -> None:
        """A forecast comes after `left` more rows: a model that sleeps may wake for it."""


def added_up(weights: Floats, laws: Sequence[Floats]) -> Floats:
    """Mixed laws (m, k), by weights (m, models) of laws (m, k) each; the sum of a row depends on that row only."""
    out = weights[:, :1] * laws[0]
    for i in range(1, len(laws)):
        out += weights[:, i : i + 1] * laws[i]
    return out


def leading(weights: Floats) -> list[tuple[int, float]]:
    """The heaviest models, as few as make up 99.9 % of the weight, with their shares of it."""
    order = np.argsort(-weights, kind="stable")
    some = order[: int(np.searchsorted(np.cumsum(weights[order]), 0.999)) + 1]
    return [(int(i), float(weights[i] / weights[some].sum())) for i in some]


def split(weights: Floats, paths: int, rng: np.random.Generator) -> npt.NDArray[np.int64]:
    """How many of `paths` each model gets: within one of its due, and fair on average (systematic sampling)."""
    edges = np.floor(np.cumsum(weights / weights.sum()) * paths + rng.random()).astype(np.int64)
    edges[-1] = paths
    return np.diff(np.minimum(edges, paths), prepend=0)


def draw(laws: Floats, rng: np.random.Generator) -> Codes:
    """One code from each law, (paths,)."""
    edges = np.cumsum(laws, axis=1)
    spots = rng.random(len(laws)) * edges[:, -1]
    return np.minimum((edges <= spots[:, None]).sum(axis=1), laws.shape[1] - 1).astype(np.int32)
