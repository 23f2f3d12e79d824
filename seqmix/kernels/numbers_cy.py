# cython: language_level=3, boundscheck=False, wraparound=False, cdivision=True, initializedcheck=False
"""Laws of numbers on a grid, and the row loops of the models of numbers.

A row is a cell of its grid, given by its two edges, on the plain or the log scale. Where a cell is narrow beside
the law, its mass is the density times the width: on an even grid such masses add to 1 to some thirteen digits
(Poisson's summation formula, scale > 5 widths); on a log scale a second-order term is added. Elsewhere it is
the difference of the tails, from whichever side is smaller. All of it stays in the log domain.
"""

from __future__ import annotations

try:  # the compiler wants the plain import; without Cython the shim stands in
    import cython
except ModuleNotFoundError:
    from seqmix.kernels import shim as cython

if cython.compiled:
    from cython.cimports.libc.math import exp, fabs, log, log1p, sqrt
else:
    from math import exp, fabs, log, log1p, sqrt

LN2 = cython.declare(cython.double, 0.6931471805599453)
LOG_SQRT_2PI = cython.declare(cython.double, 0.9189385332046727)
EVEN = cython.declare(cython.double, 0.2)  # widths, in scales, up to which density times width will do: even grid
UNEVEN = cython.declare(cython.double, 0.02)  # and with its second-order term on an uneven one
NEVER = cython.declare(cython.double, 1e-290)  # least tail difference told apart from none


def is_compiled() -> bool:
    """True in the compiled module, False where Python runs this file."""
    return cython.compiled


# ---- tails -------------------------------------------------------------------------------------------------


@cython.cfunc
@cython.nogil
@cython.exceptval(check=False)
def _fraction(a: cython.double, b: cython.double, x: cython.double) -> cython.double:
    """Continued fraction of the incomplete beta function, by the modified Lentz method (DLMF 8.17.22)."""
    tiny: cython.double = 1e-300
    c: cython.double = 1.0
    d: cython.double = 1.0 - (a + b) * x / (a + 1.0)
    h: cython.double
    m: cython.int
    step: cython.double
    if fabs(d) < tiny:
        d = tiny
    d = 1.0 / d
    h = d
    for m in range(1, 300):
        step = m * (b - m) * x / ((a + 2.0 * m - 1.0) * (a + 2.0 * m))
        d = 1.0 + step * d
        if fabs(d) < tiny:
            d = tiny
        c = 1.0 + step / c
        if fabs(c) < tiny:
            c = tiny
        d = 1.0 / d
        h = h * d * c
        step = -(a + m) * (a + b + m) * x / ((a + 2.0 * m) * (a + 2.0 * m + 1.0))
        d = 1.0 + step * d
        if fabs(d) < tiny:
            d = tiny
        c = 1.0 + step / c
        if fabs(c) < tiny:
            c = tiny
        d = 1.0 / d
        h = h * d * c
        if fabs(d * c - 1.0) < 1e-15:
            break
    return h


@cython.cfunc
@cython.nogil
@cython.exceptval(check=False)
def _student_tail(z: cython.double, df: cython.double, norm: cython.double) -> cython.double:
    """P(T > z) for z >= 0; norm = log of the density at 0."""
    # with x = df / (df + z^2): half the incomplete beta function I_x(df/2, 1/2)
    square: cython.double = z * z / df
    x: cython.double = 1.0 / (1.0 + square)
    front: cython.double
    if z == 0.0:
        return 0.5
    # x^(df/2) (1-x)^(1/2) / B(df/2, 1/2), from the density at 0, which is 1 / (sqrt(df) B)
    front = exp(norm + 0.5 * log(df) - 0.5 * df * log1p(square)) * sqrt(square / (1.0 + square))
    if x < (0.5 * df + 1.0) / (0.5 * df + 2.5):
        return 0.5 * front * _fraction(0.5 * df, 0.5, x) / (0.5 * df)
    return 0.5 - 0.5 * front * _fraction(0.5, 0.5 * df, 1.0 - x) / 0.5


@cython.cfunc
@cython.nogil
@cython.exceptval(check=False)
def _normal_tail(z: cython.double) -> cython.double:
    """P(Z > z) for z >= 0: Taylor series below 2.5, continued fraction above (Abramowitz & Stegun 26.2.11, 14)."""
    density: cython.double = exp(-0.5 * z * z - LOG_SQRT_2PI)
    total: cython.double
    term: cython.double
    k: cython.int
    if z < 2.5:
        total = z
        term = z
        for k in range(1, 60):
            term = term * z * z / (2.0 * k + 1.0)
            total += term
            if term < 1e-17 * total:
                break
        return 0.5 - density * total
    total = z
    for k in range(60, 0, -1):
        total = z + k / total
    return density / total


