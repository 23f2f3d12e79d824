"""One-step bits on the last third of six well-known series, against the best of a seasonal ARIMA search by AIC.

The search fits 23 (no season) or 66 models to the first two thirds by maximum likelihood, takes the one of least AIC,
and runs it on over the last third with its parameters held: normal laws, as masses of the same cells. The mixture
starts blank, and its loss counts on the last third too. Series: public-domain data sets of statsmodels.

Run by hand: python tests/benchmarks/arima.py [NAME ...]
"""

from __future__ import annotations

import itertools
import sys
import time
import warnings
from dataclasses import dataclass

import numpy as np
import statsmodels.api as sm
from processes import table
from scipy.stats import norm

from seqmix.mixture.numbers import NumberMixture
from seqmix.models.protocol import Context


@dataclass(frozen=True)
class Known:
    """A series, rows per repeat (1: none), and the resolution of its grid."""

    values: np.ndarray
    period: int
    resolution: float


def series() -> dict[str, Known]:
    sets = sm.datasets
    co2 = sets.co2.load_pandas().data["co2"].resample("MS").mean().interpolate().to_numpy()
    nino = sets.elnino.load_pandas().data.iloc[:, 1:].to_numpy().ravel()
    macro = sets.macrodata.load_pandas().data
    return {
        "sunspots": Known(np.round(sets.sunspots.load_pandas().data["SUNACTIVITY"].to_numpy(), 1), 1, 0.1),
        "nile": Known(sets.nile.load_pandas().data["volume"].to_numpy(float), 1, 1.0),
        "co2": Known(np.round(co2, 2), 12, 0.01),
        "elnino": Known(np.round(nino[np.isfinite(nino)], 2), 12, 0.01),
        "unemployment": Known(np.round(macro["unemp"].to_numpy(), 1), 4, 0.1),
        "log gdp": Known(np.round(np.log(macro["realgdp"].to_numpy()), 4), 4, 0.0001),
    }


def orders(period: int) -> list[tuple[tuple[int, ...], tuple[int, ...]]]:
    """Orders (p, d, q) and (P, D, Q, period) to be tried."""
    plain = [order for order in itertools.product(range(4), range(2), range(3)) if any(order)]
    if period == 1:
        return [(order, (0, 0, 0, 0)) for order in plain]
    seasons = [(0, 0, 0), (1, 0, 0), (0, 1, 1), (1, 1, 1), (0, 1, 0), (1, 0, 1)]
    short = [order for order in plain if order[0] < 3 and order[2] < 2]
    return [(order, (*season, period)) for order in short for season in seasons]


def searched(known: Known) -> tuple[float, str, int]:
    """Bits a row on the last third under the best fit, its orders, and how many were fitted."""
    values, cut = known.values, len(known.values) * 2 // 3
    fits = []
    for order, season in orders(known.period):
        constant = "c" if order[1] == 0 and season[1] == 0 else None
        try:
            model = sm.tsa.SARIMAX(values[:cut], order=order, seasonal_order=season, trend=constant)
            fit = model.fit(disp=0, maxiter=50)
        except (ValueError, np.linalg.LinAlgError):
            continue
        if np.isfinite(fit.aic):
            fits.append((fit.aic, f"{order} {season}", fit))
    _, name, best = min(fits, key=lambda fit: fit[0])
    ahead = best.append(values[cut:]).get_prediction(start=cut)
    law = norm(ahead.predicted_mean, np.sqrt(ahead.var_pred_mean))
    half = known.resolution / 2
    masses = law.cdf(values[cut:] + half) - law.cdf(values[cut:] - half)
    return float(-np.log2(np.maximum(masses, 1e-300)).mean()), name, len(fits)


def mixed(known: Known) -> tuple[float, str]:
    """Bits a row on the last third under the mixture, and the model of least bits there."""
    periods = (known.period,) if known.period > 1 else ()
    mixture = NumberMixture(context=Context(periods), resolution=known.resolution)
    cut = len(known.values) * 2 // 3
    mixture.absorb(known.values[:cut])
    before = mixture.model_bits.copy()
    bits = mixture.absorb(known.values[cut:])
    return float(bits.mean()), mixture.names[int(np.argmin(mixture.model_bits - before))]


def measure(names: list[str]) -> None:
    warnings.simplefilter("ignore")
    lines, better = [], 0
    for name, known in series().items():
        if names and name not in names:
            continue
        begun = time.perf_counter()
        ours, model = mixed(known)
        middle = time.perf_counter()
        theirs, order, fitted = searched(known)
        seconds = time.perf_counter() - middle
        better += ours < theirs
        lines.append([
            name, f"{len(known.values):,}", f"{ours:.4f}", f"{theirs:.4f}", f"{ours - theirs:+.4f}", model, order,
            f"{fitted}", f"{middle - begun:.3f}", f"{seconds:.1f}", f"1/{seconds / (middle - begun):.0f}",
        ])  # fmt: skip
    table(
        ["series", "rows", "mixture, bits a row", "best ARIMA", "difference", "model of least bits", "its orders",
         "fits", "mixture, seconds", "search, seconds", "time"],
        lines,
    )  # fmt: skip
    print(f"\nbetter on {better} of {len(lines)}")


if __name__ == "__main__":
    measure(sys.argv[1:])
