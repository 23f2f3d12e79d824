# cython: language_level=3, boundscheck=False, wraparound=False, cdivision=True, initializedcheck=False
"""Laws of numbers on a grid, and the row loops of the models of numbers.

A row is a cell of its grid, given by its middle and width, on the plain or the log scale. Where a cell is narrow beside
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
    from cython.cimports.libc.math import atan2, erfc, exp, fabs, log, log1p, sqrt
else:
    from math import atan2, erfc, exp, fabs, log, log1p, sqrt

PI = cython.declare(cython.double, 3.141592653589793)
LN2 = cython.declare(cython.double, 0.6931471805599453)
SQRT_HALF = cython.declare(cython.double, 0.7071067811865476)
EVEN = cython.declare(cython.double, 0.2)  # widths, in scales, up to which density times width will do: even grid
UNEVEN = cython.declare(cython.double, 0.01)  # and with its second-order term on an uneven one
UNIFORM = cython.declare(cython.double, -2.0)  # the shape of a law even on [-1, 1]
FADES = cython.declare(cython.double, 0.98)  # of what is known of a date, each time it comes
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
    for m in range(1, 4000):  # about the root of the larger parameter
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
    if df == 1.0:
        return atan2(1.0, z) / PI
    if df == 2.0:
        front = sqrt(2.0 + z * z)
        return 1.0 / (front * (front + z))
    if df == 4.0:
        front = sqrt(4.0 + z * z)
        front = 4.0 / (front * (front + z))
        return 0.25 * front * front * (3.0 - front)
    # x^(df/2) (1-x)^(1/2) / B(df/2, 1/2), from the density at 0, which is 1 / (sqrt(df) B)
    front = exp(norm + 0.5 * log(df) - 0.5 * df * log1p(square)) * sqrt(square / (1.0 + square))
    if x < (0.5 * df + 1.0) / (0.5 * df + 2.5):
        return 0.5 * front * _fraction(0.5 * df, 0.5, x) / (0.5 * df)
    return 0.5 - 0.5 * front * _fraction(0.5, 0.5 * df, square * x) / 0.5


@cython.cfunc
@cython.nogil
@cython.exceptval(check=False)
def _normal_tail(z: cython.double) -> cython.double:
    """P(Z > z)."""
    return 0.5 * erfc(z * SQRT_HALF)


@cython.cfunc
@cython.nogil
@cython.exceptval(check=False)
def _tail(shape: cython.double, z: cython.double, norm: cython.double) -> cython.double:
    """P(X > z) of a standard law, z >= 0. shape: 0 normal, -1 Laplace, -2 uniform, else df of Student's t."""
    if z > 1e150:
        return 0.0
    if shape == 0.0:
        return _normal_tail(z)
    if shape == UNIFORM:
        return max(0.5 - 0.5 * z, 0.0)
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
    if shape == UNIFORM:
        return norm if fabs(z) <= 1.0 else -1e300
    if shape < 0.0:
        return norm - fabs(z)
    if z > 1e140:  # its square is no float
        return norm - 0.5 * (shape + 1.0) * (2.0 * log(z) - log(shape))
    return norm - 0.5 * (shape + 1.0) * log1p(z * z / shape)


