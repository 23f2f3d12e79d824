"""The mixture over a log of numbers: the same weights, laws of numbers, and the grid that makes them masses."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from itertools import chain
from typing import Any

import numpy as np
import numpy.typing as npt

from seqmix.keep import Kept
from seqmix.mixture.mixture import Mixture
from seqmix.mixture.weights import RATES
from seqmix.models import registry
from seqmix.models.laws import NumberLaw
from seqmix.models.numbers import FIRST, NumbersModel, one_by_one
from seqmix.models.protocol import Ask, Context, Floats, leading, split
from seqmix.series.grid import Grid
from seqmix.series.rows import CHUNK, Rows

TINY = 1e-300
"""Numbers nearer to 0 count as 0: there floats lose their digits."""

HUGE = 1e140
"""Numbers beyond are not shown to the models."""

LIGHT = 1e-4
"""Weight of the lightest parts that laws of steps ahead leave out."""

PATHS = 500
"""Most continuations a model looks at for the laws of steps ahead, where it has no closed form."""


class NumberAsk:
    """The law of every row of a chunk is wanted: `laws`, n of them, None where asleep.

    They are made as they are taken: that of counts may be long.
    """

    def __init__(self, rows: int) -> None:
        self.want = np.arange(rows, dtype=np.int32)
        self.laws: Iterable[NumberLaw | None] = ()

    def again(self) -> NumberAsk:
        return NumberAsk(len(self.want))

    def add_up(self, weights: Floats, parts: Sequence[NumberAsk]) -> None:
        """Laws mixed by weights (n, models) from those of each model."""
        rows = zip(weights, *(part.laws for part in parts), strict=True)
        self.laws = (_mixed(line, laws) for line, *laws in rows)


def _mixed(weights: Floats, laws: Sequence[NumberLaw | None]) -> NumberLaw | None:
    awake = [(weight, law) for weight, law in zip(weights, laws, strict=True) if law is not None]
    return NumberLaw.combine([weight for weight, _ in awake], [law for _, law in awake]) if awake else None


def _first(wanted: npt.NDArray[np.bool_]) -> int:
    """Where the first one is; how many there are, if none is."""
    return int(np.argmax(np.append(wanted, True)))


class NumberMixture(Mixture):
    """A weighted Bayesian mixture of models over one log of numbers.

    models: objects, names of the library, or None for all that fit; context: what is known of the log
    beforehand; resolution: of its grid, None to find it; rates, share: as for `Mixture`.
    The cell of a row, and the loss of what a finer value tells of the grid, are the same for every model.
    """

    def __init__(
        self,
        models: Sequence[Any] | None = None,
        *,
        context: Context | None = None,
        resolution: float | None = None,
        rates: Sequence[float] = RATES,
        share: float = registry.SHARE,
    ) -> None:
        self.context = context or Context()
        self.grid = Grid(resolution)
        self.factor = 0.0  # what the models see is the log times this; 0: not chosen yet
        self.latest: Rows | None = None  # the rows absorbed last, with their cells, as the models see them
        self.latest_cells: Floats = np.zeros((2, 0))  # their values and widths in the unit of the log
        self.latest_events: Floats = np.zeros(0)  # and the bits that each told of the grid
        super().__init__(models, kind="numbers", timed=self.context.timed, rates=rates, share=share)

    def _context(self, timed: bool) -> Context:
        return self.context

    kept = (*Mixture.kept, "factor")
    worth_threads = 256

    def parts(self) -> dict[str, Kept]:
        return super().parts() | {"grid": self.grid}

    def absorb(self, rows: Rows | npt.ArrayLike, ask: Ask | None = None, frozen: bool = False) -> Floats:
        """Predict and learn rows (Rows with values, or values (n,), NaN = missing): loss of each in bits, (n,).

        frozen: the weights stand still; levels, slopes and coefficients go on following the rows.
        """
        if not isinstance(rows, Rows):
            rows = Rows.of(np.array(rows, dtype=np.float64), None, self.rows)
        assert rows.values is not None
        assert ask is None, "laws of numbers are asked for with tell"
        if len(rows) > CHUNK:
            starts = range(0, len(rows), CHUNK)
            return np.concatenate([self.absorb(rows[at : at + CHUNK], None, frozen) for at in starts])
        return self._absorb(rows, None, frozen) if len(rows) else np.zeros(0)

    def tell(self, rows: Rows, frozen: bool = False) -> tuple[Floats, Iterator[NumberLaw | None]]:
        """`absorb`, and the law of each row before it, as `predict` would have given it; None where a value is missing.

        Sets latest_weights (n, models), those of the laws, and latest. Laws are made as they are taken.
        """
        assert rows.values is not None
        bits, weights = np.empty(len(rows)), np.zeros((len(rows), len(self.models)))
        shown, cells, events = np.empty((3, len(rows)))
        logged = np.empty((2, len(rows)))
        laws: list[Iterable[NumberLaw | None]] = []
        start = 0
        while start < len(rows):
            values = rows.values[start : start + CHUNK]
            with np.errstate(over="ignore"):
                plain = self.factor * np.abs(values) <= HUGE / 2
            missing, together = _first(~np.isnan(values)), _first(~plain) if self.factor else 0
            # one by one: rows that the models are not shown, and those before the unit is chosen
            part = rows[start : start + max(missing, together, 1)]
            stop = start + len(part)
            if missing:
                bits[start:stop] = self._absorb(part, None, frozen)
                laws.append([None] * len(part))
            elif together:
                ask = NumberAsk(len(part))
                bits[start:stop] = self._absorb(part, ask, frozen)
                laws.append(FIRST if law is None else self._back(law) for law in ask.laws)
                weights[start:stop] = self.latest_weights
            else:
                laws.append([self.predict(None if rows.times is None else int(rows.times[start]))])
                weights[start] = self.latest_weights[-1]
                bits[start:stop] = self._absorb(part, None, frozen)
            assert self.latest is not None
            shown[start:stop], cells[start:stop] = self.latest.values, self.latest.cells
            events[start:stop], logged[:, start:stop] = self.latest_events, self.latest_cells
            start = stop
        self.latest, self.latest_events = Rows(rows.codes, rows.times, rows.first, shown, cells), events
        self.latest_weights, self.latest_cells = weights, logged
        return bits, chain.from_iterable(laws)

    def _learn(self, model: Any, rows: Rows, ask: NumberAsk | None, frozen: bool) -> Floats:
        if ask is None:
            return np.asarray(model.absorb(rows, None, frozen))
        bits, ask.laws = (
            model.tell(rows, frozen) if isinstance(model, NumbersModel) else one_by_one(model, rows, frozen)
        )
        return np.asarray(bits)

    def _absorb(self, rows: Rows, ask: NumberAsk | None, frozen: bool) -> Floats:
        """Losses of at most CHUNK rows."""
        assert rows.values is not None
        values = self.grid.snap(np.where(np.abs(rows.values) < TINY, 0.0, rows.values))
        widths, events = self.grid.cells(values)
        # what a double can hardly square is kept from the models, and charged by the law that knows nothing
        factors = self._factors(values)
        with np.errstate(over="ignore", under="ignore"):
            shown = values * factors
            huge = np.abs(shown) > HUGE
            shown[huge] = np.nan
            cells = np.clip(widths * factors, 1e-290, HUGE)
        self.latest = Rows(rows.codes, rows.times, rows.first, shown, cells)
        self.latest_events, self.latest_cells = events, np.stack([values, widths])
        bits, losses = self._mix(self.latest, ask, frozen)
        alone = np.isnan(bits) & (rows.codes >= 0)  # nobody was awake
        for t in np.flatnonzero(huge | alone).tolist():
            bits[t] = losses[t] = FIRST.bits(float(rows.values[t]), float(widths[t]))
        bits = bits + events
        self._charge(bits, losses + events[:, None])
        return bits

    def _factors(self, values: Floats) -> Floats:
        """Numbers of a size far from 1 go to the models times a power of two, fixed by the first that is not 0."""
        factors = np.ones(len(values))
        first = 0
        if self.factor == 0.0:
            first = _first((values != 0) & ~np.isnan(values))
            if first < len(values):
                power = int(np.clip(-np.frexp(values[first])[1], -1000, 1000))
                self.factor = 2.0**power if abs(power) > 100 else 1.0
        factors[first:] = self.factor
        return factors

    def _back(self, law: NumberLaw) -> NumberLaw:
        """A law of the models, in the unit of the log."""
        return law if self.factor in (0.0, 1.0) else law.times(1.0 / self.factor)

    def _check(self, bits: Floats, rows: Rows) -> None:
        """A number that no model foretells has the law of the first."""

    def _admit(self, codes: npt.NDArray[np.int32]) -> None:
        """Numbers need no alphabet."""

    def predict(self, time: int | None = None) -> NumberLaw:  # type: ignore[override]
        """Law of the next row, at `time` (microseconds) where the log has times."""
        laws: list[NumberLaw | None] = [model.predict(time) for model in self.models]  # type: ignore[misc]
        if all(law is None for law in laws):
            self.latest_weights = self.weights.now()[None, :]
            return FIRST
        self.latest_weights = self.weights.of(np.array([law is not None for law in laws]))[None, :]
        law = _mixed(self.latest_weights[0], laws)
        assert law is not None
        return self._back(law)

    def walk(  # type: ignore[override]
        self, steps: int, times: Sequence[int | None] | None = None, paths: int = PATHS
    ) -> list[NumberLaw]:
        """Law of each of the next steps: each model's own, weighed by how likely it is in force there."""
        weights = self.weights.ahead(steps)
        laws: list[tuple[int, list[NumberLaw]]] = []
        for i, weight in leading(weights.max(axis=0)):
            ahead = self.models[i].walk(steps, int(paths * weight), times)
            if ahead is not None:
                laws.append((i, ahead))  # type: ignore[arg-type]
        if not laws:
            return [FIRST] * steps
        out = []
        for step in range(steps):
            heavy = np.array([weights[step, i] for i, _ in laws])
            law = NumberLaw.combine(heavy / heavy.sum(), [ahead[step] for _, ahead in laws], LIGHT)
            out.append(self._back(law))
        return out

    def sample(  # type: ignore[override]
        self, steps: int, paths: int, rng: np.random.Generator, times: Sequence[int | None] | None = None
    ) -> Floats:
        """Joint continuations, (paths, steps), in random order."""
        awake = np.array([model.predict(None if times is None else times[0]) is not None for model in self.models])
        if not awake.any():
            return np.stack([FIRST.draw(rng, paths) for _ in range(steps)], axis=1)
        shares = split(self.weights.of(awake), paths, rng)
        drawn = [
            model.sample(steps, int(share), rng, times)
            for model, share in zip(self.models, shares, strict=True)
            if share
        ]
        with np.errstate(over="ignore"):
            paths_drawn = np.concatenate(drawn) / (self.factor or 1.0)
        return rng.permutation(np.clip(paths_drawn, -1e308, 1e308))