@cython.cfunc
@cython.nogil
@cython.exceptval(check=False)
def _tail(shape: cython.double, z: cython.double, norm: cython.double) -> cython.double:
    """P(X > z) of a standard law, z >= 0. shape: 0 normal, -1 Laplace, else degrees of freedom of Student's t."""
    if shape == 0.0:
        return _normal_tail(z)
    if shape < 0.0:
        return 0.5 * exp(-z)
    return _student_tail(z, shape, norm)


@cython.cfunc
@cython.nogil
@cython.exceptval(check=False)
def _log_density(shape: cython.double, z: cython.double, norm: cython.double) -> cython.double:
    """Log density of a standard law at z; norm: its log density at 0."""
    if shape == 0.0:
        return norm - 0.5 * z * z
    if shape < 0.0:
        return norm - fabs(z)
    return norm - 0.5 * (shape + 1.0) * log1p(z * z / shape)


@cython.cfunc
@cython.nogil
@cython.exceptval(check=False)
def _bits(
    shape: cython.double,
    norm: cython.double,
    low: cython.double,
    high: cython.double,
    centre: cython.double,
    scale: cython.double,
    even: cython.bint,
) -> cython.double:
    """Minus log2 of the mass between two edges; `low` may be -inf. even: the grid is, on this scale."""
    width: cython.double = (high - low) / scale
    z: cython.double = fabs(0.5 * (low + high) - centre) / scale
    more: cython.double
    mass: cython.double
    if shape >= 0.0 and width < (EVEN if even else UNEVEN):
        more = 0.0
        if not even:  # f'' / f
            if shape == 0.0:
                more = z * z - 1.0
            else:
                more = 1.0 + z * z / shape
                more = (shape + 1.0) / shape * ((shape + 2.0) * z * z / shape - 1.0) / (more * more)
            more = log1p(more * width * width / 24.0)
        return -(_log_density(shape, z, norm) + log(width) + more) / LN2
    low = (low - centre) / scale
    high = (high - centre) / scale
    if low + high < 0.0:  # mirror: both tails then lie to the right
        mass = low
        low = -high
        high = -mass
    if shape < 0.0 and low >= 0.0:  # exact at any distance
        return -(log(0.5) - low + log(-_expm1(low - high))) / LN2
    if low < 0.0:
        mass = 1.0 - _tail(shape, -low, norm) - _tail(shape, high, norm)
    else:
        mass = _tail(shape, low, norm) - _tail(shape, high, norm)
    if mass < NEVER:  # out of reach of doubles: the density at the near edge times the width
        return -(_log_density(shape, max(low, 0.0), norm) + log(min(width, 1.0))) / LN2
    return -log(mass) / LN2


@cython.cfunc
@cython.nogil
@cython.inline
@cython.exceptval(check=False)
def _expm1(x: cython.double) -> cython.double:
    """exp(x) - 1 for x <= 0, without losing small x."""
    if x > -1e-5:
        return x * (1.0 + 0.5 * x)
    return exp(x) - 1.0


def tails(
    shapes: cython.double[::1], norms: cython.double[::1], z: cython.double[::1], out: cython.double[::1]
) -> None:
    """out[i] = P(X <= z[i]) of standard laws (see `_tail` for shapes), accurate in both tails."""
    i: cython.Py_ssize_t
    with cython.nogil:
        for i in range(z.shape[0]):
            if z[i] < 0.0:
                out[i] = _tail(shapes[i], -z[i], norms[i])
            else:
                out[i] = 1.0 - _tail(shapes[i], z[i], norms[i])


def masses(
    shapes: cython.double[::1],
    norms: cython.double[::1],
    lows: cython.double[::1],
    highs: cython.double[::1],
    centres: cython.double[::1],
    scales: cython.double[::1],
    even: cython.uchar[::1],
    bits: cython.double[::1],
) -> None:
    """bits[i] = minus log2 of the mass that law i puts between lows[i] and highs[i]."""
    i: cython.Py_ssize_t
    with cython.nogil:
        for i in range(bits.shape[0]):
            bits[i] = _bits(shapes[i], norms[i], lows[i], highs[i], centres[i], scales[i], even[i])