@cython.cfunc
@cython.nogil
@cython.exceptval(check=False)
def _bits(
    shape: cython.double,
    norm: cython.double,
    middle: cython.double,
    width: cython.double,
    centre: cython.double,
    scale: cython.double,
    even: cython.bint,
) -> cython.double:
    """Minus log2 of the mass of a cell of `width` around `middle`; infinitely wide: all up to `middle`.

    even: the grid is, on this scale.
    """
    z: cython.double = fabs(middle - centre) / scale
    more: cython.double
    mass: cython.double
    low: cython.double
    high: cython.double
    width = width / scale
    if shape >= 0.0 and width < (EVEN if even else UNEVEN):
        more = 0.0
        if not even and z < 1e100:  # f'' / f
            if shape == 0.0:
                more = z * z - 1.0
            else:
                more = 1.0 + z * z / shape
                more = (shape + 1.0) / shape * ((shape + 2.0) * z * z / shape - 1.0) / (more * more)
            more = log1p(more * width * width / 24.0)
        return -(_log_density(shape, z, norm) + log(width) + more) / LN2
    high = (middle - centre) / scale
    if width < 1e300:
        low = high - 0.5 * width
        high = high + 0.5 * width
    else:
        low = -1e300
    if shape == UNIFORM:
        mass = 0.5 * width if z + 0.5 * width <= 1.0 else 0.5 * (min(high, 1.0) - max(low, -1.0))
        return -log(mass) / LN2 if mass > 0.0 else 1e300
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
    middles: cython.double[::1],
    widths: cython.double[::1],
    centres: cython.double[::1],
    scales: cython.double[::1],
    bits: cython.double[::1],
) -> None:
    """bits[i] = minus log2 of the mass that law i, on the plain scale, gives to cell i."""
    i: cython.Py_ssize_t
    with cython.nogil:
        for i in range(bits.shape[0]):
            bits[i] = _bits(shapes[i], norms[i], middles[i], widths[i], centres[i], scales[i], True)


# ---- mixtures of laws --------------------------------------------------------------------------------------
#
# A mixture is six arrays, an entry a part: weights, centres, scales (0: an atom), shapes, norms, and logs (1: the
# law is that of the logarithm).


@cython.cfunc
@cython.nogil
@cython.exceptval(check=False)
def _below(
    x: cython.double,
    weights: cython.double[::1],
    centres: cython.double[::1],
    scales: cython.double[::1],
    shapes: cython.double[::1],
    norms: cython.double[::1],
    logs: cython.uchar[::1],
) -> cython.double:
    """P(X <= x)."""
    total: cython.double = 0.0
    z: cython.double
    log_x: cython.double = log(x) if x > 0.0 else 0.0
    i: cython.Py_ssize_t
    for i in range(weights.shape[0]):
        if logs[i] and x <= 0.0:
            continue
        z = (log_x if logs[i] else x) - centres[i]
        if scales[i] == 0.0:
            total += weights[i] if z >= 0.0 else 0.0
        elif z < 0.0:
            total += weights[i] * _tail(shapes[i], -z / scales[i], norms[i])
        else:
            total += weights[i] * (1.0 - _tail(shapes[i], z / scales[i], norms[i]))
    return total


def below(
    xs: cython.double[::1],
    weights: cython.double[::1],
    centres: cython.double[::1],
    scales: cython.double[::1],
    shapes: cython.double[::1],
    norms: cython.double[::1],
    logs: cython.uchar[::1],
    out: cython.double[::1],
) -> None:
    """out[i] = P(X <= xs[i])."""
    i: cython.Py_ssize_t
    with cython.nogil:
        for i in range(xs.shape[0]):
            out[i] = _below(xs[i], weights, centres, scales, shapes, norms, logs)


@cython.cfunc
@cython.nogil
@cython.exceptval(check=False)
def _density(
    x: cython.double,
    weights: cython.double[::1],
    centres: cython.double[::1],
    scales: cython.double[::1],
    shapes: cython.double[::1],
    norms: cython.double[::1],
    logs: cython.uchar[::1],
) -> cython.double:
    """Density at x; atoms have none."""
    total: cython.double = 0.0
    z: cython.double
    log_x: cython.double = log(x) if x > 0.0 else 0.0
    i: cython.Py_ssize_t
    for i in range(weights.shape[0]):
        if scales[i] == 0.0 or (logs[i] and x <= 0.0):
            continue
        z = ((log_x if logs[i] else x) - centres[i]) / scales[i]
        z = weights[i] * exp(_log_density(shapes[i], z, norms[i])) / scales[i]
        total += z / x if logs[i] else z
    return total


@cython.cfunc
@cython.nogil
@cython.inline
@cython.exceptval(check=False)
def _between(a: cython.double, b: cython.double) -> cython.double:
    """A number between two others that halves either their distance or the ratio of their sizes."""
    if a < 0.0 < b:
        return 0.0
    if b <= 0.0:
        return -_between(-b, -a)
    if b > 4.0 * a:
        return sqrt(max(a, 5e-324)) * sqrt(b)
    return a + 0.5 * (b - a)


