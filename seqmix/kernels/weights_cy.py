# cython: language_level=3, boundscheck=False, wraparound=False, cdivision=True, initializedcheck=False
"""Bayes' rule over a matrix of losses, static and with fixed share."""

from __future__ import annotations

try:  # the compiler wants the plain import; without Cython the shim stands in
    import cython
except ModuleNotFoundError:
    from seqmix.kernels import shim as cython

if cython.compiled:
    from cython.cimports.libc.math import exp, log
else:
    from math import exp, log

LN2 = cython.declare(cython.double, 0.6931471805599453)
FAR = cython.declare(cython.double, 64.0)  # bits behind the best that no sum in double precision can feel


def is_compiled() -> bool:
    """True in the compiled module, False where Python runs this file."""
    return cython.compiled


@cython.cfunc
@cython.nogil
@cython.inline
@cython.exceptval(check=False)
def _mass(bits: cython.double) -> cython.double:
    """2 ** -bits, for bits >= 0."""
    return exp(-bits * LN2) if bits < FAR else 0.0


@cython.cfunc
@cython.nogil
@cython.inline
@cython.exceptval(check=False)
def _weights(
    behind: cython.double[::1],
    kinds: cython.int,
    shares: cython.double[:, ::1],
    camps: cython.double[::1],
    before: cython.double[:, ::1],
    at: cython.Py_ssize_t,
) -> cython.void:
    """before[at] = weight of every model, over all camps."""
    i: cython.Py_ssize_t
    r: cython.Py_ssize_t
    for i in range(behind.shape[0]):
        before[at, i] = _mass(camps[0]) * _mass(behind[i])
        for r in range(kinds):
            before[at, i] += _mass(camps[r + 1]) * shares[r, i]


def update(
    losses: cython.double[:, ::1],
    prior: cython.double[::1],
    kinds: cython.int,
    rates: cython.double[::1],
    behind: cython.double[::1],
    shares: cython.double[:, ::1],
    camps: cython.double[::1],
    chance: cython.double[::1],
    want: cython.int[::1],
    before: cython.double[:, ::1],
    bits: cython.double[::1],
) -> None:
    """Mix a chunk of losses and learn the weights from it.

    losses (n, models): bits, NaN where a model sleeps: it then counts as predicting what the awake ones do,
    so its weight stands still (Freund, Schapire, Singer & Warmuth 1997).
    behind (models,): minus log2 of the weights of static Bayes. shares (rates, models): weights under fixed
    share, which after each row hands `rate` (the first `kinds` of `rates`) of all weight back to `prior`
    (Herbster & Warmuth 1998). camps (1 + rates,): minus log2 of the weights of static Bayes, first, and of each
    rate. chance (models,) is workspace.
    Writes bits (n,), the loss of the mixture, and before[want[t]], the weights before row t.
    """
    models: cython.Py_ssize_t = losses.shape[1]
    t: cython.Py_ssize_t
    i: cython.Py_ssize_t
    r: cython.Py_ssize_t
    best: cython.double  # smallest loss of the row
    joint: cython.double  # smallest weight-and-loss of the row, in bits
    heavy: cython.double  # bits of the heaviest model awake
    total: cython.double
    awake: cython.double
    share: cython.double
    asleep: cython.bint
    with cython.nogil:
        for t in range(losses.shape[0]):
            if want[t] >= 0:
                _weights(behind, kinds, shares, camps, before, want[t])
            best = 1e300
            joint = 1e300
            heavy = 1e300
            asleep = False
            for i in range(models):
                if losses[t, i] != losses[t, i]:
                    asleep = True
                    continue
                best = min(best, losses[t, i])
                joint = min(joint, behind[i] + losses[t, i])
                heavy = min(heavy, behind[i])
            bits[t] = 0.0
            if best == 1e300:
                continue  # nobody is awake
            # static Bayes
            total = 0.0
            awake = 0.0
            for i in range(models):
                chance[i] = -1.0
                if losses[t, i] == losses[t, i]:
                    chance[i] = _mass(losses[t, i] - best)
                    total += _mass(behind[i] + losses[t, i] - joint)
                    if asleep:
                        awake += _mass(behind[i] - heavy)
            share = joint - log(total) / LN2
            if asleep:
                share -= heavy - log(awake) / LN2
            for i in range(models):
                if chance[i] >= 0.0:
                    behind[i] += losses[t, i] - share
            camps[0] += share
            joint = camps[0]
            # fixed share
            for r in range(kinds):
                awake = 0.0
                total = 0.0
                for i in range(models):
                    if chance[i] >= 0.0:
                        awake += shares[r, i]
                        total += shares[r, i] * chance[i]
                share = total / awake
                for i in range(models):
                    if chance[i] >= 0.0:
                        shares[r, i] = shares[r, i] * chance[i] / share
                    shares[r, i] = (1.0 - rates[r]) * shares[r, i] + rates[r] * prior[i]
                camps[r + 1] += best - log(share) / LN2
                joint = min(joint, camps[r + 1])
            # static and switching together
            total = 0.0
            for r in range(kinds + 1):
                total += _mass(camps[r] - joint)
            bits[t] = joint - log(total) / LN2
            for r in range(kinds + 1):
                camps[r] -= bits[t]
