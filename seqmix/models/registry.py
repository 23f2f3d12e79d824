"""The library of models: what there is, and which of it fits a log."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from seqmix.errors import OptionError, visible
from seqmix.models.clock import Clock
from seqmix.models.cycle import Cycle
from seqmix.models.dwell import Dwell
from seqmix.models.lz78 import LZ78
from seqmix.models.markov import Markov
from seqmix.models.match import Match
from seqmix.models.memoryless import Memoryless
from seqmix.models.pool import Pool
from seqmix.models.protocol import StatesModel
from seqmix.models.tree import Tree

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
    return [Entry(model.name, model.kinds, model.prior_cost, model.summary, model.source) for model in MODELS]


def make(kind: str, timed: bool, names: Sequence[str] | None = None) -> list[StatesModel]:
    """Blank models for a log of `kind`, `timed` if its rows have times; all that fit, or those named.

    Raises OptionError for a name that is not in the library or does not fit the log.
    """
    alphabet = 256 if kind == "bytes" else 0
    fitting = [model for model in MODELS if kind in model.kinds and (timed or not model.needs_times)]
    if names is None:
        return [model(alphabet) for model in fitting]
    known = {model.name: model for model in MODELS}
    for name in names:
        if name not in known:
            import difflib  # only where it is needed: start-up time

            near = difflib.get_close_matches(name, known, 1)
            hint = f"did you mean {near[0]}?" if near else f"there are {', '.join(known)}"
            raise OptionError(f"no model is called '{visible(name)}'; {hint}")
        if known[name] not in fitting:
            why = "a log with times" if kind in known[name].kinds else f"{' or '.join(known[name].kinds)}, not {kind}"
            raise OptionError(f"the model {name} is for {why}; leave it out")
    if not names or len(set(names)) < len(names):
        raise OptionError("name at least one model, and each only once")
    return [known[name](alphabet) for name in known if name in names]
