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
def _awake(shares: cython.double[:, ::1], r: cython.Py_ssize_t, chance: cython.double[::1]) -> cython.double:
    """Weight of the models awake at rate r."""
    i: cython.Py_ssize_t
    total: cython.double = 0.0
    for i in range(shares.shape[1]):
        if chance[i] >= 0.0:
            total += shares[r, i]
    return total


@cython.cfunc
@cython.nogil
@cython.inline
@cython.exceptval(check=False)
def _weights(
    behind: cython.double[::1],
    out_of_bed: cython.double,
    kinds: cython.int,
    shares: cython.double[:, ::1],
    camps: cython.double[::1],
    chance: cython.double[::1],
    before: cython.double[:, ::1],
    at: cython.Py_ssize_t,
) -> cython.void:
    """before[at] = weight of every model awake, over all camps; in each camp those awake add to its weight; sum 1."""
    i: cython.Py_ssize_t
    r: cython.Py_ssize_t
    part: cython.double
    for i in range(behind.shape[0]):
        before[at, i] = _mass(camps[0]) * _mass(behind[i] - out_of_bed) if chance[i] >= 0.0 else 0.0
    for r in range(kinds):
        part = _mass(camps[r + 1]) / _awake(shares, r, chance)
        for i in range(behind.shape[0]):
            if chance[i] >= 0.0:
                before[at, i] += part * shares[r, i]
    part = 0.0
    for i in range(behind.shape[0]):
        part += before[at, i]
    for i in range(behind.shape[0]):  # the camps add to 1 but for rounding
        before[at, i] /= part


def update(
    losses: cython.double[:, ::1],
    prior: cython.double[::1],
    kinds: cython.int,
    rates: cython.double[::1],
    behind: cython.double[::1],
    shares: cython.double[:, ::1],
    camps: cython.double[::1],
    frozen: cython.bint,
    work: cython.double[::1],
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
    rate. work (models + 1 + rates,). frozen: mix only.
    Writes bits (n,), the loss of the mixture, NaN where all sleep, and before[want[t]], the weights before row t
    of the models awake at it.
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
            if best == 1e300:
                bits[t] = losses[t, 0]  # nobody is awake: NaN
                if want[t] >= 0:
                    for i in range(models):
                        before[want[t], i] = 0.0
                continue
            # static Bayes
            total = 0.0
            awake = 0.0
            for i in range(models):
                work[i] = -1.0
                if losses[t, i] == losses[t, i]:
                    work[i] = _mass(losses[t, i] - best)
                    total += _mass(behind[i] + losses[t, i] - joint)
                    if asleep:
                        awake += _mass(behind[i] - heavy)
            share = joint - log(total) / LN2
            awake = heavy - log(awake) / LN2 if asleep else 0.0
            if want[t] >= 0:
                _weights(behind, awake, kinds, shares, camps, work, before, want[t])
            share -= awake
            if not frozen:
                for i in range(models):
                    if work[i] >= 0.0:
                        behind[i] += losses[t, i] - share
            work[models] = camps[0] + share
            joint = work[models]
            # fixed share
            for r in range(kinds):
                total = 0.0
                for i in range(models):
                    if work[i] >= 0.0:
                        total += shares[r, i] * work[i]
                share = total / _awake(shares, r, work)
                if not frozen:
                    for i in range(models):
                        if work[i] >= 0.0:
                            shares[r, i] = shares[r, i] * work[i] / share
                        shares[r, i] = (1.0 - rates[r]) * shares[r, i] + rates[r] * prior[i]
                work[models + r + 1] = camps[r + 1] + best - log(share) / LN2
                joint = min(joint, work[models + r + 1])
            # static and switching together
            total = 0.0
            for r in range(kinds + 1):
                total += _mass(work[models + r] - joint)
            bits[t] = joint - log(total) / LN2
            if not frozen:
                for r in range(kinds + 1):
                    camps[r] = work[models + r] - bits[t]
