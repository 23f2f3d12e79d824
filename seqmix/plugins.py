"""Models and compressors of other packages, found by entry points and kept from doing harm.

A package offers a model as an entry point of the group `seqmix.models`: a class that is called as those of the
library are, with the alphabet (256 for bytes, else 0) or, for numbers, with a `Context`. A compressor is one of the
group `seqmix.compressors`: a class with `code_length`. The name of an entry point is the name of the model.
What cannot be loaded or fails later is named in a `PluginWarning` and left out.
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
from seqmix.models.registry import DEFAULT, Entry, entries

MODELS, COMPRESSORS = "seqmix.models", "seqmix.compressors"
KINDS = ("states", "bytes", "numbers")


@dataclass(frozen=True)
class Plugin:
    """A model of a plug-in that can be made: called as the class is, it gives a `Guarded` one."""

    model: type
    entry: Entry

    @property
    def where(self) -> str:
        return f"plug-in {visible(self.entry.name)} of {visible(self.entry.package)} {visible(self.entry.version)}"

    def __call__(self, *of: Any) -> Guarded:
        try:
            return Guarded(self.model(*of), self)
        except Exception as error:
            raise SeqmixError(f"{self.where} cannot be made: {_told(error)}; leave it out") from error


@lru_cache(maxsize=1)
def _points() -> tuple[EntryPoint, ...]:
    return (*entry_points(group=MODELS), *entry_points(group=COMPRESSORS))


def exists(name: str) -> bool:
    """Whether a plug-in of this name is installed, sound or not."""
    return any(point.name == name for point in _points())


def model(name: str, kind: str) -> Plugin | None:
    """The plug-in's model of this name for a kind of log; None, and a warning that says why, if there is none."""
    found = [plugin for point in _points() if point.name == name for plugin in _sound(point)]
    for plugin in found:
        if kind in plugin.entry.kinds:
            return plugin
    if found:
        kinds = " or ".join(kind for plugin in found for kind in plugin.entry.kinds)
        warnings.warn(f"{found[0].where} left out: it is for {kinds}, not {kind}", PluginWarning, stacklevel=2)
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

    def __init__(self, model: Any, plugin: Plugin) -> None:
        self._model = model
        self._where = plugin.where
        self._failed = False
        self.name: str = plugin.entry.name
        self.kinds = plugin.entry.kinds
        self.prior_cost = plugin.entry.prior_cost_bits

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
        def bits() -> Any:
            found = np.asarray(self._model.absorb(rows, ask, frozen), dtype=np.float64)
            if found.shape != (len(rows),) or (found < -1e-9).any() or np.isposinf(found).any():
                raise ValueError("losses are bits, one a row, finite and not below 0")
            return found

        return self._guard(bits, np.full(len(rows), np.nan))

    def predict(self, time: int | None = None) -> Any:
        return self._guard(lambda: self._model.predict(time), None)

    def walk(self, steps: int, paths: int, times: Sequence[int | None] | None = None) -> Any:
        return self._guard(lambda: self._model.walk(steps, paths, times), None)

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
        return {"failed": self._failed, **({} if self._failed else self._model.state())}

    def restore(self, state: dict[str, Any]) -> None:
        rest = dict(state)
        self._failed = bool(rest.pop("failed"))
        if not self._failed:
            self._model.restore(rest)