def quantiles(
    levels: cython.double[::1],
    atoms: cython.double[::1],
    some: cython.Py_ssize_t,
    low: cython.double,
    high: cython.double,
    plain: cython.double,
    log_scale: cython.double,
    weights: cython.double[::1],
    centres: cython.double[::1],
    scales: cython.double[::1],
    shapes: cython.double[::1],
    norms: cython.double[::1],
    logs: cython.uchar[::1],
    out: cython.double[::1],
) -> None:
    """out[i] = the least x between low and high with P(X <= x) >= levels[i]; out comes in as first guesses.

    The first `some` of `atoms`, ascending, are those of the plain scale: one of them is x, or two of them enclose it.
    Between these, Newton's method, kept between two ends that close in, by halving where it would leave them or its
    steps do not halve; until a step is under 1e-12 of `plain`, the least scale, and of x times `log_scale`, the least
    on the log scale.
    """
    i: cython.Py_ssize_t
    k: cython.Py_ssize_t
    first: cython.Py_ssize_t
    last: cython.Py_ssize_t
    turn: cython.int
    a: cython.double
    b: cython.double
    x: cython.double
    p: cython.double
    step: cython.double
    stride: cython.double
    near: cython.double
    with cython.nogil:
        for i in range(levels.shape[0]):
            a = low
            b = high
            x = out[i]
            first = 0
            last = some
            while first < last:
                k = (first + last) // 2
                if _below(atoms[k], weights, centres, scales, shapes, norms, logs) >= levels[i]:
                    last = k
                else:
                    first = k + 1
            if last < some:
                b = min(b, atoms[last])
                p = _below(b, weights, centres, scales, shapes, norms, logs)
                for k in range(weights.shape[0]):
                    if scales[k] == 0.0 and centres[k] == b and not logs[k]:
                        p -= weights[k]
                if p < levels[i]:
                    out[i] = b
                    continue
            if last > 0:
                a = max(a, atoms[last - 1])
            stride = b - a
            for turn in range(400):
                if not a < x < b:
                    x = _between(a, b)
                    if not a < x < b:
                        break
                p = _below(x, weights, centres, scales, shapes, norms, logs)
                if p >= levels[i]:
                    b = x
                else:
                    a = x
                step = _density(x, weights, centres, scales, shapes, norms, logs)
                step = (levels[i] - p) / step if step > 0.0 else 1e300
                near = max(1e-12 * min(plain, fabs(x) * log_scale), 1e-15 * fabs(x))
                if fabs(step) <= near:
                    if p >= levels[i] or x + near >= b:
                        break
                    x = x + near
                elif not a < x + step < b or fabs(step) > 0.5 * stride:
                    x = _between(a, b)
                    stride = b - a
                else:
                    x = x + step
                    stride = fabs(step)
            out[i] = b


def mixed_bits(
    middle: cython.double,
    width: cython.double,
    log_middle: cython.double,
    log_width: cython.double,
    weights: cython.double[::1],
    centres: cython.double[::1],
    scales: cython.double[::1],
    shapes: cython.double[::1],
    norms: cython.double[::1],
    logs: cython.uchar[::1],
    work: cython.double[::1],
) -> cython.double:
    """Minus log2 of the mass of a cell, also given on the log scale (log_middle NaN: none of it above zero)."""
    i: cython.Py_ssize_t
    least: cython.double = 1e300
    total: cython.double = 0.0
    m: cython.double
    w: cython.double
    with cython.nogil:
        for i in range(weights.shape[0]):
            work[i] = 1e300
            if weights[i] <= 0.0 or (logs[i] and log_middle != log_middle):
                continue
            m = log_middle if logs[i] else middle
            w = log_width if logs[i] else width
            if scales[i] == 0.0:
                if centres[i] <= m if w > 1e300 else -0.5 * w <= centres[i] - m < 0.5 * w:
                    work[i] = 0.0
            else:
                work[i] = _bits(shapes[i], norms[i], m, w, centres[i], scales[i], not logs[i])
            if work[i] < 1e300:
                work[i] -= log(weights[i]) / LN2
            least = min(least, work[i])
        if least < 1e300:
            for i in range(weights.shape[0]):
                if work[i] - least < 64.0:
                    total += exp(-(work[i] - least) * LN2)
            least -= log(total) / LN2
    return least


