# cython: language_level=3, boundscheck=False, wraparound=False, cdivision=True, initializedcheck=False
"""What rows teach about contexts: hashed lines of seven decisions, and two ways to predict from them.

A state is a short string of base-8 digits; a digit is three binary decisions, so one *line* (64 bytes, one
cache line) holds all that one context knows about one digit:

    word 0          key: the hash of (context, place in the digit string); 0 = free
    word j, 1..7    decision j, as a heap (its children are 2j and 2j + 1):
                    uint16 zeros, uint16 ones, float32 `number`

`tree` weighs nested contexts against each other, `pool` adds up the log-odds of any contexts.
A chunk of rows goes through in one call. Invariant of both row loops: everything that predicts row t was
written by rows before t; lines are claimed (and old ones lost) only after the whole row was predicted.
"""

from __future__ import annotations

try:  # the compiler wants the plain import; without Cython the shim stands in
    import cython
except ModuleNotFoundError:
    from seqmix.kernels import shim as cython

if cython.compiled:
    from cython.cimports.libc.math import exp, log, log2
else:
    from math import exp, log, log2

ALL = cython.declare(cython.ulonglong, 0xFFFFFFFFFFFFFFFF)
PLACE = cython.declare(cython.ulonglong, 0x9E3779B97F4A7C15)
STIR = cython.declare(cython.ulonglong, 0xD6E8FEB86659FD93)
DEEPEST = cython.declare(cython.longlong, 32)  # most decisions of a state
PROBES = cython.declare(cython.longlong, 8)
RATIO_MOST = cython.declare(cython.double, 1e30)
RATIO_LEAST = cython.declare(cython.double, 1e-30)
FEWEST = cython.declare(cython.double, 1e-4)  # the pool leaves at least this much to either side of a decision
LAST_CELL = cython.declare(cython.int, 23)  # a calibration curve has cells 0..23, one for each nat of log-odds


def is_compiled() -> bool:
    """True in the compiled module, False where Python runs this file."""
    return cython.compiled


# ---- lines -------------------------------------------------------------------------------------------------


@cython.cfunc
@cython.nogil
@cython.inline
@cython.exceptval(check=False)
def _hash(key: cython.ulonglong, line: cython.ulonglong) -> cython.ulonglong:
    """The key of one line: never 0."""
    h: cython.ulonglong = (key + line * PLACE) & ALL
    h = ((h ^ (h >> 32)) * STIR) & ALL
    return (h ^ (h >> 29)) | 1


@cython.cfunc
@cython.nogil
@cython.inline
@cython.exceptval(check=False)
def _find(
    table: cython.ulonglong[:, ::1], h: cython.ulonglong, shift: cython.int, wrap: cython.longlong
) -> cython.longlong:
    """Slot of the line with key `h`, or -1."""
    slot: cython.longlong = cython.cast(cython.longlong, h >> shift)
    probe: cython.longlong
    for probe in range(PROBES):
        if table[slot, 0] == h:
            return slot
        if table[slot, 0] == 0:
            return -1
        slot = (slot + 1) & wrap
    return -1


@cython.cfunc
@cython.nogil
@cython.exceptval(check=False)
def _claim(
    table: cython.ulonglong[:, ::1],
    counts: cython.ushort[:, ::1],
    numbers: cython.float[:, ::1],
    number: cython.float,
    state: cython.longlong[::1],
    h: cython.ulonglong,
    shift: cython.int,
    wrap: cython.longlong,
) -> cython.longlong:
    """Slot of a fresh line for key `h`: a free one, or the least visited of the ones it may stand in."""
    slot: cython.longlong = cython.cast(cython.longlong, h >> shift)
    best: cython.longlong = slot
    least: cython.longlong = 1 << 40
    visits: cython.longlong
    probe: cython.longlong
    j: cython.int
    for probe in range(PROBES):
        if table[slot, 0] == 0:
            best = slot
            state[1] += 1
            break
        visits = cython.cast(cython.longlong, counts[slot, 4]) + cython.cast(cython.longlong, counts[slot, 5])
        if visits < least:
            least = visits
            best = slot
        slot = (slot + 1) & wrap
    table[best, 0] = h
    for j in range(1, 8):
        table[best, j] = 0
        numbers[best, 2 * j + 1] = number
    return best


