"""Models and compressors of other packages, found by entry points and kept from doing harm.

A package offers a model as an entry point of the group `seqmix.models`: a class that is called as those of the
library are, with the alphabet (256 for bytes, else 0) or, for numbers, with a `Context`. A compressor is one of the
group `seqmix.compressors`: a class with `code_length`. The name of an entry point is the name of the model.
What cannot be loaded or made, or fails later, is named in a `PluginWarning` and left out.
"""

from __future__ import annotations

import warnings
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import lru_cache
from importlib.metadata import EntryPoint, entry_points
from typing import Any

import numpy as np

from seqmix.errors import PluginWarning, SeqmixError, visible
from seqmix.models.laws import NumberLaw
from seqmix.models.protocol import FEWEST_PATHS, Context, StatesLaw, Walk
from seqmix.models.registry import DEFAULT, Entry, entries

MODELS, COMPRESSORS = "seqmix.models", "seqmix.compressors"
KINDS = ("states", "bytes", "numbers")

_NEAR_ONE = 1e-6  # how far from 1 the masses of a law may add up


@dataclass(frozen=True)
class Plugin:
    """A model of a plug-in: called as the class is, it gives a `Guarded` one, or None where it cannot be made."""

    model: type
    entry: Entry

    @property
    def where(self) -> str:
        return f"plug-in {visible(self.entry.name)} of {visible(self.entry.package)} {visible(self.entry.version)}"

    def __call__(self, *of: Any) -> Guarded | None:
        try:
            return Guarded(self.model(*of), self, of[0] if isinstance(of[0], int) else 0)
        except Exception as error:
            self.leave_out(_told(error))
            return None

    def leave_out(self, why: str) -> None:
        warnings.warn(f"{self.where} left out: {why}", PluginWarning, stacklevel=3)


@lru_cache(maxsize=1)
def _points() -> tuple[EntryPoint, ...]:
    return (*entry_points(group=MODELS), *entry_points(group=COMPRESSORS))


def exists(name: str) -> bool:
    """Whether a plug-in of this name is installed, sound or not."""
    return any(point.name == name for point in _points())


def model(name: str, kind: str, context: Context) -> Plugin | None:
    """The plug-in's model of this name for such a log; None, and a warning that says why, if there is none."""
    found = [plugin for point in _points() if point.name == name for plugin in _sound(point)]
    for plugin in found:
        if kind in plugin.entry.kinds:
            if context.timed or not getattr(plugin.model, "needs_times", False):
                return plugin
            plugin.leave_out("it is for a log with times")
            return None
    if found:
        kinds = " or ".join(kind for plugin in found for kind in plugin.entry.kinds)
        found[0].leave_out(f"it is for {kinds}, not {kind}")
    return None


def every() -> list[Entry]:
    """What the sound plug-ins add to the library; the others are warned of."""
    merged: dict[str, Entry] = {}
    for point in _points():
        for plugin in _sound(point):
            entry = plugin.entry
            kinds = (*merged[entry.name].kinds, *entry.kinds) if entry.name in merged else entry.kinds
            merged[entry.name] = Entry(**{**vars(entry), "kinds": kinds})
    return list(merged.values())


def _sound(point: EntryPoint) -> list[Plugin]:
    """The models of an entry point; none, and a warning, if it is broken."""
    package, version = (point.dist.name, point.dist.version) if point.dist else ("", "")
    try:
        return [Plugin(model, _entry(model, point.name, package, version)) for model in _load(point)]
    except Exception as error:
        where = f"plug-in {visible(point.name)} of {visible(package)} {visible(version)}"
        warnings.warn(f"{where} left out: {_told(error)}", PluginWarning, stacklevel=3)
        return []


def _load(point: EntryPoint) -> list[type]:
    loaded = point.load()
    if point.group == MODELS:
        return [loaded]
    from seqmix.models import compressed, compressed_bins

    for name in ("cost", "reach", "informed", "code_length"):
        if not hasattr(loaded, name):
            raise TypeError(f"a compressor has '{name}'")
    return [compressed.model_of(loaded), compressed_bins.model_of(loaded)]


def _entry(model: Any, name: str, package: str, version: str) -> Entry:
    """Raises TypeError or ValueError where a model lacks what every model has."""
    if name == DEFAULT or name in {entry.name for entry in entries()}:
        raise ValueError("a model of the library has this name")
    if getattr(model, "name", None) != name:
        raise ValueError(f"the model calls itself {getattr(model, 'name', None)!r}")
    kinds = tuple(getattr(model, "kinds", ()))
    if not kinds or not set(kinds) <= set(KINDS):
        raise ValueError(f"kinds are some of {', '.join(KINDS)}")
    for part in ("absorb", "predict", "walk", "sample", "setting", "state", "restore"):
        if not callable(getattr(model, part, None)):
            raise TypeError(f"a model has '{part}'")
    cost = float(model.prior_cost)
    if not 0.0 <= cost < 1000.0:
        raise ValueError("a prior cost lies between 0 and 1,000 bits")
    return Entry(name, kinds, cost, str(model.summary), str(model.source), package, version)