# ---- row loops of the banks --------------------------------------------------------------------------------


def track(
    seen: cython.double[:, ::1],
    spans: cython.double[:, :, ::1],
    usable: cython.uchar[:, ::1],
    phase: cython.int[::1],
    df: cython.double[::1],
    shapes: cython.double[:, ::1],
    norms: cython.double[:, ::1],
    damping: cython.double[::1],
    seasonal: cython.bint,
    noise: cython.double[:, ::1],
    mean: cython.double[:, :, ::1],
    cov: cython.double[:, :, ::1],
    squares: cython.double[:, ::1],
    gain: cython.double[::1],
    centres: cython.double[:, ::1],
    scales: cython.double[:, ::1],
    bits: cython.double[:, ::1],
) -> None:
    """A bank of dynamic linear models: level, damped trend, seasonal effects (West & Harrison 1997, ch. 4 and 7).

    seen (2, n): the rows on the plain and the log scale; spans (2, n, 2): middle and
    width of their cells; usable (2, n): 0 no value,
    1 learn it, 2 only charge it, 3 impossible; phase (n,): place in the period; df (n,): how many errors squares
    holds; shapes, norms (2, n): of the laws, and their log peaks; damping (settings,); seasonal: whether there are
    effects; noise (settings, 3): variances of the steps of level, trend and effects, in units of the observation's;
    mean (2, settings, dim) and squares (2, settings): both scales share cov (settings, dim, dim). The observation's
    variance is integrated out: its law is Student's t. Writes centres, scales and bits (n, 2 x settings).
    """
    n: cython.Py_ssize_t = phase.shape[0]
    settings: cython.Py_ssize_t = cov.shape[0]
    dim: cython.Py_ssize_t = cov.shape[1]
    t: cython.Py_ssize_t
    i: cython.Py_ssize_t
    j: cython.Py_ssize_t
    k: cython.Py_ssize_t
    side: cython.int
    here: cython.Py_ssize_t
    f: cython.double
    c00: cython.double
    c01: cython.double
    spread: cython.double
    error: cython.double
    even: cython.double
    with cython.nogil:
        for t in range(n):
            here = 2 + phase[t]
            for i in range(settings):
                # a step of time: level += damped trend, and everything becomes less certain
                f = damping[i]
                for side in range(2):
                    mean[side, i, 0] += f * mean[side, i, 1]
                    mean[side, i, 1] *= f
                c00 = cov[i, 0, 0] + 2.0 * f * cov[i, 0, 1] + f * f * cov[i, 1, 1]
                c01 = f * (cov[i, 0, 1] + f * cov[i, 1, 1])
                cov[i, 0, 0] = c00 + noise[i, 0]
                cov[i, 0, 1] = c01
                cov[i, 1, 0] = c01
                cov[i, 1, 1] = f * f * cov[i, 1, 1] + noise[i, 1]
                if seasonal:
                    for j in range(2, dim):
                        cov[i, 0, j] += f * cov[i, 1, j]
                        cov[i, 1, j] *= f
                        cov[i, j, 0] = cov[i, 0, j]
                        cov[i, j, 1] = cov[i, 1, j]
                    if noise[i, 2] > 0.0:  # effects drift, their sum does not
                        even = noise[i, 2] / (dim - 2)
                        for j in range(2, dim):
                            for k in range(2, dim):
                                cov[i, j, k] -= even
                            cov[i, j, j] += noise[i, 2]
                # the law of the row
                spread = cov[i, 0, 0] + 1.0
                if seasonal:
                    spread += 2.0 * cov[i, 0, here] + cov[i, here, here]
                for side in range(2):
                    f = mean[side, i, 0]
                    if seasonal:
                        f += mean[side, i, here]
                    j = side * settings + i
                    centres[t, j] = f
                    scales[t, j] = sqrt(spread * squares[side, i] / df[t])
                    bits[t, j] = 0.0
                    if usable[side, t] == 0:
                        continue
                    if usable[side, t] == 3:
                        bits[t, j] = 1e4
                        continue
                    bits[t, j] = _bits(
                        shapes[side, t],
                        norms[side, t],
                        spans[side, t, 0],
                        spans[side, t, 1],
                        f,
                        scales[t, j],
                        side == 0,
                    )
                if not usable[0, t]:
                    continue
                # learn it
                for j in range(dim if seasonal else 2):
                    gain[j] = cov[i, j, 0]
                    if seasonal:
                        gain[j] += cov[i, j, here]
                for side in range(2):
                    if usable[side, t] == 1:
                        f = mean[side, i, 0]
                        if seasonal:
                            f += mean[side, i, here]
                        error = seen[side, t] - f
                        for j in range(dim if seasonal else 2):
                            mean[side, i, j] += gain[j] * error / spread
                        squares[side, i] += error * error / spread
                for j in range(dim if seasonal else 2):
                    c00 = gain[j] / spread
                    for k in range(dim if seasonal else 2):
                        cov[i, j, k] -= c00 * gain[k]


