"""The library of models: what there is, and which of it fits a log."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from seqmix.errors import OptionError, visible
from seqmix.models.autoregression import Autoregression
from seqmix.models.bins import Bins
from seqmix.models.clock import Clock
from seqmix.models.counts import Counts
from seqmix.models.cycle import Cycle
from seqmix.models.dwell import Dwell
from seqmix.models.lz78 import LZ78
from seqmix.models.markov import Markov
from seqmix.models.match import Match
from seqmix.models.memoryless import Memoryless
from seqmix.models.numbers import Context, NumbersModel
from seqmix.models.pool import Pool
from seqmix.models.protocol import StatesModel
from seqmix.models.rhythm import Rhythm
from seqmix.models.rules import Rules
from seqmix.models.tree import Tree
from seqmix.models.trend import Season, Trend
from seqmix.models.values import Values

NUMBER_MODELS: tuple[type[NumbersModel], ...] = (
    Trend,
    Season,
    Autoregression,
    Rhythm,
    Counts,
    Values,
    Bins,
    Rules,
)

MODELS: tuple[type[StatesModel], ...] = (Memoryless, Markov, Tree, Dwell, Clock, Cycle, Match, LZ78, Pool)


@dataclass(frozen=True)
class Entry:
    """One line of the library. prior_cost_bits is before normalisation over the models in use."""

    name: str
    kinds: tuple[str, ...]
    prior_cost_bits: float
    summary: str
    source: str


def entries() -> list[Entry]:
    """The whole library, in its fixed order."""
    library: list[Any] = [*MODELS, *NUMBER_MODELS]
    return [Entry(model.name, model.kinds, model.prior_cost, model.summary, model.source) for model in library]


def make(kind: str, timed: bool, names: Sequence[str] | None = None) -> list[StatesModel]:
    """Blank models for a log of states or bytes, `timed` if its rows have times; all that fit, or those named.

    Raises OptionError for a name that is not in the library or does not fit the log.
    """
    alphabet = 256 if kind == "bytes" else 0
    fitting = {model.name: model for model in MODELS if kind in model.kinds and (timed or not model.needs_times)}
    return [fitting[name](alphabet) for name in _chosen(kind, list(fitting), names)]


def make_numbers(context: Context, names: Sequence[str] | None = None) -> list[NumbersModel]:
    """Blank models for a log of numbers; all that fit `context`, or those named. Raises OptionError as `make`."""
    fitting = {model.name: model for model in NUMBER_MODELS if model.fits(context)}
    return [fitting[name](context) for name in _chosen("numbers", list(fitting), names)]


def _chosen(kind: str, fitting: list[str], names: Sequence[str] | None) -> list[str]:
    """The fitting models, or those of them that are named, in the order of the library."""
    if names is None:
        return fitting
    known = {entry.name: entry for entry in entries()}
    for name in names:
        if name not in known:
            import difflib  # only where it is needed: start-up time

            near = difflib.get_close_matches(name, known, 1)
            names_there = [entry.name for entry in known.values() if kind in entry.kinds]
            hint = f"did you mean {near[0]}?" if near else f"there are {', '.join(names_there)}"
            raise OptionError(f"no model is called '{visible(name)}'; {hint}")
        if name not in fitting:
            kinds = known[name].kinds
            missed = "a period" if kind == "numbers" else "times"
            why = f"a log with {missed}" if kind in kinds else f"{' or '.join(kinds)}, not {kind}"
            raise OptionError(f"the model {name} is for {why}; leave it out")
    if not names or len(set(names)) < len(names):
        raise OptionError("name at least one model, and each only once")
    return [name for name in fitting if name in names]
