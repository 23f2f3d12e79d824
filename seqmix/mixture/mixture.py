"""The mixture: all models side by side, each weighed by its prior and by how well it has predicted."""

from __future__ import annotations

import itertools
import os
import threading
from collections.abc import Callable, Sequence
from typing import Any

import numpy as np
import numpy.typing as npt

from seqmix.errors import OptionError, SeqmixError
from seqmix.keep import Kept
from seqmix.mixture.weights import RATES, Weights
from seqmix.models import registry
from seqmix.models.protocol import FEWEST_PATHS, Ask, Context, Floats, Model, StatesLaw, Walk, added_up, leading, split
from seqmix.series.rows import CHUNK, Rows


class Mixture(Kept):
    """A weighted Bayesian mixture of models over one log of states or bytes.

    models: model objects, or names of the library, or None for all that fit; kind: "states" or "bytes";
    timed: whether rows come with times; rates: fixed-share rates of the switching half, () for static Bayes alone;
    share: of the run time, for the compressors among models given by name.
    Codes are numbered in order of first appearance; a byte is its own code.
    """

    kept: tuple[str, ...] = ("bits", "model_bits", "rows", "present", "awake", "asleep", "seen")
    worth_threads = 2048  # rows; below, starting threads costs more than it saves

    def __init__(
        self,
        models: Sequence[str] | Sequence[Model] | None = None,
        *,
        kind: str = "states",
        timed: bool = False,
        rates: Sequence[float] = RATES,
        share: float = registry.SHARE,
    ) -> None:
        names = None if models is None else [model for model in models if isinstance(model, str)]
        given = [model for model in models or () if not isinstance(model, str)]
        if names and given:
            raise OptionError("give the models by name or as objects, not both")
        self.models: list[Model] = [*given] if given else registry.make(kind, self._context(timed), names, share)
        if len(set(self.names)) < len(self.models):
            raise OptionError("two models have the same name")
        self.weights = Weights([model.prior_cost for model in self.models], rates)
        self._alphabet = 256 if kind == "bytes" else 0
        self.seen = self._alphabet
        self.rows = 0
        self.present = 0  # rows with a value
        self.bits = 0.0
        self.model_bits = np.zeros(len(self.models))  # a sleeping model is charged what the mixture lost
        self.awake = np.zeros(len(self.models), dtype=np.int64)  # rows with a value that each model predicted itself
        self.asleep = np.zeros(len(self.models), dtype=bool)  # at the last row
        self.latest_weights: Floats = np.zeros((1, len(self.models)))  # of the laws given last, (laws, models)

    def _context(self, timed: bool) -> Context:
        return Context(timed=timed)

    def parts(self) -> dict[str, Kept]:
        return {"weights": self.weights}

    def state(self, copy: bool = True) -> dict[str, Any]:
        """Everything learned, models included: flat, numpy arrays and plain scalars. copy: as for `Kept.state`."""
        out = super().state(copy)
        for model in self.models:
            kept = model.state(copy) if isinstance(model, Kept) else model.state()
            out.update({f"model.{model.name}.{name}": value for name, value in kept.items()})
        return out

    def restore(self, state: dict[str, Any]) -> None:
        """Go on from a `state()` of a mixture of the same models."""
        super().restore(state)
        for model in self.models:
            start = f"model.{model.name}."
            model.restore({name[len(start) :]: v for name, v in state.items() if name.startswith(start)})

    @property
    def names(self) -> list[str]:
        return [model.name for model in self.models]

    def absorb(self, rows: Rows | npt.ArrayLike, ask: Ask | None = None, frozen: bool = False) -> Floats:
        """Predict and learn rows (Rows, or codes (n,)): loss of each in bits, (n,), from weights and laws before it.

        `ask` names rows whose whole law is wanted; `frozen` follows the rows and learns nothing from them.
        Any chunking gives the same losses.
        """
        if not isinstance(rows, Rows):
            rows = Rows(np.asarray(rows, dtype=np.int32), None, self.rows)
        if ask is not None and not len(ask.at):
            ask = None
        if ask is None and len(rows) > CHUNK:
            starts = range(0, len(rows), CHUNK)
            return np.concatenate([self.absorb(rows[at : at + CHUNK], frozen=frozen) for at in starts])
        if not len(rows):
            return np.zeros(0)
        bits, losses = self._mix(rows, ask, frozen)
        self._charge(bits, losses)
        return bits

    def _mix(self, rows: Rows, ask: Any, frozen: bool) -> tuple[Floats, Floats]:
        """Losses of the mixture, (n,), and of each model, (n, models), what the mixture lost where it slept."""
        if not frozen:
            self._admit(rows.codes)
        asks = [None if ask is None else ask.again() for _ in self.models]
        losses = np.empty((len(rows), len(self.models)))

        def one(i: int) -> None:
            losses[:, i] = self._learn(self.models[i], rows, asks[i], frozen)

        _share_out(one, len(self.models), len(rows) >= self.worth_threads)
        want = np.full(len(rows), -1, dtype=np.int32) if ask is None else ask.want
        asleep = np.isnan(losses)
        self.asleep = asleep[-1]
        bits, before = self.weights.mix(losses, want, frozen)
        np.maximum(bits, 0.0, out=bits)  # rounding can make a certain row a hair cheaper than nothing
        bits[rows.codes < 0] = 0.0
        self._check(bits, rows)
        if ask is not None:
            self.latest_weights = before
            ask.add_up(before, [part for part in asks if part is not None])
        self.rows += len(rows)
        self.present += int((rows.codes >= 0).sum())
        self.awake += (~asleep & (rows.codes >= 0)[:, None]).sum(axis=0)
        return bits, np.where(asleep, bits[:, None], losses)

    def _learn(self, model: Model, rows: Rows, ask: Any, frozen: bool) -> Floats:
        """Losses of one model, and its laws into `ask`."""
        return model.absorb(rows, ask, frozen)

    def _charge(self, bits: Floats, losses: Floats) -> None:
        """Add these losses, see `_mix`, to the sums, one row after the other: no cut into chunks changes a bit."""
        table = np.concatenate([bits[:, None], losses], axis=1)
        table = np.where(np.isnan(table), 0.0, table)
        sums = np.add.accumulate(np.concatenate([[[self.bits, *self.model_bits]], table]))[-1]
        self.bits, self.model_bits = float(sums[0]), sums[1:].copy()

    def _check(self, bits: Floats, rows: Rows) -> None:
        if np.isnan(bits).any():
            row = rows.first + int(np.argmax(np.isnan(bits)))
            raise SeqmixError(f"no model predicts row {row + 1}; name more models, or all by default")

    def _admit(self, codes: npt.NDArray[np.int32]) -> None:
        """Note the states of a chunk; the models rely on new ones being numbered as they come."""
        if self._alphabet and int(codes.max()) >= self._alphabet:
            raise ValueError(f"codes of bytes go from 0 to {self._alphabet - 1}")
        top = np.maximum.accumulate(np.maximum(codes, self.seen - 1))
        if top[0] > self.seen or (np.diff(top) > 1).any():
            raise ValueError("codes must number the states in order of first appearance")
        self.seen = int(top[-1]) + 1

    def rouse(self, left: int) -> None:
        """Tell the models that a forecast comes after `left` more rows: some that sleep wake for the last of them."""
        for model in self.models:
            if hasattr(model, "rouse"):
                model.rouse(left)

    def in_force(self) -> dict[str, float]:
        """Weight of each model in a forecast from here, heaviest first; they add to 1, and one asleep has none."""
        weights = self.weights.of(~self.asleep) if not self.asleep.all() else self.weights.now()
        order = np.argsort(-weights, kind="stable")
        return {self.names[i]: float(weights[i]) for i in order}

    def predict(self, time: int | None = None) -> StatesLaw:
        """Law of the next row, at `time` (microseconds) where the log has times."""
        every = [model.predict(time) for model in self.models]
        weights = self.weights.of(np.array([law is not None for law in every]))
        self.latest_weights = weights[None, :]
        whole = np.zeros((len(every), max(len(law.masses) for law in every if law is not None) + 1))
        for line, law in zip(whole, every, strict=True):
            if law is not None:
                line[: len(law.masses)], line[-1] = law.masses, law.unseen
        law = added_up(weights[None, :], list(whole[:, None]))[0]
        return StatesLaw(law[:-1], float(law[-1]))

    def walk(self, steps: int, times: Sequence[int | None] | None = None, paths: int = 2000) -> Walk:
        """Law of each of the next steps: exact for the first, and while at most `paths` continuations are there.

        A continuation belongs to one model, drawn by weight, which goes on alone along it: the joint law of a
        Bayes mixture. After the first step, the models that make up the last 0.1 % of the weight are left out.
        """
        time = None if times is None else times[0]
        first = self.predict(time)
        laws = np.zeros((steps, len(first.masses) + 1))
        exact = steps
        heavy = 0.0
        for i, weight in leading(self.latest_weights[-1]) if steps > 1 else []:
            fewest = getattr(self.models[i], "fewest_paths", FEWEST_PATHS)
            walk = self.models[i].walk(steps, max(int(paths * weight), fewest), times)
            if walk is not None:
                laws += weight * walk.laws
                heavy += weight
                exact = min(exact, walk.exact)
        laws /= heavy or 1.0
        laws[0, :-1], laws[0, -1] = first.masses, first.unseen
        return Walk(laws, exact)

    def sample(
        self, steps: int, paths: int, rng: np.random.Generator, times: Sequence[int | None] | None = None
    ) -> npt.NDArray[np.int32]:
        """Joint continuations, (paths, steps) codes in random order; the number of states seen = an unseen one."""
        shares = split(self._awake_weights(None if times is None else times[0]), paths, rng)
        drawn = [
            model.sample(steps, int(share), rng, times)
            for model, share in zip(self.models, shares, strict=True)
            if share
        ]
        return rng.permutation(np.concatenate(drawn))

    def _awake_weights(self, time: int | None) -> Floats:
        """Weights of the models that foretell the next row; the others have none."""
        return self.weights.of(np.array([model.predict(time) is not None for model in self.models]))

    def settings(self) -> dict[str, str]:
        """Leading setting of each model."""
        return {model.name: model.setting() for model in self.models}


def _share_out(work: Callable[[int], None], jobs: int, much: bool) -> None:
    """Run work(0..jobs-1), on all cores if there is much to do. Raises what the first failing job raised."""
    workers = min(len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1, jobs)
    if workers < 2 or not much:
        for job in range(jobs):
            work(job)
        return
    turn = itertools.count()
    failed: list[BaseException] = []

    def run() -> None:
        # from the last to the first: the heavier models stand later in the library
        while (job := jobs - 1 - next(turn)) >= 0 and not failed:
            try:
                work(job)
            except BaseException as error:
                failed.append(error)

    threads = [threading.Thread(target=run) for _ in range(workers - 1)]
    for thread in threads:
        thread.start()
    run()
    for thread in threads:
        thread.join()
    if failed:
        raise failed[0]
