# cython: language_level=3, boundscheck=False, wraparound=False, cdivision=True, initializedcheck=False
"""What rows teach about repeats: the longest match, a bet on what it foretells, and incremental parsing."""

from __future__ import annotations

try:  # the compiler wants the plain import; without Cython the shim stands in
    import cython
except ModuleNotFoundError:
    from seqmix.kernels import shim as cython

if cython.compiled:
    from cython.cimports.libc.math import log2
else:
    from math import log2

ALL = cython.declare(cython.ulonglong, 0xFFFFFFFFFFFFFFFF)
PLACE = cython.declare(cython.ulonglong, 0x9E3779B97F4A7C15)
STIR = cython.declare(cython.ulonglong, 0xD6E8FEB86659FD93)
LONGEST = cython.declare(cython.longlong, 32)  # a match is measured up to this many rows back
PATIENCE = cython.declare(cython.longlong, 8)  # wrong guesses after which a match is given up
EVENTS_MOST = cython.declare(cython.double, 512.0)  # hits and misses at one trust are halved there


def is_compiled() -> bool:
    """True in the compiled module, False where Python runs this file."""
    return cython.compiled


def follow(
    codes: cython.int[::1],
    after: cython.ulonglong[::1],
    ring: cython.int[::1],
    places: cython.longlong[::1],
    shift: cython.int,
    least: cython.longlong,
    state: cython.longlong[::1],
    frozen: cython.bint,
    guess: cython.int[::1],
    trust: cython.int[::1],
) -> None:
    """Follow the continuation of the longest repeated past.

    after (n,): hash of the last `least` rows up to and with row t; ring: the past, a power of two long;
    places: where each hash was last seen, plus 1 (`frozen`: no new place is kept);
    state = [rows so far, pointer or -1, length, misses].
    Writes guess (n,), the state foretold for each row before it is read, or -1, and trust (n,) = 0..63:
    4 x min(length, 15) + min(wrong guesses lately, 3).
    """
    wrap: cython.longlong = ring.shape[0] - 1
    t: cython.Py_ssize_t
    now: cython.longlong = state[0]
    pointer: cython.longlong = state[1]
    length: cython.longlong = state[2]
    misses: cython.longlong = state[3]
    slot: cython.longlong
    found: cython.longlong
    same: cython.longlong
    with cython.nogil:
        for t in range(codes.shape[0]):
            guess[t] = -1
            trust[t] = 0
            if pointer >= 0:
                guess[t] = ring[pointer & wrap]
                trust[t] = cython.cast(cython.int, 4 * min(length, 15) + min(misses, 3))
            ring[now & wrap] = codes[t]
            now += 1
            if pointer >= 0:
                pointer += 1
                if codes[t] >= 0:
                    if guess[t] == codes[t]:
                        length += 1
                        if length >= 16:
                            misses = 0
                    else:
                        length = 0
                        misses += 1
                        if misses > PATIENCE:
                            pointer = -1
            if now < least:
                continue
            slot = cython.cast(cython.longlong, after[t] >> shift)
            found = places[slot] - 1
            if not frozen:
                places[slot] = now + 1
            if (pointer < 0 or length < least) and found >= 0 and now - found < wrap - LONGEST:
                same = 0
                while same < LONGEST and same < found:
                    if ring[(found - 1 - same) & wrap] != ring[(now - 1 - same) & wrap]:
                        break
                    same += 1
                if same >= least and same > length:
                    pointer = found
                    length = same
                    misses = 0
        state[0] = now
        state[1] = pointer
        state[2] = length
        state[3] = misses


def bet(
    codes: cython.int[::1],
    guess: cython.int[::1],
    trust: cython.int[::1],
    events: cython.double[:, ::1],
    seen: cython.double[::1],
    state: cython.longlong[::1],
    frozen: cython.bint,
    want: cython.int[::1],
    laws: cython.double[:, ::1],
    bits: cython.double[::1],
) -> None:
    """Bet on each guess what guesses of its trust were worth so far; share the rest by how often states came.

    events (trusts, 2) = hits, misses; seen (states,) = counts; state = [states seen, rows counted].
    Masses: hit (hits + 1/2) / (hits + misses + 1); otherwise in proportion to count + 1/2.
    """
    t: cython.Py_ssize_t
    code: cython.int
    k: cython.int
    known: cython.double
    total: cython.double
    right: cython.double
    others: cython.double
    p: cython.double
    guessed: cython.bint
    with cython.nogil:
        for t in range(codes.shape[0]):
            code = codes[t]
            known = state[0]
            total = state[1] + 0.5 * known
            right = 0.0
            others = total
            guessed = 0 <= guess[t] < state[0]  # a state that was never learned cannot be bet on
            if guessed and state[0] > 1:
                right = (events[trust[t], 0] + 0.5) / (events[trust[t], 0] + events[trust[t], 1] + 1.0)
                others = total - seen[guess[t]] - 0.5
            if want[t] >= 0:
                for k in range(state[0]):
                    laws[want[t], k] = (1.0 - right) * (seen[k] + 0.5) / others
                if right > 0.0:
                    laws[want[t], guess[t]] = right
            bits[t] = 0.0
            if code < 0:
                continue
            if code < state[0]:
                p = (1.0 - right) * (seen[code] + 0.5) / others
                if right > 0.0 and code == guess[t]:
                    p = right
                bits[t] = -log2(p)
            if frozen:
                continue
            if code >= state[0]:
                state[0] = code + 1
            seen[code] += 1.0
            state[1] += 1
            if guessed:
                k = 0 if code == guess[t] else 1
                events[trust[t], k] += 1.0
                if events[trust[t], k] >= EVENTS_MOST:
                    events[trust[t], 0] *= 0.5
                    events[trust[t], 1] *= 0.5