@cython.cfunc
@cython.nogil
@cython.inline
@cython.exceptval(check=False)
def _settle(
    table: cython.ulonglong[:, ::1], held: cython.ulonglong[:, ::1], i: cython.longlong, shift: cython.int
) -> cython.longlong:
    """Put line i of `held` into the first free of its places; 1, or 0 where none is free and it is dropped."""
    wrap: cython.longlong = table.shape[0] - 1
    slot: cython.longlong = cython.cast(cython.longlong, held[i, 0] >> shift)
    probe: cython.longlong
    j: cython.int
    for probe in range(PROBES):
        if table[slot, 0] == 0:
            for j in range(8):
                table[slot, j] = held[i, j]
            return 1
        slot = (slot + 1) & wrap
    return 0


def spread(
    table: cython.ulonglong[:, ::1], size: cython.longlong, held: cython.ulonglong[:, ::1], shift: cython.int
) -> cython.longlong:
    """Move the lines of a table that was just doubled, its upper half blank; returns how many there are.

    size: rows before; shift: of the doubled table; held (17, 8): workspace. From the top down, a line goes to
    about twice its slot, above all that has not moved; only the lowest sixteen must be held back till last.
    """
    i: cython.longlong
    j: cython.int
    moved: cython.longlong = 0
    with cython.nogil:
        for i in range(16):
            for j in range(8):
                held[i, j] = table[i, j]
                table[i, j] = 0
        for i in range(size - 1, 15, -1):
            if table[i, 0] != 0:
                for j in range(8):
                    held[16, j] = table[i, j]
                table[i, 0] = 0
                moved += _settle(table, held, 16, shift)
        for i in range(16):
            if held[i, 0] != 0:
                moved += _settle(table, held, i, shift)
    return moved


@cython.cfunc
@cython.nogil
@cython.inline
@cython.exceptval(check=False)
def _count(
    counts: cython.ushort[:, ::1], slot: cython.longlong, j: cython.int, bit: cython.int, limit: cython.int
) -> cython.void:
    """Learn one bit; at `limit` both counts are halved, so that old rows fade."""
    if counts[slot, 4 * j + bit] >= limit:
        counts[slot, 4 * j] = counts[slot, 4 * j] >> 1
        counts[slot, 4 * j + 1] = counts[slot, 4 * j + 1] >> 1
    counts[slot, 4 * j + bit] += 1


@cython.cfunc
@cython.nogil
@cython.inline
@cython.exceptval(check=False)
def _mark(
    code: cython.int, path_start: cython.int[::1], path: cython.int[:, ::1], mask: cython.uchar[::1]
) -> cython.void:
    """A state was seen for the first time: its digits are in use from now on."""
    step: cython.int
    for step in range(path_start[code], path_start[code + 1]):
        mask[path[step, 0]] |= cython.cast(cython.uchar, 1 << path[step, 1])


@cython.cfunc
@cython.nogil
@cython.inline
@cython.exceptval(check=False)
def _spread(
    line: cython.Py_ssize_t,
    child: cython.int[:, ::1],
    mask: cython.uchar[::1],
    heap: cython.double[::1],
    mass: cython.double[::1],
    laws: cython.double[:, ::1],
    at: cython.Py_ssize_t,
) -> cython.void:
    """Hand the masses of a line's eight digits, heap[8..15], to the states or the lines under it."""
    digit: cython.int
    to: cython.int
    for digit in range(8):
        if mask[line] >> digit & 1:
            to = child[line, digit]
            if to >= 0:
                laws[at, to] = heap[8 + digit]
            else:
                mass[-2 - to] = heap[8 + digit]


