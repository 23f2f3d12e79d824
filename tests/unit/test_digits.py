"""Digits of states: a code that can be decided bit by bit, and that never changes."""

from __future__ import annotations

import sys
import threading
from itertools import pairwise

import numpy as np
import pytest

from seqmix.models.digits import BYTES, SIDES, ByteDigits, Digits, digits_of

Path = tuple[tuple[int, int], ...]


def paths(digits: Digits) -> list[Path]:
    """(line, digit) steps of every state."""
    steps = [tuple(step) for step in digits.path.tolist()]
    return [tuple(steps[a:b]) for a, b in pairwise(digits.path_start)]


def grown(states: int) -> Digits:
    digits = Digits()
    digits.grow(states)
    return digits


@pytest.mark.parametrize("digits", [grown(5000), ByteDigits()], ids=["states", "bytes"])
class TestEveryAlphabet:
    def test_no_path_is_the_start_of_another(self, digits: Digits) -> None:
        words = [tuple(digit for _, digit in path) for path in paths(digits)]
        starts = {word[:length] for word in words for length in range(len(word))}
        assert len(set(words)) == len(words)
        assert not starts & set(words)

    def test_parents_come_first(self, digits: Digits) -> None:
        for line, children in enumerate(digits.child.tolist()):
            assert all(-2 - child > line for child in children if child < -1)
        for path in paths(digits):
            lines = [line for line, _ in path]
            assert lines[0] == 0
            assert lines == sorted(set(lines))

    def test_children_lead_where_the_paths_say(self, digits: Digits) -> None:
        for state, path in enumerate(paths(digits)):
            for (line, digit), (below, _) in pairwise(path):
                assert digits.child[line, digit] == -2 - below
            line, digit = path[-1]
            assert digits.child[line, digit] == state

    def test_every_line_is_on_some_path(self, digits: Digits) -> None:
        assert {line for path in paths(digits) for line, _ in path} == set(range(digits.lines))


def test_new_states_never_change_old_paths() -> None:
    digits, before = Digits(), []
    for states in (1, 2, 7, 8, 9, 63, 64, 65, 500, 4000):
        digits.grow(states)
        now = paths(digits)
        assert len(digits) >= states
        assert now[: len(before)] == before
        assert now == paths(grown(len(digits)))
        before = now


def test_growing_to_less_changes_nothing() -> None:
    digits = grown(100)
    before = digits.path.copy()
    digits.grow(3)
    assert np.array_equal(digits.path, before)


def test_growing_in_several_threads_at_once() -> None:
    """All tables of a process share the digits, and models learn side by side."""
    interval = sys.getswitchinterval()
    sys.setswitchinterval(1e-6)
    try:
        for _ in range(3):
            digits, start = Digits(), threading.Barrier(4)

            def grow(digits: Digits = digits, start: threading.Barrier = start) -> None:
                start.wait()
                for states in (9, 100, 1000, 5000):
                    digits.grow(states)

            threads = [threading.Thread(target=grow) for _ in range(4)]
            for thread in threads:
                thread.start()
            for thread in threads:
                thread.join()
            assert paths(digits) == paths(grown(len(digits)))
    finally:
        sys.setswitchinterval(interval)


def test_early_states_are_the_short_ones() -> None:
    lengths = [len(digits_of(state)) for state in range(5000)]
    assert lengths[:7] == [1] * 7
    assert lengths[7:63] == [3] * 56
    assert lengths == sorted(lengths)


def test_digits_are_the_number_in_base_eight() -> None:
    for state in range(2000):
        digits = digits_of(state)
        zeros = len(digits) // 2
        assert digits[:zeros] == [0] * zeros
        assert digits[zeros] != 0
        assert sum(digit * 8**i for i, digit in enumerate(reversed(digits))) == state + 1


def test_bytes_are_two_three_and_three_bits() -> None:
    assert len(BYTES) == 256
    for byte, path in enumerate(paths(BYTES)):
        assert [digit for _, digit in path] == [byte >> 6, byte >> 3 & 7, byte & 7]


def test_sides_of_a_decision_are_the_digits_under_its_children() -> None:
    """Decision j of a line is a heap: bit b of a digit leads from j to 2j + b, digit d to 8 + d."""
    for j in range(1, 8):
        for bit in (0, 1):
            under = {d for d in range(8) if any((8 + d) >> up == 2 * j + bit for up in range(3))}
            assert {d for d in range(8) if SIDES[j, bit] >> d & 1} == under
