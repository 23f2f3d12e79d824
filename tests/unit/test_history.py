"""What a model may look at: the same for rows read and for continuations, and what plain Python says it is."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from seqmix.models.history import BEFORE_START, ChunkPast, Fork, History, Past

SPAN = 6
MINUTE = 60_000_000

states = st.lists(st.sampled_from([-1, 0, 0, 1, 2, 7]), min_size=1, max_size=50)
text = st.lists(st.sampled_from([-1, *b"aabBz", *b" .@[`{", 0, 255]), min_size=1, max_size=50)
logs = st.one_of(states, text)


@dataclass
class Seen:
    """What stands before each row, gathered over chunks; every list has one entry a row."""

    lags: list[list[int]] = field(default_factory=list)
    runs: list[int] = field(default_factory=list)
    earlier: list[list[int]] = field(default_factory=list)
    words: list[list[int]] = field(default_factory=list)
    orders: list[list[int]] = field(default_factory=list)
    nested: list[list[int]] = field(default_factory=list)
    times: list[int] = field(default_factory=list)

    def add(self, past: Past) -> None:
        self.lags += np.stack([past.lag(k) for k in range(1, SPAN + 1)], axis=1).tolist()
        self.runs += past.run.tolist()
        self.earlier += np.stack([past.earlier(1), past.earlier(2)], axis=1).tolist()
        self.words += np.stack([past.word(0), past.word(1)], axis=1).tolist()
        self.orders += np.stack([past.order(k) for k in range(SPAN + 1)], axis=1).tolist()
        self.nested += np.stack(past.nested(past.lag(2), past.run), axis=1).tolist()
        assert past.times is not None
        self.times += past.times.tolist()


def new() -> History:
    return History(SPAN, runs=True, words=True)


def clock(rows: int) -> np.ndarray:
    return 1_700_000_000_000_000 + np.arange(rows, dtype=np.int64) * MINUTE


def read(history: History, codes: list[int], edges: list[int]) -> tuple[Seen, list[int]]:
    """What stands before each row, read in chunks; and the hash of the last 3 states up to and with each row."""
    rows, times, seen, after = np.array(codes, dtype=np.int32), clock(len(codes)), Seen(), []
    for a, b in zip([0, *edges], [*edges, len(codes)], strict=True):
        past = history.ahead(rows[a:b], times[a:b])
        seen.add(past)
        assert isinstance(past, ChunkPast)
        after += past.after(3).tolist()
        past.close()
    return seen, after


def edges_of(codes: list[int], data: st.DataObject) -> list[int]:
    return sorted(set(data.draw(st.lists(st.integers(1, max(len(codes) - 1, 1)), max_size=6))) - {len(codes)})


# ---- plain Python


def run_before(codes: list[int], t: int) -> int:
    length = 0
    while length < t and codes[t - 1 - length] == codes[t - 1]:
        length += 1
    return length


def earlier_before(codes: list[int], t: int) -> list[int]:
    """States of the run before the present one, and of the one before that."""
    runs = [code for i, code in enumerate(codes[:t]) if i == 0 or code != codes[i - 1]]
    return [*runs[-2::-1], BEFORE_START, BEFORE_START][:2]


def words_before(codes: list[int], t: int) -> list[str]:
    """The letters since the last non-letter, in lower case, and the word before that."""
    plain = "".join(chr(code).lower() if 0 <= code < 128 and chr(code).isalpha() else " " for code in codes[:t])
    now = plain.rsplit(" ", 1)[-1]
    earlier = plain[: len(plain) - len(now)].split()
    return [now, earlier[-1] if earlier else ""]


def same_partition(left: list[object], right: list[object]) -> bool:
    """Whether two entries of `left` are equal exactly where those of `right` are."""
    return len(set(left)) == len(set(right)) == len(set(zip(left, right, strict=True)))


@given(logs, st.data())
@settings(max_examples=120, deadline=None)
def test_plain_python(codes: list[int], data: st.DataObject) -> None:
    seen, after = read(new(), codes, edges_of(codes, data))
    padded = [BEFORE_START] * SPAN + codes
    rows = range(len(codes))
    lags = [padded[t : t + SPAN][::-1] for t in rows]
    assert seen.lags == lags
    assert seen.runs == [run_before(codes, t) for t in rows]
    assert seen.earlier == [earlier_before(codes, t) for t in rows]
    for k in range(SPAN + 1):
        assert same_partition([keys[k] for keys in seen.orders], [tuple(lag[:k]) for lag in lags])
    assert same_partition([keys[1] for keys in seen.nested], [lag[1] for lag in lags])
    assert same_partition(
        [keys[2] for keys in seen.nested], [(lag[1], run) for lag, run in zip(lags, seen.runs, strict=True)]
    )
    assert after[:-1] == [keys[3] for keys in seen.orders[1:]]
    words = [words_before(codes, t) for t in rows]
    for i in (0, 1):
        hashes = [pair[i] for pair in seen.words]
        assert same_partition(hashes, [pair[i] for pair in words])
        assert [value == 0 for value in hashes] == [pair[i] == "" for pair in words]


@given(logs, st.data())
@settings(max_examples=80, deadline=None)
def test_any_chunking_gives_the_same(codes: list[int], data: st.DataObject) -> None:
    whole = read(new(), codes, [])
    assert read(new(), codes, edges_of(codes, data)) == whole
    assert read(new(), codes, list(range(1, len(codes)))) == whole


@given(logs, st.data())
@settings(max_examples=80, deadline=None)
def test_continuations_see_what_rows_see(codes: list[int], data: st.DataObject) -> None:
    whole, _ = read(new(), codes, [])
    first = data.draw(st.integers(0, len(codes) - 1))
    history, times, seen = new(), clock(len(codes)), Seen()
    if first:
        read(history, codes[:first], [])
    fork = history.fork(1, int(times[first]))
    for t in range(first, len(codes)):
        seen.add(fork)
        fork.push(np.array([codes[t]], dtype=np.int32), int(times[t + 1]) if t + 1 < len(codes) else None)
    assert vars(seen) == {name: column[first:] for name, column in vars(whole).items()}
    assert fork.path.tolist() == [codes[first:]]
    assert history.rows == first


def sights(*forks: Fork) -> Seen:
    """What stands before the next row of each path of all these forks."""
    seen = Seen()
    for fork in forks:
        seen.add(fork)
    return seen


@given(logs, st.lists(st.tuples(st.integers(0, 2), st.integers(0, 2), st.integers(0, 2)), min_size=1, max_size=5))
@settings(max_examples=60, deadline=None)
def test_paths_do_not_disturb_each_other(codes: list[int], steps: list[tuple[int, int, int]]) -> None:
    history = new()
    read(history, codes, [])
    together = history.fork(3, 0)
    alone = [history.fork(1, 0) for _ in range(3)]
    for t, step in enumerate(steps):
        together.push(np.array(step, dtype=np.int32), t)
        for fork, code in zip(alone, step, strict=True):
            fork.push(np.array([code], dtype=np.int32), t)
    assert sights(together) == sights(*alone)
    which = [2, 0, 0, 1, 2]
    together.select(np.array(which))
    assert sights(together) == sights(*(alone[i] for i in which))


@given(logs, st.data())
@settings(max_examples=40, deadline=None)
def test_state_out_and_in(codes: list[int], data: st.DataObject) -> None:
    first = data.draw(st.integers(0, len(codes) - 1))
    one, other = new(), new()
    if first:
        read(one, codes[:first], [])
    other.restore(one.state())
    assert read(one, codes[first:], []) == read(other, codes[first:], [])
    assert one.rows == other.rows == len(codes)
