"""The library of models: what there is, and which of it fits a log."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cache
from typing import TYPE_CHECKING, Any

from seqmix import __version__
from seqmix.compressors.brotli import Brotli
from seqmix.compressors.bzip2 import Bzip2
from seqmix.compressors.deflate import Deflate
from seqmix.compressors.protocol import Compressor
from seqmix.compressors.zstd import Zstd
from seqmix.errors import OptionError, visible
from seqmix.models import compressed
from seqmix.models.clock import Clock
from seqmix.models.cycle import Cycle
from seqmix.models.dwell import Dwell
from seqmix.models.lz78 import LZ78
from seqmix.models.markov import Markov
from seqmix.models.match import Match
from seqmix.models.memoryless import Memoryless
from seqmix.models.pool import Pool
from seqmix.models.protocol import Context, StatesModel
from seqmix.models.tree import Tree

if TYPE_CHECKING:
    from seqmix.models.numbers import NumbersModel

COMPRESSORS: tuple[type[Compressor], ...] = (Deflate, Bzip2, Zstd, Brotli)

MODELS: tuple[type[StatesModel], ...] = (
    *(Memoryless, Markov, Tree, Dwell, Clock, Cycle, Match, LZ78, Pool),
    *map(compressed.model_of, COMPRESSORS),
)


def __getattr__(name: str) -> Any:
    """NUMBER_MODELS, made when they are asked for: a log of states starts sooner without them."""
    if name != "NUMBER_MODELS":
        raise AttributeError(f"module 'seqmix.models.registry' has no attribute {name!r}")
    return number_models()


@cache
def number_models() -> tuple[type[NumbersModel], ...]:
    """The models of numbers, in their fixed order."""
    from seqmix.models import compressed_bins
    from seqmix.models.autoregression import Autoregression
    from seqmix.models.bins import Bins
    from seqmix.models.counts import Counts
    from seqmix.models.rhythm import Rhythm
    from seqmix.models.rules import Rules
    from seqmix.models.trend import Season, Trend
    from seqmix.models.values import Values

    plain = (Trend, Season, Autoregression, Rhythm, Counts, Values, Bins, Rules)
    return *plain, *map(compressed_bins.model_of, COMPRESSORS)


DEFAULT = "default"
"""As a name of a model: all of the library that fit."""

SHARE = 0.1
"""Of the run time, for all compressors together."""

_START = 100_000.0  # microseconds that a run takes before the first row
_ROW = {"states": 5.0, "bytes": 10.0, "numbers": 150.0}  # microseconds that all other models take for a row


@dataclass(frozen=True)
class Entry:
    """One line of the library. prior_cost_bits is before normalisation over the models in use; package, version:
    where it comes from."""

    name: str
    kinds: tuple[str, ...]
    prior_cost_bits: float
    summary: str
    source: str
    package: str = "seqmix"
    version: str = __version__


def entries() -> list[Entry]:
    """The whole library, in its fixed order; without plug-ins."""
    found: dict[str, Entry] = {}
    library: list[Any] = [*MODELS, *number_models()]
    for model in library:
        kinds = (*found[model.name].kinds, *model.kinds) if model.name in found else model.kinds
        found[model.name] = Entry(model.name, kinds, model.prior_cost, model.summary, model.source)
    return list(found.values())


def make(kind: str, context: Context, names: Sequence[str] | None = None, share: float = SHARE) -> list[Any]:
    """Blank models for a log of a kind; all that fit, or those named.

    share: of the run time, for the compressors; 0 leaves them out, and with 1, or where there is no other model, they
    are always awake. Raises OptionError for a name that is not in the library, nor of a plug-in, or does not fit.
    """
    if not 0.0 <= share <= 1.0:
        raise OptionError(f"a share of the run time lies between 0 and 1, not {share:g}")
    fitting = _fitting(kind, context, share)
    chosen = list(fitting.values()) if names is None else _chosen(kind, context, fitting, names)
    compressors = [model for model in chosen if _compresses(model)]
    always = share == 1.0 or len(compressors) == len(chosen)
    each = 0.0 if always else share / (1.0 - share) / max(len(compressors), 1)
    allowance = None if always else compressed.Allowance(each * _START, each * _ROW[kind])
    what: Any = context if kind == "numbers" else 256 if kind == "bytes" else 0
    made = [_made(model, what, allowance) for model in chosen]
    return _some([model for model in made if model is not None])


def _fitting(kind: str, context: Context, share: float) -> dict[str, Any]:
    library: list[Any]
    if kind == "numbers":
        library = [model for model in number_models() if model.fits(context)]
    else:
        library = [model for model in MODELS if kind in model.kinds and (context.timed or not model.needs_times)]
    return {model.name: model for model in library if share or not _compresses(model)}


def _compresses(model: Any) -> bool:
    """Whether a class, or that of a plug-in, is made of a compressor: it is then made with an allowance."""
    return hasattr(getattr(model, "model", model), "compressor")


def _made(model: Any, what: Any, allowance: compressed.Allowance | None) -> Any:
    """None where a plug-in cannot make its model."""
    return model(what, allowance) if _compresses(model) else model(what)


def _chosen(kind: str, context: Context, fitting: dict[str, Any], names: Sequence[str]) -> list[Any]:
    """The models that are named, in the order of the library; plug-ins last."""
    known = {entry.name: entry for entry in entries()}
    if not names or len(set(names)) < len(names):
        raise OptionError("name at least one model, and each only once")
    wanted = {*fitting, *names} if DEFAULT in names else set(names)
    added: list[Any] = []
    for name in names:
        if name in known and name not in fitting:
            raise OptionError(f"the model {name} is for {_purpose(kind, known[name])}; leave it out")
        if name not in known and name != DEFAULT:
            from seqmix import plugins  # only where it is needed: start-up time

            found = plugins.model(name, kind, context)
            if found is None and not plugins.exists(name):
                raise OptionError(f"no model is called '{visible(name)}'; {_hint(name, kind, known)}")
            added += [] if found is None else [found]
    return _some([*(model for name, model in fitting.items() if name in wanted), *added])


def _some(models: list[Any]) -> list[Any]:
    if not models:
        raise OptionError("no model is left; name others, or default for all of the library")
    return models


def _purpose(kind: str, entry: Entry) -> str:
    if kind not in entry.kinds:
        return f"{' or '.join(entry.kinds)}, not {kind}"
    if entry.name in {compressor.name for compressor in COMPRESSORS}:
        return "a share of the run time over 0"
    return f"a log with {'a period' if kind == 'numbers' else 'times'}"


def _hint(name: str, kind: str, known: dict[str, Entry]) -> str:
    import difflib  # only where it is needed: start-up time

    near = difflib.get_close_matches(name, known, 1)
    there = ", ".join(entry.name for entry in known.values() if kind in entry.kinds)
    return f"did you mean {near[0]}?" if near else f"there are {there}"