@cython.cfunc
@cython.nogil
@cython.inline
@cython.exceptval(check=False)
def _edge(node: cython.longlong, code: cython.longlong) -> cython.ulonglong:
    """Hash of the edge from a phrase by a state."""
    h: cython.ulonglong = cython.cast(cython.ulonglong, node)
    h = (h * PLACE + cython.cast(cython.ulonglong, code)) & ALL
    h = ((h ^ (h >> 32)) * STIR) & ALL
    return h ^ (h >> 29)


@cython.cfunc
@cython.nogil
@cython.inline
@cython.exceptval(check=False)
def _child(
    edges: cython.longlong[:, ::1], node: cython.longlong, code: cython.longlong, shift: cython.int
) -> cython.longlong:
    """Slot of the edge (node, code), or the free slot where it would stand."""
    wrap: cython.longlong = edges.shape[0] - 1
    slot: cython.longlong = cython.cast(cython.longlong, _edge(node, code) >> shift)
    while edges[slot, 2] != 0 and (edges[slot, 0] != node or edges[slot, 1] != code):
        slot = (slot + 1) & wrap
    return slot


def replant(old: cython.longlong[:, ::1], new: cython.longlong[:, ::1], shift: cython.int) -> None:
    """Move the edges of `old` into the larger, empty `new`."""
    i: cython.longlong
    j: cython.int
    slot: cython.longlong
    with cython.nogil:
        for i in range(old.shape[0]):
            if old[i, 2] != 0:
                slot = _child(new, old[i, 0], old[i, 1], shift)
                for j in range(3):
                    new[slot, j] = old[i, j]


@cython.cfunc
@cython.nogil
@cython.inline
@cython.exceptval(check=False)
def _phrase_mass(
    edges: cython.longlong[:, ::1],
    visits: cython.longlong[:, ::1],
    node: cython.longlong,
    code: cython.longlong,
    states: cython.longlong,
    shift: cython.int,
) -> cython.double:
    """Mass of `code` at a node: as many leaves as it leads to, of the leaves under the node."""
    child: cython.longlong = edges[_child(edges, node, code, shift), 2]
    entered: cython.double = visits[child, 0] if child else 0
    left: cython.double = visits[node, 1]
    more: cython.double = states - 1
    return (entered * more + 1.0) / (left * more + more + 1.0)


def step(
    nodes: cython.longlong[::1],
    codes: cython.int[::1],
    edges: cython.longlong[:, ::1],
    visits: cython.longlong[:, ::1],
    shift: cython.int,
    states: cython.longlong,
    laws: cython.double[:, ::1],
) -> None:
    """Without learning: laws (n, states) at the nodes whose code is negative; the others move on by their code."""
    i: cython.Py_ssize_t
    k: cython.longlong
    with cython.nogil:
        for i in range(nodes.shape[0]):
            if codes[i] >= 0:
                nodes[i] = edges[_child(edges, nodes[i], codes[i], shift), 2]
            else:
                for k in range(states):
                    laws[i, k] = _phrase_mass(edges, visits, nodes[i], k, states, shift)


def parse(
    start: cython.Py_ssize_t,
    codes: cython.int[::1],
    edges: cython.longlong[:, ::1],
    visits: cython.longlong[:, ::1],
    shift: cython.int,
    room: cython.longlong,
    last: cython.bint,
    frozen: cython.bint,
    state: cython.longlong[::1],
    want: cython.int[::1],
    laws: cython.double[:, ::1],
    bits: cython.double[::1],
) -> cython.Py_ssize_t:
    """Incremental parsing (Ziv & Lempel 1978) as a predictor (Langdon 1983; Feder, Merhav & Gutman 1992).

    edges (slots, 3) = node, state, child (0 = free); visits (nodes, 2) = times entered, times left by a state;
    state = [states seen, nodes, node now]. With A states seen, a child entered c times of the n times the node
    was left has mass (c (A - 1) + 1) / (n (A - 1) + A). Returns the row where the tree must grow first, or n;
    when that is the `last` growth, no phrase is added any more; `frozen`: predict and move on only.
    """
    n: cython.Py_ssize_t = codes.shape[0]
    done: cython.Py_ssize_t = start
    t: cython.Py_ssize_t
    k: cython.longlong
    code: cython.longlong
    slot: cython.longlong
    child: cython.longlong
    node: cython.longlong
    full: cython.bint
    with cython.nogil:
        for t in range(start, n):
            code = codes[t]
            node = state[2]
            if want[t] >= 0:
                for k in range(state[0]):
                    laws[want[t], k] = _phrase_mass(edges, visits, node, k, state[0], shift)
            bits[t] = 0.0
            if code < 0:
                done = t + 1
                continue
            full = state[1] >= room
            if full and not last and not frozen:
                break
            slot = _child(edges, node, code, shift)
            child = edges[slot, 2]
            if code < state[0]:
                bits[t] = -log2(_phrase_mass(edges, visits, node, code, state[0], shift))
            done = t + 1
            if frozen:
                state[2] = child
                continue
            if code >= state[0]:
                state[0] = code + 1
            if child:
                visits[node, 1] += 1
                visits[child, 0] += 1
                state[2] = child
            else:
                state[2] = 0  # the phrase ends here; the next one starts at the root
                if not full:
                    visits[node, 1] += 1
                    edges[slot, 0] = node
                    edges[slot, 1] = code
                    edges[slot, 2] = state[1]
                    visits[state[1], 0] = 1
                    state[1] += 1
    return done
