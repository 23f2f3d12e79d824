"""seqmix: what comes next in a log, with honest odds.

    import seqmix
    forecast = seqmix.forecast(["fill", "cap", "label", "fill", "cap"], steps=3)
    forecast.steps[0].probabilities

Everything is loaded on first use, so that importing the package costs next to nothing.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

__version__ = "0.1.0"

if TYPE_CHECKING:
    from seqmix.describing import Description, describe
    from seqmix.errors import SeqmixError
    from seqmix.forecasting import Forecast, forecast
    from seqmix.learning import Lesson, learn
    from seqmix.likeness import Likeness, alike
    from seqmix.mixture.mixture import Mixture
    from seqmix.scoring import Score, score
    from seqmix.series import Log, Series, open_log, read
    from seqmix.shifting import Shifts, shifts
    from seqmix.surprising import Surprise, surprise
    from seqmix.weighing import Weights, weights

_HOME = {
    "Description": "seqmix.describing",
    "Forecast": "seqmix.forecasting",
    "Likeness": "seqmix.likeness",
    "Lesson": "seqmix.learning",
    "Log": "seqmix.series",
    "Mixture": "seqmix.mixture.mixture",
    "Score": "seqmix.scoring",
    "SeqmixError": "seqmix.errors",
    "Series": "seqmix.series",
    "Surprise": "seqmix.surprising",
    "Shifts": "seqmix.shifting",
    "Weights": "seqmix.weighing",
    "alike": "seqmix.likeness",
    "describe": "seqmix.describing",
    "forecast": "seqmix.forecasting",
    "learn": "seqmix.learning",
    "open_log": "seqmix.series",
    "read": "seqmix.series",
    "score": "seqmix.scoring",
    "surprise": "seqmix.surprising",
    "shifts": "seqmix.shifting",
    "weights": "seqmix.weighing",
}

__all__ = [
    "Description",
    "Forecast",
    "Lesson",
    "Likeness",
    "Log",
    "Mixture",
    "Score",
    "SeqmixError",
    "Series",
    "Shifts",
    "Surprise",
    "Weights",
    "__version__",
    "alike",
    "describe",
    "forecast",
    "learn",
    "open_log",
    "read",
    "score",
    "shifts",
    "surprise",
    "weights",
]


def __getattr__(name: str) -> Any:
    if name not in _HOME:
        raise AttributeError(f"module 'seqmix' has no attribute {name!r}")
    value = globals()[name] = getattr(import_module(_HOME[name]), name)
    return value


def __dir__() -> list[str]:
    return sorted(__all__)