def _told(error: BaseException) -> str:
    return visible(f"{type(error).__name__}: {error}", 300)


class Guarded:
    """A plug-in's model: at its first failure, or answer that cannot be, it is put to sleep for good."""

    def __init__(self, model: Any, plugin: Plugin, alphabet: int) -> None:
        self._model = model
        self._states = alphabet  # seen so far
        self._where = plugin.where
        self._failed = False
        self.name: str = plugin.entry.name
        self.kinds = plugin.entry.kinds
        self.prior_cost = plugin.entry.prior_cost_bits
        self.fewest_paths: int = getattr(model, "fewest_paths", FEWEST_PATHS)

    def _guard(self, call: Callable[[], Any], asleep: Any) -> Any:
        """What `call` gives; `asleep` if it fails, or failed before."""
        if self._failed:
            return asleep
        try:
            return call()
        except Exception as error:
            self._failed = True
            warnings.warn(f"{self._where} left out from here on: {_told(error)}", PluginWarning, stacklevel=3)
            return asleep

    def absorb(self, rows: Any, ask: Any = None, frozen: bool = False) -> Any:
        if not frozen:
            self._states = max(self._states, int(rows.codes.max(initial=-1)) + 1)

        def bits() -> Any:
            found = np.asarray(self._model.absorb(rows, ask, frozen), dtype=np.float64)
            if found.shape != (len(rows),) or (found < -1e-9).any() or np.isposinf(found).any():
                raise ValueError("losses are bits, one a row, finite and not below 0")
            if ask is not None and len(ask.at):
                _check_masses(ask.laws[~np.isnan(found[ask.at])])
            return found

        found = self._guard(bits, None)
        if found is None:
            if ask is not None:
                ask.laws[:] = 0.0
            return np.full(len(rows), np.nan)
        return found

    def predict(self, time: int | None = None) -> Any:
        return self._guard(lambda: self._checked(self._model.predict(time)), None)

    def walk(self, steps: int, paths: int, times: Sequence[int | None] | None = None) -> Any:
        def walk() -> Any:
            found = self._model.walk(steps, paths, times)
            if isinstance(found, Walk):
                _check_masses(found.laws)
                if found.laws.shape != (steps, self._states + 1):
                    raise ValueError("the laws of a walk are (steps, states + 1)")
            elif found is not None and len([*map(self._checked, found)]) != steps:
                raise ValueError("a walk has a law for each step")
            return found

        return self._guard(walk, None)

    def sample(
        self, steps: int, paths: int, rng: np.random.Generator, times: Sequence[int | None] | None = None
    ) -> Any:
        try:
            return self._model.sample(steps, paths, rng, times)
        except Exception as error:
            raise SeqmixError(f"{self._where} cannot draw paths: {_told(error)}; leave it out") from error

    def setting(self) -> str:
        return str(self._guard(self._model.setting, ""))

    def rouse(self, left: int) -> None:
        if hasattr(self._model, "rouse"):
            self._guard(lambda: self._model.rouse(left), None)

    def state(self) -> dict[str, Any]:
        kept = self._guard(lambda: dict(self._model.state()), {})
        return {"failed": self._failed, "states": self._states, **{f"model.{name}": v for name, v in kept.items()}}

    def restore(self, state: dict[str, Any]) -> None:
        self._failed, self._states = bool(state["failed"]), int(state["states"])
        kept = {name[len("model.") :]: value for name, value in state.items() if name.startswith("model.")}
        self._guard(lambda: self._model.restore(kept), None)

    def _checked(self, law: Any) -> Any:
        """A law as it is, None too. Raises TypeError or ValueError if it cannot be."""
        if isinstance(law, NumberLaw):
            _check_masses(law.weights)
            if not (np.isfinite(law.centres).all() and np.isfinite(law.scales).all() and (law.scales >= 0).all()):
                raise ValueError("centres and scales are finite, and no scale is below 0")
        elif isinstance(law, StatesLaw):
            _check_masses(np.append(law.masses, law.unseen))
            if len(law.masses) != self._states:
                raise ValueError("a law has a mass for each state seen")
        elif law is not None:
            raise TypeError("a law is a StatesLaw, a NumberLaw or None")
        return law


def _check_masses(masses: Any) -> None:
    """Raises ValueError unless each line of `masses` is a law."""
    if not ((masses >= 0).all() and (abs(masses.sum(axis=-1) - 1.0) < _NEAR_ONE).all()):
        raise ValueError("masses are not below 0 and add up to 1")