# ---- tree --------------------------------------------------------------------------------------------------
#
# `number` of a decision is P_stop / P_go: the mass that the context's own estimator gave to what it has seen
# over the mass that the longer contexts gave. With prior 1/2 each, the weight of stopping here is
# ratio / (1 + ratio): context-tree weighting without a logarithm (Willems, Shtarkov & Tjalkens 1995). A context
# that was never seen gives 1/2.


@cython.cfunc
@cython.nogil
@cython.exceptval(check=False)
def _tree_law(
    row: cython.Py_ssize_t,
    keys: cython.ulonglong[:, ::1],
    child: cython.int[:, ::1],
    sides: cython.uchar[:, ::1],
    mask: cython.uchar[::1],
    table: cython.ulonglong[:, ::1],
    counts: cython.ushort[:, ::1],
    ratios: cython.float[:, ::1],
    shift: cython.int,
    alpha: cython.double,
    slots: cython.longlong[::1],
    heap: cython.double[::1],
    mass: cython.double[::1],
    laws: cython.double[:, ::1],
    at: cython.Py_ssize_t,
) -> cython.void:
    """laws[at, state] = mass of every seen state in the contexts of one row: all lines, parents first."""
    wrap: cython.longlong = table.shape[0] - 1
    levels: cython.int = cython.cast(cython.int, keys.shape[1])
    line: cython.Py_ssize_t
    depth: cython.int
    d: cython.int
    j: cython.int
    p: cython.double
    ones: cython.double
    both: cython.double
    ratio: cython.double
    slot: cython.longlong
    mass[0] = 1.0
    for line in range(mask.shape[0]):
        if mask[line] == 0:
            continue
        depth = 0
        while depth < levels:
            slot = _find(table, _hash(keys[row, depth], line), shift, wrap)
            if slot < 0:
                break
            slots[depth] = slot
            depth += 1
        heap[1] = mass[line]
        for j in range(1, 8):
            if mask[line] & sides[j, 0] == 0:
                p = 1.0
            elif mask[line] & sides[j, 1] == 0:
                p = 0.0
            else:
                p = 0.5
                for d in range(depth - 1, -1, -1):
                    slot = slots[d]
                    ones = counts[slot, 4 * j + 1]
                    both = counts[slot, 4 * j] + ones
                    ones = (ones + alpha) / (both + 2.0 * alpha)
                    if d == levels - 1:
                        p = ones
                    else:
                        ratio = ratios[slot, 2 * j + 1]
                        p = p + ratio / (1.0 + ratio) * (ones - p)
            heap[2 * j] = heap[j] * (1.0 - p)
            heap[2 * j + 1] = heap[j] * p
        _spread(line, child, mask, heap, mass, laws, at)


