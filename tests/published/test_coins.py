"""A coin of unknown bias under a Bayes mixture of coins: how far its chances are from the true one, all rows together.

Common practice, no source: the expected sum of the squared errors is at most ln 2 times the prior cost of the true
coin (in bits), and so the expected number of rows on which the error is larger than e is at most that over e squared.
"""

from __future__ import annotations

import numpy as np
import pytest

from seqmix.mixture.weights import Weights

ROWS = 300
CHANCES = np.array([0.02, 0.1, 0.25, 0.4, 0.5, 0.55, 0.7, 0.9, 0.999])
COSTS = np.array([1.0, 2.0, 3.0, 4.0, 4.0, 6.0, 8.0, 9.0, 12.0])


def errors(truth: int) -> tuple[np.ndarray, np.ndarray]:
    """Error of the mixture after n rows with s ones, and its probability; both (s, n).

    What a Bayes mixture says depends on how many ones came, not on when: rows 1 1 1 .. 0 0 0 lead to all of them.
    """
    said = np.zeros((ROWS + 1, ROWS))
    for ones in range(ROWS + 1):
        rows = np.arange(ROWS) < ones
        losses = -np.log2(np.where(rows[:, None], CHANCES, 1 - CHANCES))
        before = Weights(COSTS, ()).mix(losses, np.arange(ROWS, dtype=np.int32))[1]
        said[ones, ones:] = before[ones:] @ CHANCES
    there = np.zeros((ROWS + 1, ROWS))
    there[0, 0] = 1.0
    chance = CHANCES[truth]
    for n in range(1, ROWS):
        there[:, n] = there[:, n - 1] * (1 - chance)
        there[1:, n] += there[:-1, n - 1] * chance
    return said - chance, there


@pytest.mark.parametrize("truth", range(len(CHANCES)), ids=str)
def test_squared_errors_and_deviations(truth: int) -> None:
    error, there = errors(truth)
    assert there.sum() == pytest.approx(ROWS)
    most = np.log(2) * Weights(COSTS, ()).costs[truth]
    assert (there * error**2).sum() <= most
    for e in (0.01, 0.05, 0.1, 0.2, 0.4):
        assert there[np.abs(error) > e].sum() <= most / e**2
