"""Autoregression: the next value is a weighted sum of earlier ones; weights and the law of errors are learned.

A bank of Bayesian regressions on lagged values (recursive least squares with exponential forgetting), on the plain
and the log scale, with priors that shrink long lags towards a random walk or a seasonal copy (Litterman 1986). Their
mean forecast also gets a learned law of its errors: scales times shapes, weighed apart in each phase of the clock.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import numpy.typing as npt

from seqmix.keep import Kept
from seqmix.mixture.weights import Weights
from seqmix.models.broad import Broad
from seqmix.models.calendar import phases
from seqmix.models.errors import ErrorLaw
from seqmix.models.lags import FADING, choices
from seqmix.models.laws import Floats, NumberLaw, settled
from seqmix.models.numbers import LOOKS, STRAY, Cells, Laws, Telling, wanted, with_stray
from seqmix.models.protocol import Context, leading, split
from seqmix.models.regressions import WIDE, Regressions
from seqmix.series.rows import Rows

WAKE = 8
"""Values read before the first prediction."""

_CROWD = (160, 96, 48, 24, 16, 12)  # settings kept at rows 16, 32, 64, 128, ...
_FAR = 30.0  # bits behind the leading one


class Autoregression(Telling):
    """See the module. Asleep until `WAKE` values are there; those are then learned without being predicted."""

    name = "autoregression"
    prior_cost = 3.0
    summary = "a weighted sum of earlier values, errors by a learned law for each phase of the clock"
    source = "Litterman 1986; West & Harrison 1997; Herbster & Warmuth 1998 for the law of errors"

    kept = ("rows", "observed", "values", "widths", "times", "low", "high")

    def __init__(self, context: Context) -> None:
        super().__init__(context)
        self._dates = phases(context.periods, context.cadence)[:2] if context.timed or context.periods else []
        grid = choices(context.periods, len(self._dates))
        self._sides = [Regressions(grid, self._dates, log) for log in (False, True)]
        self.rows = 0
        self.observed = 0
        self.values, self.widths = np.zeros(0), np.zeros(0)  # rows before waking
        self.times: npt.NDArray[np.int64] | None = None
        self._errors = [ErrorLaw(), *(ErrorLaw(phase.places) for phase in self._dates)]
        self.low = self.high = 0.0  # range of the values seen
        self._settings = Weights(np.zeros(2 * len(grid)), rates=(0.002,))
        self._broad = Broad()
        self._kinds = Weights(np.zeros(2 + len(self._dates)), rates=(0.002,))

    def parts(self) -> dict[str, Kept]:
        errors: dict[str, Kept] = {f"errors{i}": law for i, law in enumerate(self._errors)}
        sides: dict[str, Kept] = {"plain": self._sides[0], "log": self._sides[1]}
        return sides | errors | {"settings": self._settings, "kinds": self._kinds, "broad": self._broad}

    @property
    def _awake(self) -> bool:
        return self.observed >= WAKE

    def _absorb(self, rows: Rows, laws: Laws | None, frozen: bool) -> Floats:
        bits = np.full(len(rows), np.nan)
        cells = Cells.of(rows)
        done = 0
        if not self._awake:
            counts = self.observed + np.cumsum(cells.usable[0])
            ready = np.flatnonzero(counts >= WAKE)
            done = int(ready[0]) + 1 if len(ready) else len(rows)
            self._hold(cells[:done], rows[:done])
            if len(ready):
                self._wake()
            if laws is not None:
                laws += [None] * done
        while done < len(rows):
            look = next(look for look in LOOKS if look > self.rows)
            stop = min(len(rows), done + look - self.rows)
            part = rows[done:stop]
            bits[done:stop] = self._learn(cells[done:stop], part.times, frozen, laws)
            done = stop
            if self.rows == look and not frozen:
                self._broad.refit()
                self._drop(_CROWD[min(LOOKS.index(look), len(_CROWD) - 1)])
        return bits

    def _hold(self, cells: Cells, rows: Rows) -> None:
        self.values = np.concatenate([self.values, cells.values])
        self.widths = np.concatenate([self.widths, cells.widths])
        if rows.times is not None:
            self.times = rows.times if self.times is None else np.concatenate([self.times, rows.times])
        self.observed += int(cells.usable[0].sum())
        self.rows += len(cells)

    def _wake(self) -> None:
        """Choose units by the first values, and learn them."""
        cells, times = Cells(self.values, self.widths), self.times
        values = self.values[cells.usable[0] > 0]
        width = float(self.widths[-1])
        self._sides[0].begin(values, width)
        if (values > 0).all():
            self._sides[1].begin(np.log(values), width / float(values.max()))
        else:
            self._sides[1].keep(np.zeros(0, dtype=np.intp))
            self._settings.keep(np.arange(len(self._sides[0].alive)))
        self.low = self.high = float(values[0])
        for law in self._errors:
            law.begin(self._sides[0].unit)
        self.values, self.widths, self.times = np.zeros(0), np.zeros(0), None
        self.rows -= len(cells)
        self.observed = 0
        self._learn(cells, times, False, None)

    def _places(self, first: int, count: int, times: npt.NDArray[np.int64] | None) -> npt.NDArray[np.int32]:
        """(1 + phases, count): place of each row in every phase; all 0 in the first line, which is no phase."""
        rows = first + np.arange(count, dtype=np.int64)
        places = [np.zeros(count, dtype=np.int32)]
        return np.ascontiguousarray(np.stack([*places, *(phase.of(rows, times) for phase in self._dates)]))

    def _df(self, observed: npt.NDArray[np.int64]) -> Floats:
        """(fadings, n) degrees of freedom after so many values: 1 and what is left of each."""
        out = [1.0 + observed]
        for fading in FADING[1:]:
            left = fading**observed
            out.append(left + (1.0 - left) / (1.0 - fading))
        return np.ascontiguousarray(np.stack(out).astype(np.float64))

    def _learn(self, cells: Cells, times: npt.NDArray[np.int64] | None, frozen: bool, laws: Laws | None) -> Floats:
        n = len(cells)
        places = self._places(self.rows, n, times)
        df = self._df(self.observed + np.cumsum(cells.usable[0]) - cells.usable[0])
        dates = places[1:] if self._dates else places
        learned = [side.learn(cells, dates, df) for side in self._sides if len(side.alive)]
        losses = np.concatenate([bits for bits, _, _ in learned], axis=1)
        mixed, weights = self._settings.mix(losses, np.arange(n, dtype=np.int32), frozen)
        forecasts, scales = (np.concatenate(some, axis=1) for some in list(zip(*learned, strict=True))[1:])
        centres = self._centres(forecasts, weights)
        # within what was seen so far, and some more
        seen = np.where(cells.usable[0] > 0, cells.values, np.nan)
        low = np.fmin.accumulate(np.concatenate([[self.low], seen]))
        high = np.fmax.accumulate(np.concatenate([[self.high], seen]))
        centres = np.clip(centres, *self._limits(low[:-1], high[:-1]))
        self.low, self.high = float(low[-1]), float(high[-1])
        parts = [np.empty((n, law.weights.shape[1])) for law in self._errors] if laws is not None else []
        by_error = [
            law.learn(centres, cells, places[i], parts[i] if parts else None) for i, law in enumerate(self._errors)
        ]
        bits, kinds = self._kinds.mix(np.stack([mixed, *by_error], axis=1), wanted(n, laws), frozen)
        if laws is not None:
            laws += self._laws(forecasts, scales, df, weights, centres, parts, kinds, self._broad.laws(cells.values))
        bits = with_stray(bits, self._broad.absorb(cells.values, cells.widths))
        self.rows += n
        self.observed += int(cells.usable[0].sum())
        return np.where(cells.usable[0] > 0, bits, 0.0)

    @staticmethod
    def _limits(low: Floats, high: Floats) -> tuple[Floats, Floats]:
        span = WIDE * (high - low)
        return low - span, high + span

    def _living(self) -> list[tuple[Regressions, int]]:
        return [(side, at) for side in self._sides for at in range(len(side.alive))]

    def _centres(self, forecasts: Floats, weights: Floats) -> Floats:
        """Mean forecast in the log's own unit, (n,); what the log scale foretells is taken back first."""
        out = np.zeros(len(forecasts))
        start = 0
        for side in self._sides:
            stop = start + len(side.alive)
            values = side.middle + side.unit * forecasts[:, start:stop]
            values = np.exp(np.minimum(values, 700.0)) if side.log else np.nan_to_num(values)
            out += (values * weights[:, start:stop]).sum(axis=1)
            start = stop
        return out

    def _drop(self, most: int) -> None:
        weights = self._settings.now()
        order = np.argsort(-weights, kind="stable")[:most]
        which = np.sort(order[weights[order] >= weights.max() * 2.0**-_FAR])
        if len(which) == len(weights):
            return
        start = 0
        for side in self._sides:
            stop = start + len(side.alive)
            side.keep(which[(which >= start) & (which < stop)] - start)
            start = stop
        self._settings.keep(which)

    def _laws(
        self,
        forecasts: Floats,
        scales: Floats,
        df: Floats,
        weights: Floats,
        centres: Floats,
        errors: Sequence[Floats],
        kinds: Floats,
        broad: Sequence[NumberLaw],
    ) -> list[NumberLaw]:
        """Laws of n rows: of the living settings, forecasts, scales and weights (n, settings), df (fadings, n); and of
        the errors around centres (n,), each with the weights of its parts, (n, parts); all by the weights of the kinds
        of law, (n, kinds)."""
        sides = [(side, side.choices[i].fading) for side in self._sides for i in side.alive]
        middle, unit = (np.array([getattr(side, name) for side, _ in sides]) for name in ("middle", "unit"))
        logs = np.array([side.log for side, _ in sides])
        shapes = df[[fading for _, fading in sides]].T
        sizes, forms = self._errors[0].forms()
        n, parts = len(centres), len(sizes)
        by_error = sum(kinds[:, i : i + 1] * part for i, part in enumerate(errors, 1))
        heavy = (1.0 - STRAY) * np.concatenate([kinds[:, :1] * weights, by_error], axis=1)
        heavy = np.concatenate([heavy, np.full((n, 1), STRAY)], axis=1)
        heavy /= heavy.sum(axis=1, keepdims=True)
        stray = np.array([(law.centres[0], law.scales[0], law.shapes[0]) for law in broad])
        around = np.repeat(centres[:, None], parts, axis=1)
        places = np.concatenate([middle + unit * forecasts, around, stray[:, :1]], axis=1)
        spreads = np.concatenate([unit * scales, np.tile(sizes, (n, 1)), stray[:, 1:2]], axis=1)
        shapes = np.where(logs, settled(shapes, True), shapes)
        shapes = np.concatenate([shapes, np.tile(forms, (n, 1)), stray[:, 2:]], axis=1)
        logs = np.concatenate([logs, np.zeros(parts + 1, dtype=np.bool_)])
        return [NumberLaw(*row, logs) for row in zip(heavy, places, spreads, shapes, strict=True)]

    def predict(self, time: int | None = None) -> NumberLaw | None:
        if not self._awake:
            return None
        places = self._future(1, [time])
        df = self._df(np.array([self.observed]))
        weights = self._settings.now()[None, :]
        next_rows = [
            side.next(places[1:] if self._dates else places, df[:, 0]) for side in self._sides if len(side.alive)
        ]
        forecasts, scales = (np.concatenate(some, axis=1) for some in zip(*next_rows, strict=True))
        centres = np.clip(self._centres(forecasts, weights), *self._limits(np.array([self.low]), np.array([self.high])))
        errors = [law.weights[place] for law, place in zip(self._errors, places, strict=True)]
        kinds, broad = self._kinds.now()[None, :], self._broad.law()
        return self._laws(forecasts, scales, df, weights, centres, errors, kinds, [broad])[0]

    def walk(self, steps: int, paths: int, times: Sequence[int | None] | None = None) -> list[NumberLaw] | None:
        if not self._awake:
            return None
        places = self._future(steps, times)
        dates = places[1:] if self._dates else places
        df = self._df(np.array([self.observed]))[:, 0]
        weights = self._settings.now()
        living = self._living()
        chosen = leading(weights)
        means, scales = np.empty((steps, len(chosen))), np.empty((steps, len(chosen)))
        for side in self._sides:
            columns = [column for column, (at, _) in enumerate(chosen) if living[at][0] is side]
            places_there = np.array([living[chosen[column][0]][1] for column in columns], dtype=np.intp)
            if columns:
                means[:, columns], scales[:, columns] = side.ahead(places_there, steps, dates, df)
        heavy = np.array([weight for _, weight in chosen])
        sides = [living[at][0] for at, _ in chosen]
        middle, unit = (np.array([getattr(side, name) for side in sides]) for name in ("middle", "unit"))
        logs = np.array([side.log for side in sides])
        shapes = np.array(
            [df[side.choices[side.alive[living[at][1]]].fading] for side, (at, _) in zip(sides, chosen, strict=True)]
        )
        shapes = np.where(logs, settled(shapes, True), shapes)
        kinds = self._kinds.now()
        first = self.predict(None if times is None else times[0])
        assert first is not None
        laws = [first]
        for step in range(1, steps):
            plain = NumberLaw.of(middle + unit * means[step], unit * scales[step], shapes, heavy, logs)
            forecasts = np.where(logs, np.exp(np.minimum(plain.centres, 700.0)), plain.centres)
            centre = np.clip(float(heavy @ forecasts), *self._limits(np.float64(self.low), np.float64(self.high)))
            wider = float(heavy @ (scales[step] / scales[0]))
            by_error = sum(kinds[i + 1] * law.weights[places[i, step]] for i, law in enumerate(self._errors))
            around = self._errors[0].law(centre, by_error, wider)
            sharp = NumberLaw.combine([kinds[0], 1.0 - kinds[0]], [plain, around])
            laws.append(NumberLaw.combine([1.0 - STRAY, STRAY], [sharp, self._broad.law()]))
        return laws

    def _future(self, steps: int, times: Sequence[int | None] | None) -> npt.NDArray[np.int32]:
        when = None if times is None or times[0] is None else np.array(times, dtype=np.int64)
        return self._places(self.rows, steps, when)

    def sample(
        self, steps: int, paths: int, rng: np.random.Generator, times: Sequence[int | None] | None = None
    ) -> Floats:
        """Paths of the regressions, coefficients and variance drawn once a path; the learned errors are not used."""
        places = self._future(steps, times)
        dates = places[1:] if self._dates else places
        df = self._df(np.array([self.observed]))[:, 0]
        drawn = []
        for share, (side, at) in zip(split(self._settings.now(), paths, rng), self._living(), strict=True):
            if share:
                values = side.middle + side.unit * side.paths(at, steps, int(share), dates, df, rng)
                drawn.append(np.exp(np.minimum(values, 700.0)) if side.log else values)
        return np.concatenate(drawn)

    def setting(self) -> str:
        if not self._awake:
            return ""
        side, at = self._living()[int(np.argmax(self._settings.now()))]
        kind = int(np.argmax(self._kinds.now()))
        errors = "" if kind == 0 else "; errors learned" + (f" by {self._dates[kind - 2].label}" if kind > 1 else "")
        return side.choices[side.alive[at]].label(self._dates) + (", log scale" if side.log else "") + errors