def regress(
    rows: cython.double[:, ::1],
    seen: cython.double[::1],
    spans: cython.double[:, ::1],
    usable: cython.uchar[::1],
    even: cython.bint,
    dates: cython.int[:, ::1],
    df: cython.double[:, ::1],
    shapes: cython.double[:, ::1],
    norms: cython.double[:, ::1],
    rate: cython.int[::1],
    fading: cython.double[::1],
    loosest: cython.double,
    starts: cython.int[::1],
    columns: cython.int[::1],
    dated: cython.int[::1],
    means: cython.double[:, ::1],
    covs: cython.double[:, :, ::1],
    squares: cython.double[::1],
    effects: cython.double[:, :, :, ::1],
    x: cython.double[::1],
    gain: cython.double[::1],
    forecasts: cython.double[:, ::1],
    scales: cython.double[:, ::1],
    bits: cython.double[:, ::1],
) -> None:
    """A bank of Bayesian regressions by recursive least squares with exponential forgetting.

    rows (n, features): regressors of each row; setting i takes columns[starts[i]:starts[i+1]], and for each bit k
    of dated[i] one more: its own mean residual on the same date, dates[k, t] (effects[i, k, date] = sum, count).
    seen, spans, usable: as in `track`, for one scale. rate[i]: which of the `fading` factors, held while a variance
    in covs is over `loosest`; df, shapes, norms (fadings, n). means (settings, most), covs
    (settings, most, most), squares (settings,). Writes forecasts, scales and bits (n, settings).
    """
    n: cython.Py_ssize_t = seen.shape[0]
    settings: cython.Py_ssize_t = means.shape[0]
    t: cython.Py_ssize_t
    i: cython.Py_ssize_t
    j: cython.Py_ssize_t
    k: cython.Py_ssize_t
    size: cython.Py_ssize_t
    lam: cython.double
    f: cython.double
    v: cython.double
    error: cython.double
    c: cython.double
    with cython.nogil:
        for t in range(n):
            for i in range(settings):
                size = starts[i + 1] - starts[i]
                for j in range(size):
                    x[j] = rows[t, columns[starts[i] + j]]
                for k in range(dates.shape[0]):
                    if dated[i] >> k & 1:
                        x[size] = effects[i, k, dates[k, t], 0] / (effects[i, k, dates[k, t], 1] + 1.0)
                        size += 1
                lam = fading[rate[i]]
                f = 0.0
                v = 1.0
                for j in range(size):
                    f += x[j] * means[i, j]
                    c = 0.0
                    for k in range(size):
                        c += covs[i, j, k] * x[k]
                    gain[j] = c
                    v += c * x[j]
                if not 1.0 - 1e-6 < v < 1e300:  # rounding got the better of the covariance: its diagonal is kept
                    v = 1.0
                    for j in range(size):
                        c = covs[i, j, j]
                        for k in range(size):
                            covs[i, j, k] = 0.0
                            covs[i, k, j] = 0.0
                        covs[i, j, j] = (c if c < 1.0 else 1.0) if c > 1e-12 else 1e-12
                        gain[j] = covs[i, j, j] * x[j]
                        v += gain[j] * x[j]
                v = max(v, 1.0)
                forecasts[t, i] = f
                scales[t, i] = sqrt(v * squares[i] / df[rate[i], t])
                bits[t, i] = 0.0
                if usable[t] == 0:
                    continue
                if usable[t] == 3:
                    bits[t, i] = 1e4
                    continue
                bits[t, i] = _bits(
                    shapes[rate[i], t], norms[rate[i], t], spans[t, 0], spans[t, 1], f, scales[t, i], even
                )
                if usable[t] == 2:
                    continue
                error = seen[t] - f
                squares[i] = lam * squares[i] + error * error / v
                for j in range(size):
                    means[i, j] += gain[j] * error / v
                c = 0.0
                for j in range(size):
                    f = gain[j] / v
                    for k in range(j + 1):
                        covs[i, j, k] -= f * gain[k]
                        covs[i, k, j] = covs[i, j, k]
                    c = max(c, covs[i, j, j])
                if lam < 1.0 and c < loosest:  # forget, unless a regressor that stands still would blow up
                    for j in range(size):
                        for k in range(size):
                            covs[i, j, k] = covs[i, j, k] / lam
                for k in range(dates.shape[0] - 1, -1, -1):  # residuals but for what this date explained of them
                    if dated[i] >> k & 1:
                        size -= 1
                        f = error + x[size] * means[i, size]
                        effects[i, k, dates[k, t], 0] = FADES * effects[i, k, dates[k, t], 0] + f
                        effects[i, k, dates[k, t], 1] = FADES * effects[i, k, dates[k, t], 1] + 1.0