def tree(
    start: cython.Py_ssize_t,
    codes: cython.int[::1],
    keys: cython.ulonglong[:, ::1],
    path_start: cython.int[::1],
    path: cython.int[:, ::1],
    child: cython.int[:, ::1],
    sides: cython.uchar[:, ::1],
    mask: cython.uchar[::1],
    table: cython.ulonglong[:, ::1],
    counts: cython.ushort[:, ::1],
    ratios: cython.float[:, ::1],
    state: cython.longlong[::1],
    room: cython.longlong,
    shift: cython.int,
    alpha: cython.double,
    limit: cython.int,
    fresh: cython.int,
    frozen: cython.bint,
    slots: cython.longlong[::1],
    known: cython.int[::1],
    own: cython.double[::1],
    mass: cython.double[::1],
    want: cython.int[::1],
    laws: cython.double[:, ::1],
    bits: cython.double[::1],
) -> cython.Py_ssize_t:
    """Predict and learn rows start.. of `codes`; returns n, or the row at which the table must grow first.

    codes (n,) states, negative = learn nothing; keys (n, levels) context hashes, shortest context first;
    path[path_start[c]:path_start[c+1]] = (line, digit) of state c; child[line, digit] = state or -2 - line;
    mask[line] = digits in use; state = [states seen, lines used]; `room` = lines that may be used; `fresh` = new
    context levels a row may add; `frozen`: predict only; want[t] = row of `laws` to fill with the law of row t, or -1.
    Writes bits (n,): minus log2 of the mass of the state among the states seen (0 where it is new or missing).
    """
    n: cython.Py_ssize_t = codes.shape[0]
    done: cython.Py_ssize_t = start
    levels: cython.int = cython.cast(cython.int, keys.shape[1])
    wrap: cython.longlong = table.shape[0] - 1
    t: cython.Py_ssize_t
    code: cython.int
    step: cython.int
    line: cython.int
    digit: cython.int
    depth: cython.int
    d: cython.int
    j: cython.int
    at: cython.int
    bit: cython.int
    slot: cython.longlong
    p: cython.double
    q: cython.double
    mine: cython.double
    ratio: cython.double
    turned: cython.double
    zeros: cython.double
    ones: cython.double
    with cython.nogil:
        for t in range(start, n):
            if state[1] + fresh * DEEPEST > room:
                break
            code = codes[t]
            if want[t] >= 0:
                _tree_law(
                    t, keys, child, sides, mask, table, counts, ratios, shift, alpha, slots, own, mass, laws, want[t]
                )
            bits[t] = 0.0
            if code < 0:
                done = t + 1
                continue
            if not frozen and code >= state[0]:
                _mark(code, path_start, path, mask)
            p = 1.0
            for step in range(path_start[code], path_start[code + 1]):
                line = path[step, 0]
                digit = path[step, 1]
                if mask[line] & (mask[line] - 1) == 0:
                    continue  # one digit in use: nothing to decide
                depth = 0
                while depth < levels:
                    slot = _find(table, _hash(keys[t, depth], line), shift, wrap)
                    if slot < 0:
                        break
                    slots[depth] = slot
                    depth += 1
                j = 1
                for at in range(2, -1, -1):
                    bit = digit >> at & 1
                    if mask[line] & sides[j, 0] != 0 and mask[line] & sides[j, 1] != 0:
                        # what every context's own estimator gives to this bit, before it learns it
                        for d in range(depth):
                            slot = slots[d]
                            zeros = counts[slot, 4 * j]
                            ones = counts[slot, 4 * j + 1]
                            own[d] = ((ones if bit else zeros) + alpha) / (zeros + ones + 2.0 * alpha)
                            if not frozen:
                                _count(counts, slot, j, bit, limit)
                        # weigh from the longest known context down to the empty one
                        q = 0.5
                        for d in range(depth - 1, -1, -1):
                            mine = own[d]
                            if d == levels - 1:
                                q = mine
                            else:
                                slot = slots[d]
                                ratio = ratios[slot, 2 * j + 1]
                                if not frozen:
                                    turned = ratio * mine / q
                                    ratios[slot, 2 * j + 1] = min(max(turned, RATIO_LEAST), RATIO_MOST)
                                q = q + ratio / (1.0 + ratio) * (mine - q)
                        p *= q
                    j = 2 * j + bit
                known[step - path_start[code]] = depth
            if code < state[0]:
                bits[t] = -log2(p)
            done = t + 1
            if frozen:
                continue
            for step in range(path_start[code], path_start[code + 1]):
                line = path[step, 0]
                if mask[line] & (mask[line] - 1) == 0:
                    continue
                depth = known[step - path_start[code]]
                for d in range(depth, min(levels, depth + fresh)):
                    slot = _claim(table, counts, ratios, 1.0, state, _hash(keys[t, d], line), shift, wrap)
                    j = 1
                    for at in range(2, -1, -1):
                        bit = path[step, 1] >> at & 1
                        if mask[line] & sides[j, 0] != 0 and mask[line] & sides[j, 1] != 0:
                            counts[slot, 4 * j + bit] = 1
                        j = 2 * j + bit
            if code >= state[0]:
                state[0] = code + 1
    return done


