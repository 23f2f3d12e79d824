"""States as strings of base-8 digits: the binary decomposition that every context tree shares.

State i of a growing alphabet (numbered by first appearance) is written as i + 1 in base 8, after as many
zeros as it has further digits: 1..7 take one digit, the next 56 take three. The early states, which are
mostly the frequent ones, are the cheap ones, and a new state never changes the digits of an old one
(the scheme of Elias 1975 in base 8; binary decomposition: Tjalkens, Willems & Shtarkov 1994).
Bytes have three fixed digits: 2, 3 and 3 bits from the top.

Digits hang in a tree; an inner node of it is a *line*, numbered so that parents come first.
"""

from __future__ import annotations

import threading

import numpy as np


def digits_of(state: int) -> list[int]:
    """Base-8 digits of a state of a growing alphabet."""
    digits = [int(char) for char in f"{state + 1:o}"]
    return [0] * (len(digits) - 1) + digits


class Digits:
    """Paths of states 0..len-1: grows, never changes what is there.

    path_start (len+1,) int32, path (total, 2) int32 of (line, digit), child (lines, 8) int32: a state,
    or -2 - line, or -1 where there is nothing.
    """

    def __init__(self) -> None:
        self._starts = [0]
        self._steps: list[tuple[int, int]] = []
        self._child = [[-1] * 8]
        self._growing = threading.Lock()  # models that learn side by side share the paths
        self._pack()

    def __len__(self) -> int:
        return len(self._starts) - 1

    @property
    def lines(self) -> int:
        return len(self._child)

    def _pack(self) -> None:
        self.path_start = np.array(self._starts, dtype=np.int32)
        self.path = np.array(self._steps, dtype=np.int32).reshape(-1, 2)
        self.child = np.array(self._child, dtype=np.int32)

    def _add(self, digits: list[int]) -> None:
        state, line = len(self), 0
        for digit in digits[:-1]:
            self._steps.append((line, digit))
            if self._child[line][digit] == -1:
                self._child[line][digit] = -2 - len(self._child)
                self._child.append([-1] * 8)
            line = -2 - self._child[line][digit]
        self._steps.append((line, digits[-1]))
        self._child[line][digits[-1]] = state
        self._starts.append(len(self._steps))

    def grow(self, states: int) -> None:
        """Make sure that states 0..states-1 have paths."""
        with self._growing:
            if states <= len(self):
                return
            for state in range(len(self), max(states, 2 * len(self), 8)):
                self._add(digits_of(state))
            self._pack()


class ByteDigits(Digits):
    """The 256 bytes, three digits each."""

    def __init__(self) -> None:
        super().__init__()
        for byte in range(256):
            self._add([byte >> 6, byte >> 3 & 7, byte & 7])
        self._pack()


STATES = Digits()
BYTES = ByteDigits()

# sides[j] = digits under the zero child and under the one child of decision j of a line
SIDES = np.array(
    [[0, 0], [0x0F, 0xF0], [0x03, 0x0C], [0x30, 0xC0], [0x01, 0x02], [0x04, 0x08], [0x10, 0x20], [0x40, 0x80]],
    dtype=np.uint8,
)