def spread_of_errors(
    centres: cython.double[::1],
    spans: cython.double[:, ::1],
    usable: cython.uchar[::1],
    even: cython.bint,
    phase: cython.int[::1],
    sizes: cython.double[::1],
    shapes: cython.double[::1],
    norms: cython.double[::1],
    rate: cython.double,
    weights: cython.double[:, ::1],
    masses: cython.double[::1],
    told: cython.bint,
    before: cython.double[:, ::1],
    bits: cython.double[::1],
) -> None:
    """A learned law of the errors of any forecast: scales times shapes, weighed apart in each phase of the clock.

    centres (n,): the forecasts; sizes (m,): scales; shapes, norms (shapes,). weights (phases, m x shapes):
    fixed share at `rate` within a phase. Writes bits (n,) and, if `told`, the weights before each row (n, m x shapes).
    """
    n: cython.Py_ssize_t = centres.shape[0]
    m: cython.Py_ssize_t = sizes.shape[0]
    kinds: cython.Py_ssize_t = shapes.shape[0]
    t: cython.Py_ssize_t
    i: cython.Py_ssize_t
    s: cython.Py_ssize_t
    at: cython.Py_ssize_t
    least: cython.double
    total: cython.double
    with cython.nogil:
        for t in range(n):
            bits[t] = 0.0
            if told:
                for at in range(m * kinds):
                    before[t, at] = weights[phase[t], at]
            if not usable[t]:
                continue
            least = 1e300
            for s in range(kinds):
                for i in range(m):
                    at = s * m + i
                    masses[at] = _bits(shapes[s], norms[s], spans[t, 0], spans[t, 1], centres[t], sizes[i], even)
                    least = min(least, masses[at])
            total = 0.0
            for at in range(m * kinds):
                masses[at] = exp(-(masses[at] - least) * LN2) if masses[at] - least < 60.0 else 0.0
                total += weights[phase[t], at] * masses[at]
            bits[t] = least - log(total) / LN2
            for at in range(m * kinds):
                weights[phase[t], at] = (1.0 - rate) * weights[phase[t], at] * masses[at] / total + rate / (m * kinds)