# ---- pool --------------------------------------------------------------------------------------------------
#
# `number` of a decision is its chance of a one, moved towards every bit by 1/(n + 1.6), at least by `slowest`.
# A decision's log-odds is the weighted sum of the log-odds in all contexts and of what the longest match
# says; a context weighs by how much it has seen and by which decision it is, and the weights follow the
# gradient of the loss (logarithmic opinion pool: Genest & Zidek 1986; online gradient: Zinkevich 2003; for
# sequences: Mattern 2012). Last, a calibration curve per last state and decision says how often such
# odds came true.


@cython.cfunc
@cython.nogil
@cython.inline
@cython.exceptval(check=False)
def _experience(zeros: cython.int, ones: cython.int) -> cython.int:
    """How much a decision has seen, and whether always the same: 0..13."""
    n: cython.int = zeros + ones
    if zeros == 0 or ones == 0:
        if n < 4:
            return n
        return 4 if n < 6 else 5 if n < 10 else 6 if n < 20 else 7
    if n < 14:
        return 8 if n < 4 else 9 if n < 7 else 10
    return 11 if n < 40 else 12 if n < 120 else 13


@cython.cfunc
@cython.nogil
@cython.exceptval(check=False)
def _pooled(
    levels: cython.int,
    j: cython.int,
    node: cython.int,
    said: cython.double,
    counts: cython.ushort[:, ::1],
    chances: cython.float[:, ::1],
    by_seen: cython.double[:, ::1],
    by_node: cython.double[:, ::1],
    slots: cython.longlong[::1],
    m: cython.int,
    seen: cython.int[:, ::1],
    odds: cython.double[:, ::1],
) -> cython.double:
    """Pooled log-odds of decision j; leaves every context's log-odds and experience in odds[m], seen[m]."""
    total: cython.double = said
    chance: cython.double
    k: cython.int
    for k in range(levels):
        odds[m, k] = 0.0
        seen[m, k] = 0
        if slots[k] >= 0:
            seen[m, k] = _experience(counts[slots[k], 4 * j], counts[slots[k], 4 * j + 1])
            if seen[m, k]:
                chance = chances[slots[k], 2 * j + 1]
                odds[m, k] = log(chance / (1.0 - chance))
                total += (by_seen[k, seen[m, k]] + by_node[k, node]) * odds[m, k]
    return min(max(total, -11.5), 11.5)


@cython.cfunc
@cython.nogil
@cython.inline
@cython.exceptval(check=False)
def _calibrated(curves: cython.float[:, ::1], curve: cython.int, odds: cython.double) -> cython.double:
    """Half the pool's own mass of a one, half what became of such odds before."""
    place: cython.double = odds + 11.5
    cell: cython.int = cython.cast(cython.int, place)
    p: cython.double = 1.0 / (1.0 + exp(-odds))
    if cell >= LAST_CELL:
        cell = LAST_CELL - 1
    place = place - cell
    p = 0.5 * p + 0.5 * (curves[curve, cell] * (1.0 - place) + curves[curve, cell + 1] * place)
    return min(max(p, FEWEST), 1.0 - FEWEST)


@cython.cfunc
@cython.nogil
@cython.inline
@cython.exceptval(check=False)
def _calibrate(curves: cython.float[:, ::1], curve: cython.int, odds: cython.double, bit: cython.int) -> cython.void:
    """Move the two cells around `odds` towards what came."""
    place: cython.double = odds + 11.5
    cell: cython.int = cython.cast(cython.int, place)
    if cell >= LAST_CELL:
        cell = LAST_CELL - 1
    place = place - cell
    low: cython.double = curves[curve, cell]  # in double, or C would subtract in single precision
    high: cython.double = curves[curve, cell + 1]
    curves[curve, cell] = low + (bit - low) * 0.02 * (1.0 - place)
    curves[curve, cell + 1] = high + (bit - high) * 0.02 * place


