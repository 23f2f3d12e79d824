"""The grid of a log of numbers: the steps in which its logger writes them, found from the rows themselves."""

from __future__ import annotations

from math import gcd, log2, ulp

import numpy as np

from ..errors import OptionError
from ..keep import Kept

FIRST_LOOK = 16
"""The grid may go coarser after this many rows, twice as many, four times as many, and so on."""

DIFFERENT = 3
"""So many different values must agree on a coarser grid: a reading that stands still says nothing of steps."""

_FINEST = -307  # below this power of ten its inverse is no float
_NOISE = 4.0  # spacings of floats that arithmetic may have moved a value: 0.1 * 3 means 0.3
_NOISE_DIGITS = 12  # of a value that such noise can be told from
_LEAST = 4.0  # spacings of floats that a cell is wide at least, so that its edges stand apart from its middle
_FAR = 2.0**12  # spacings in a cell then: 10**12 < 2**(52 - 12)
_EXACT = 2.0**50  # multiples of a power of ten below this are found without error


class Grid(Kept):
    """Grid points are the multiples of `multiple` * 10**`exponent`, the resolution; a row is a cell around one.

    The resolution is 1 until a row does not lie on the grid. If such a row has more decimals, as it is written
    shortest, than the grid, then its last decimal is the new resolution; else the greatest common divisor is.
    After rows 16, 32, 64, ... the resolution becomes the greatest common divisor of the last half of the rows
    (at 16 of them all), if that is coarser and at least three different values speak for it. So the grid
    follows a logger that changed its steps, and is known before each row save for those that need a finer one:
    that they do, and how fine, is charged in bits.

    A value within 4 spacings of floats of a short decimal is taken as that. No cell is narrower than
    4 spacings at its value.

    resolution: given from outside, all cells are as wide, nothing is learned or charged, and `snap` moves the
        values to the grid. Raises OptionError unless it is positive, from 1e-300 to 1e300.
    """

    kept = ("multiple", "exponent", "rows", "finer", "common", "different", "few")

    def __init__(self, resolution: float | None = None) -> None:
        if resolution is not None and not 1e-300 <= resolution <= 1e300:
            raise OptionError(f"a resolution of {resolution}; it must be positive, from 1e-300 to 1e300")
        self.given = resolution is not None
        self.multiple, self.exponent = (1, 0) if resolution is None else _decimal(resolution)
        self.rows = self.finer = 0  # rows so far, and those that needed a finer grid
        # Since the last look: greatest common divisor in units of the last decimal, different values and how many.
        self.common = 0
        self.different = 0
        self.few = np.zeros(DIFFERENT)

    @property
    def resolution(self) -> float:
        """The distance of grid points, as known after the rows so far."""
        return _power(self.exponent, self.multiple)

    def cells(self, values: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """(n,) width of the cell of each of n values, and (n,) bits of "needs a finer grid, and how fine" or not.

        Before a row, after n rows of which r needed a finer grid, the chance of that is (r + 1/2) / (n + 1).
        A decimal k steps finer than the least that could be needed has 1 / ((k + 1)(k + 2)) of it, and the row
        the width of that decimal. Missing rows, NaN, cost nothing. Cut into chunks in any way, the rows get
        the same widths and bits.
        """
        widths = np.full(len(values), self.resolution)
        bits = np.zeros(len(values))
        with np.errstate(over="ignore", invalid="ignore"):
            spacing = np.spacing(np.minimum(np.abs(values), 1e308))  # of the largest float it would be infinite
            if not self.given:
                self._learn(values, spacing, widths, bits)
                bits[np.isnan(values)] = 0.0
        return np.fmax(widths, _LEAST * spacing), bits

    def snap(self, values: np.ndarray) -> np.ndarray:
        """(n,) the values moved to the nearest grid points if the resolution was given, else as they are."""
        if not self.given:
            return values
        with np.errstate(over="ignore", invalid="ignore"):
            steps = np.rint(values / self.resolution)
            units = steps * self.multiple
            points = np.where(np.abs(units) < _EXACT, self._points(units), steps * self.resolution)
            return np.where(np.abs(steps) < _EXACT, points, values)

    def _learn(self, values: np.ndarray, spacing: np.ndarray, widths: np.ndarray, bits: np.ndarray) -> None:
        start = 0
        while start < len(values):
            look = max(FIRST_LOOK, 1 << self.rows.bit_length())
            stop = min(len(values), start + look - self.rows)
            end = start + self._on_grid(values[start:stop], spacing[start:stop])
            widths[start:end] = self.resolution
            after = np.arange(self.rows + 1, self.rows + 1 + end - start)
            bits[start:end] = -np.log1p(-(self.finer + 0.5) / after) / np.log(2)
            self._note(values[start:end])
            self.rows += end - start
            if end < stop:
                steps = self._refine(float(values[end]))
                widths[end] = _power(self.exponent)
                bits[end] = log2((self.rows + 1) / (self.finer + 0.5)) + log2((steps + 1) * (steps + 2))
                self._note(values[end : end + 1])
                self.finer += 1
                self.rows += 1
                end += 1
            if self.rows == look:
                self._coarsen()
            start = end

    def _on_grid(self, values: np.ndarray, spacing: np.ndarray) -> int:
        """How many values lie on the grid before the first that does not."""
        units = self._units(values)
        error = np.abs(self._points(units) - values)
        on = (error == 0) | ((error <= _NOISE * spacing) & (_FAR * spacing <= _power(self.exponent)))
        on &= np.abs(units) < _EXACT
        if self.multiple > 1:
            on &= np.fmod(units, self.multiple) == 0
        on |= ~(spacing < self.resolution)  # missing values, too
        for place in np.flatnonzero(~on).tolist():
            # Rare, save for values of 16 or 17 digits: look at the decimal itself.
            digits, exponent = _decimal(float(values[place]))
            if exponent < self.exponent or digits * 10 ** (exponent - self.exponent) % self.multiple:
                return place
        return len(values)

    def _refine(self, value: float) -> int:
        """Make the grid finer for a value that is not on it; by how many decimals beyond the least possible."""
        digits, exponent = _decimal(value)
        steps = max(self.exponent - exponent, 0)
        least = self.multiple == 1
        if steps:
            self.exponent = exponent
            self.multiple = 1
            self.common *= 10**steps
            if self.common >= _EXACT:
                self.common = 1
        else:
            self.multiple = gcd(self.multiple, digits * 10 ** (exponent - self.exponent))
        return steps - least

    def _note(self, values: np.ndarray) -> None:
        """Gather what speaks for a coarser grid."""
        values = values[~np.isnan(values)]
        if self.common != self.multiple:
            units = self._units(values)
            if (np.abs(units) < _EXACT).all():
                self.common = _common_divisor(units.astype(np.int64), self.common)
            else:
                self.common = self.multiple
        while self.different < DIFFERENT:
            new = values[(values[:, None] != self.few[: self.different]).all(axis=1)]
            if not len(new):
                break
            self.few[self.different] = new[0]
            self.different += 1

    def _coarsen(self) -> None:
        if self.different == DIFFERENT and self.common > self.multiple:
            self.multiple = self.common
            while self.multiple % 10 == 0:
                self.multiple //= 10
                self.exponent += 1
        self.common = self.different = 0

    def _units(self, values: np.ndarray) -> np.ndarray:
        """(n,) the nearest multiples of 10**exponent, in these; exact below 2**50."""
        return np.rint(values / _power(self.exponent) if self.exponent > 0 else values * _power(-self.exponent))

    def _points(self, units: np.ndarray) -> np.ndarray:
        """(n,) the floats nearest to whole multiples of 10**exponent, for exponents from -22 to 22."""
        return units * _power(self.exponent) if self.exponent > 0 else units / _power(-self.exponent)


def _power(exponent: int, multiple: int = 1) -> float:
    return float(f"{multiple}e{exponent}")


def _decimal(value: float) -> tuple[int, int]:
    """Digits and power of ten of a value not 0, written as shortly as its noise lets it; digits end in no 0."""
    text = f"{value:.{_NOISE_DIGITS - 1}e}"
    if abs(float(text) - value) > _NOISE * ulp(value):
        text = repr(value)
    mantissa, _, power = text.partition("e")
    whole, _, fraction = mantissa.partition(".")
    digits = (whole + fraction).rstrip("0")
    exponent = int(power or 0) + len(whole.lstrip("-")) - len(digits.lstrip("-"))
    return int(digits), max(exponent, _FINEST)


def _common_divisor(integers: np.ndarray, divisor: int) -> int:
    """Of integers and `divisor`, where 0 stands for none; a few integers settle it, nearly always."""
    while len(integers):
        divisor = int(np.gcd.reduce(integers[:64], initial=divisor))
        integers = integers[64:]
        if divisor:
            integers = integers[integers % divisor != 0]
    return divisor
