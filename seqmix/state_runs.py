"""Explanations of states and bytes that keep their ways: constant odds of each state, or of each after each.

Dirichlet laws over the states seen so far; that a state is new is an event which costs every run the same, so it costs
nothing here.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from seqmix.runs import BORNE_OUT, MOST

Floats = npt.NDArray[np.float64]

CONTEXTS = 64
"""States, at most, for odds that depend on the last state."""

KNOWN = 4096
"""States told apart; the later ones count as one."""

PRIOR_COUNTS = (0.5, 8.0, 1e9)
"""Of each state, where a run starts from nothing: Krichevsky & Trofimov 1981; more even odds; and even ones."""

STRENGTH = 2.0
"""Rows, all told, that the odds before count for where a run starts from these."""

OUTLIERS = 0.01
"""Part of every law that is uniform: no row speaks louder than this lets it."""


STARTS = len(PRIOR_COUNTS) + 1
_PRIOR = np.array([*PRIOR_COUNTS, PRIOR_COUNTS[0]])[:, None, None]


class StateWays:
    """Odds of each state, or of each after each, begun from nothing or from the odds before."""

    def __init__(self, states: int = 0) -> None:
        """states: how many there are, where that is known beforehand."""
        self.prior = np.full(2 * STARTS, 0.5 / STARTS)
        self.borne_out = BORNE_OUT
        self._states = 0
        self._fixed = states > 0
        self._last = 0
        self._odds = np.zeros((MOST, STARTS, 1, 0))  # run, begun from, context, state: counts and prior counts
        self._after = np.zeros((MOST, STARTS, 0, 0))
        self._admit(states)

    def _admit(self, states: int) -> None:
        """Room for so many states; new ones have the prior count everywhere."""
        self._states = states
        self._odds = _wider(self._odds, 1, states)
        # too many contexts: from now on as if the last state told nothing
        self._after = _wider(self._after, states, states) if states <= CONTEXTS else np.zeros((MOST, STARTS, 0, 0))

    def anew(self) -> bool:
        return False

    def ready(self, value: float) -> bool:
        self._look(value)
        return True

    def _look(self, value: float) -> None:
        self._new = not self._fixed and value == self._states and value < KNOWN
        if self._new:
            self._admit(self._states + 1)
        self._code = min(int(value), KNOWN - 1)

    def begin(self, run: int, running: int) -> None:
        for counts in (self._odds, self._after):
            counts[run] = _PRIOR
            if run == running:
                counts[run, -1] = STRENGTH / max(self._states, 1)
            elif counts.size:
                before = counts[running, 0]
                counts[run, -1] = STRENGTH * before / before.sum(axis=1, keepdims=True)

    def losses(self, value: float, runs: int) -> Floats:
        self._look(value)
        if self._new or self._states < 2:
            return np.zeros((runs, 2 * STARTS))
        masses = np.empty((runs, 2 * STARTS))
        masses[:, :STARTS] = self._masses(self._odds, 0, runs)
        masses[:, STARTS:] = self._masses(self._after, self._last, runs) if self._after.size else masses[:, :STARTS]
        return -np.log2((1.0 - OUTLIERS) * masses + OUTLIERS / self._states)

    def _masses(self, counts: Floats, context: int, runs: int) -> Floats:
        here = counts[:runs, :, context]
        masses: Floats = here[:, :, self._code] / here.sum(axis=2)
        return masses

    def learn(self, runs: int) -> None:
        self._odds[:runs, :, 0, self._code] += 1.0
        if self._after.size:
            self._after[:runs, :, self._last, self._code] += 1.0
        self._last = self._code

    def keep(self, which: npt.NDArray[np.intp]) -> None:
        for counts in (self._odds, self._after):
            counts[: len(which)] = counts[which]

    def level(self, run: int) -> None:
        return None


def _wider(counts: Floats, contexts: int, states: int) -> Floats:
    """Counts with so many contexts and states; what is new has the prior count."""
    wider = np.broadcast_to(_PRIOR, (MOST, STARTS, contexts, states)).copy()
    wider[:, :, : counts.shape[2], : counts.shape[3]] = counts
    return wider