@cython.cfunc
@cython.nogil
@cython.inline
@cython.exceptval(check=False)
def _curve(key: cython.ulonglong, node: cython.int) -> cython.int:
    """The calibration curve of a decision after the last state with hash `key`: 0..4095."""
    return cython.cast(cython.int, (key >> 20) + (key >> 45) * 31 + node * 67) & 4095


@cython.cfunc
@cython.nogil
@cython.exceptval(check=False)
def _pool_law(
    row: cython.Py_ssize_t,
    keys: cython.ulonglong[:, ::1],
    guess: cython.int,
    trust: cython.int,
    path_start: cython.int[::1],
    path: cython.int[:, ::1],
    child: cython.int[:, ::1],
    sides: cython.uchar[:, ::1],
    mask: cython.uchar[::1],
    table: cython.ulonglong[:, ::1],
    counts: cython.ushort[:, ::1],
    chances: cython.float[:, ::1],
    by_seen: cython.double[:, ::1],
    by_node: cython.double[:, ::1],
    by_trust: cython.double[:, ::1],
    curves: cython.float[:, ::1],
    shift: cython.int,
    slots: cython.longlong[::1],
    seen: cython.int[:, ::1],
    odds: cython.double[:, ::1],
    heap: cython.double[::1],
    mass: cython.double[::1],
    laws: cython.double[:, ::1],
    at: cython.Py_ssize_t,
) -> cython.void:
    """laws[at, state] = mass of every seen state, as `pool` would charge it."""
    wrap: cython.longlong = table.shape[0] - 1
    levels: cython.int = cython.cast(cython.int, keys.shape[1])
    line: cython.Py_ssize_t
    step: cython.int
    hint: cython.int
    j: cython.int
    k: cython.int
    node: cython.int
    said: cython.double
    strength: cython.double
    p: cython.double
    mass[0] = 1.0
    for line in range(mask.shape[0]):
        if mask[line] == 0:
            continue
        for k in range(levels):
            slots[k] = _find(table, _hash(keys[row, k], line), shift, wrap)
        hint = 0  # the heap place of the guessed digit, where the guess passes through this line
        if guess >= 0:
            for step in range(path_start[guess], path_start[guess + 1]):
                if path[step, 0] == line:
                    hint = 8 + path[step, 1]
        heap[1] = mass[line]
        for j in range(1, 8):
            if mask[line] & sides[j, 0] == 0:
                p = 1.0
            elif mask[line] & sides[j, 1] == 0:
                p = 0.0
            else:
                node = cython.cast(cython.int, line * 8 + j) & 1023
                said = 0.0
                if hint:
                    strength = by_trust[trust, 1] * log(by_trust[trust, 0] / (1.0 - by_trust[trust, 0]))
                    # decision j lies on the guess's way where the hint, cut to j's length, is j
                    if j == hint >> 3 or j == hint >> 2 or j == hint >> 1:
                        said = _towards(j, hint, strength)
                p = _calibrated(
                    curves,
                    _curve(keys[row, 1], node),
                    _pooled(levels, j, node, said, counts, chances, by_seen, by_node, slots, 0, seen, odds),
                )
            heap[2 * j] = heap[j] * (1.0 - p)
            heap[2 * j + 1] = heap[j] * p
        _spread(line, child, mask, heap, mass, laws, at)


@cython.cfunc
@cython.nogil
@cython.inline
@cython.exceptval(check=False)
def _towards(j: cython.int, hint: cython.int, strength: cython.double) -> cython.double:
    """`strength` with the sign of the bit that leads from decision j to heap place `hint`."""
    while hint >> 1 != j:
        hint = hint >> 1
    return strength if hint & 1 else -strength


def pool(
    start: cython.Py_ssize_t,
    codes: cython.int[::1],
    keys: cython.ulonglong[:, ::1],
    guess: cython.int[::1],
    trust: cython.int[::1],
    path_start: cython.int[::1],
    path: cython.int[:, ::1],
    child: cython.int[:, ::1],
    sides: cython.uchar[:, ::1],
    mask: cython.uchar[::1],
    table: cython.ulonglong[:, ::1],
    counts: cython.ushort[:, ::1],
    chances: cython.float[:, ::1],
    by_seen: cython.double[:, ::1],
    by_node: cython.double[:, ::1],
    by_trust: cython.double[:, ::1],
    curves: cython.float[:, ::1],
    state: cython.longlong[::1],
    room: cython.longlong,
    shift: cython.int,
    slowest: cython.double,
    gain: cython.double,
    frozen: cython.bint,
    slots: cython.longlong[::1],
    known: cython.int[::1],
    nodes: cython.int[::1],
    seen: cython.int[:, ::1],
    odds: cython.double[:, ::1],
    heap: cython.double[::1],
    mass: cython.double[::1],
    want: cython.int[::1],
    laws: cython.double[:, ::1],
    bits: cython.double[::1],
) -> cython.Py_ssize_t:
    """Predict and learn rows start.. of `codes`, as `tree` does, by pooled log-odds.

    keys (n, levels): any contexts, column 1 the last state; guess (n,) the state a longest match foretells, or
    -1, trust (n,) how far it is to be trusted (a row of by_trust: chance of a right bit, weight);
    by_seen (levels, 14) and by_node (levels, 1024) weights; curves (4096, 24) calibration; `gain` learning rate.
    """
    n: cython.Py_ssize_t = codes.shape[0]
    done: cython.Py_ssize_t = start
    levels: cython.int = cython.cast(cython.int, keys.shape[1])
    wrap: cython.longlong = table.shape[0] - 1
    t: cython.Py_ssize_t
    code: cython.int
    step: cython.int
    ahead: cython.int
    line: cython.int
    digit: cython.int
    k: cython.int
    j: cython.int
    m: cython.int
    at: cython.int
    bit: cython.int
    node: cython.int
    curve: cython.int
    hinted: cython.bint
    hint: cython.int
    slot: cython.longlong
    zeros: cython.int
    ones: cython.int
    logit: cython.double
    p: cython.double
    error: cython.double
    said: cython.double
    total: cython.double
    strength: cython.double
    rate: cython.double
    with cython.nogil:
        for t in range(start, n):
            if state[1] + levels * DEEPEST > room:
                break
            code = codes[t]
            if want[t] >= 0:
                _pool_law(
                    t,
                    keys,
                    guess[t] if guess[t] < state[0] else -1,
                    trust[t],
                    path_start,
                    path,
                    child,
                    sides,
                    mask,
                    table,
                    counts,
                    chances,
                    by_seen,
                    by_node,
                    by_trust,
                    curves,
                    shift,
                    slots,
                    seen,
                    odds,
                    heap,
                    mass,
                    laws,
                    want[t],
                )
            bits[t] = 0.0
            if code < 0:
                done = t + 1
                continue
            if not frozen and code >= state[0]:
                _mark(code, path_start, path, mask)
            total = 1.0
            m = 0
            hinted = 0 <= guess[t] < state[0]  # a state that was never learned cannot be hinted at
            ahead = path_start[guess[t]] if hinted else 0
            for step in range(path_start[code], path_start[code + 1]):
                line = path[step, 0]
                digit = path[step, 1]
                hint = path[ahead, 1] if hinted else 0
                if mask[line] & (mask[line] - 1) != 0:
                    for k in range(levels):
                        slots[k] = _find(table, _hash(keys[t, k], line), shift, wrap)
                    j = 1
                    for at in range(2, -1, -1):
                        bit = digit >> at & 1
                        if mask[line] & sides[j, 0] != 0 and mask[line] & sides[j, 1] != 0:
                            node = (line * 8 + j) & 1023
                            said = 0.0
                            strength = 0.0
                            if hinted and hint >> (at + 1) == digit >> (at + 1):
                                strength = log(by_trust[trust[t], 0] / (1.0 - by_trust[trust[t], 0]))
                                if hint >> at & 1 == 0:
                                    strength = -strength
                                said = by_trust[trust[t], 1] * strength
                            logit = _pooled(
                                levels, j, node, said, counts, chances, by_seen, by_node, slots, m, seen, odds
                            )
                            curve = _curve(keys[t, 1], node)
                            p = _calibrated(curves, curve, logit)
                            total *= p if bit else 1.0 - p
                            if frozen:
                                j = 2 * j + bit
                                continue
                            _calibrate(curves, curve, logit, bit)
                            # the weights learn after the row: until then all its decisions share them
                            nodes[m] = node
                            odds[m, levels] = gain * (bit - 1.0 / (1.0 + exp(-logit)))
                            odds[m, levels + 1] = strength
                            odds[m, levels + 2] = 0.998 if hint >> at & 1 == bit else 0.002
                            m += 1
                            for k in range(levels):
                                slot = slots[k]
                                if slot < 0:
                                    continue
                                zeros = counts[slot, 4 * j]
                                ones = counts[slot, 4 * j + 1]
                                rate = max(1.0 / (zeros + ones + 1.6), slowest)
                                p = chances[slot, 2 * j + 1]
                                p = p + (bit - p) * rate
                                chances[slot, 2 * j + 1] = min(max(p, FEWEST), 1.0 - FEWEST)
                                # the bit that did not come counts for less from now on
                                counts[slot, 4 * j + bit] = min(counts[slot, 4 * j + bit] + 1, 255)
                                if counts[slot, 4 * j + 1 - bit] > 3:
                                    counts[slot, 4 * j + 1 - bit] = (counts[slot, 4 * j + 1 - bit] + 4) >> 1
                        j = 2 * j + bit
                    known[step - path_start[code]] = levels
                    for k in range(levels):
                        if slots[k] < 0:
                            known[step - path_start[code]] -= 1
                hinted = hinted and hint == digit
                ahead += 1
            if code < state[0]:
                bits[t] = -log2(total)
            done = t + 1
            if frozen:
                continue
            for j in range(m):
                error = odds[j, levels]
                strength = odds[j, levels + 1]
                if strength != 0.0:
                    by_trust[trust[t], 1] += error * strength
                    by_trust[trust[t], 0] += (odds[j, levels + 2] - by_trust[trust[t], 0]) * 0.01
                for k in range(levels):
                    if seen[j, k]:
                        by_seen[k, seen[j, k]] += error * odds[j, k]
                        by_node[k, nodes[j]] += error * odds[j, k]
            for step in range(path_start[code], path_start[code + 1]):
                line = path[step, 0]
                if mask[line] & (mask[line] - 1) == 0 or known[step - path_start[code]] == levels:
                    continue
                for k in range(levels):
                    if _find(table, _hash(keys[t, k], line), shift, wrap) >= 0:
                        continue
                    slot = _claim(table, counts, chances, 0.5, state, _hash(keys[t, k], line), shift, wrap)
                    j = 1
                    for at in range(2, -1, -1):
                        bit = path[step, 1] >> at & 1
                        if mask[line] & sides[j, 0] != 0 and mask[line] & sides[j, 1] != 0:
                            counts[slot, 4 * j + bit] = 1
                            chances[slot, 2 * j + 1] = 0.5 + (bit - 0.5) / 1.6
                        j = 2 * j + bit
            if code >= state[0]:
                state[0] = code + 1
    return done
