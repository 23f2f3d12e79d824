"""The grid of numbers: how fine it is, when it changes, and what that costs."""

import copy
from math import log2, ulp

import numpy as np
import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st

from seqmix.errors import OptionError
from seqmix.series.grid import Grid


def after(values):
    """The grid after some rows."""
    grid = Grid()
    grid.cells(np.asarray(values, float))
    return grid


def random(seed=0):
    return np.random.default_rng(seed)


LOGS = {
    "tenths": np.round(random().normal(20, 3, 300), 1),
    "integers": random().poisson(50, 300),
    "halves": random().integers(0, 9, 300) / 2,
    "pence": random().integers(-40, 40, 300) * 25,
    "whole floats": random().normal(0, 1, 300),
    "many sizes": np.exp(random().normal(0, 5, 300)),
    "tiny": random().normal(0, 1e-300, 300),
    "denormal": [5e-324, 1e-310, 0.0, -3e-308] * 10,
    "huge": random().normal(0, 1e300, 300),
    "extremes": [1e-300, 1e300, -1e300, 1.7e308, 5e-324, 12.658579999999999, 0.0, -0.0] * 5,
    "equal": np.full(300, 7.3),
    "zeros": np.zeros(300),
    "two values": random().integers(0, 2, 300) * 5.0,
    "missing": np.where(random().random(300) < 0.3, np.nan, np.round(random().normal(0, 3, 300), 1)),
    "all missing": np.full(40, np.nan),
    "changes": np.r_[np.round(random().normal(20, 3, 100), 2), np.round(random().normal(20, 3, 400))],
    "15 digits": np.round(random().normal(12, 1, 300), 14),
}


@pytest.mark.parametrize("name", LOGS)
def test_any_chunking_gives_the_same(name):
    values = np.asarray(LOGS[name], float)
    whole = Grid()
    widths, bits = whole.cells(values)
    assert np.isfinite(widths).all() and (widths > 0).all()
    assert np.isfinite(bits).all() and (bits[~np.isnan(values)] > 0).all()
    for step in (1, 7, 16, 100):
        grid = Grid()
        parts = [grid.cells(values[at : at + step]) for at in range(0, len(values), step)]
        assert np.concatenate([part[0] for part in parts]).tolist() == widths.tolist()
        assert np.concatenate([part[1] for part in parts]).tolist() == bits.tolist()
        assert (grid.multiple, grid.exponent, grid.rows, grid.finer) == (
            whole.multiple,
            whole.exponent,
            whole.rows,
            whole.finer,
        )


@pytest.mark.parametrize("name", LOGS)
def test_state_out_and_in(name):
    values = np.asarray(LOGS[name], float)
    first = Grid()
    first.cells(values[:37])
    second = Grid()
    second.restore(first.state())
    for one, other in zip(first.cells(values[37:]), second.cells(values[37:]), strict=True):
        assert one.tolist() == other.tolist()
    assert first.state()["few"] is not first.few


@settings(deadline=None, max_examples=200)
@given(st.lists(st.floats() | st.floats(-100, 100).map(lambda value: round(value, 2)), max_size=40), st.integers(1, 40))
@example([1e300, 5e-324, 1.7e308, -1e-300], 1)
def test_any_numbers(values, place):
    values = np.where(np.isinf(values), np.nan, values)
    widths, bits = Grid().cells(values)
    grid = Grid()
    first, second = grid.cells(values[:place]), grid.cells(values[place:])
    assert np.concatenate([first[0], second[0]]).tolist() == widths.tolist()
    assert np.concatenate([first[1], second[1]]).tolist() == bits.tolist()
    assert (widths > 0).all() and np.isfinite(bits).all()
    assert all(width >= ulp(value) for width, value in zip(widths, values, strict=True) if not np.isnan(value))


@pytest.mark.parametrize(
    ("values", "resolution"),
    [
        ([], 1),
        ([np.nan], 1),
        ([12.50], 0.1),
        ([0.25, 3], 0.01),
        ([-0.001], 0.001),
        ([1e300, 200], 1),
        ([1e-300], 1e-300),
        ([0.1 * 3], 0.1),
        ([12.658579999999999], 1e-5),
        ([1.234567890123456], 1e-15),
        ([100, 200, 300] * 5, 1),
        ([100, 200, 300] * 6, 100),
        ([0.5, 2, 7.5, 10] * 4, 0.5),
        ([2, 6, 8, 0] * 4, 2),
        ([75, 50, 100, 25] * 4, 25),
        ([1e18, 3e18, 4e18] * 6, 1),
        ([7.3] * 100, 0.1),
        ([0, 5] * 50, 1),
        (np.arange(100) * 0.1, 0.1),
        (np.arange(100) * 0.15, 0.15),
    ],
)
def test_the_resolution_found(values, resolution):
    assert after(values).resolution == resolution


def test_a_row_needs_a_finer_grid_and_pays():
    widths, bits = Grid().cells(np.array([3.0, 4.0, 4.5, 4.0, np.nan, 4.1, 4.25]))
    assert widths.tolist() == [1, 1, 0.1, 0.1, 0.1, 0.1, 0.01]
    expected = [
        1 / 2,
        1 - 1 / 4,
        1 / 6 / 2,  # tenths are half of what is finer
        1 - 3 / 8,
        1,
        1 - 3 / 12,
        3 / 14 / 2,
    ]
    assert bits == pytest.approx([-log2(chance) for chance in expected], abs=1e-12)


def test_a_finer_grid_is_the_common_divisor():
    grid = after([75, 50, 100, 25] * 4)
    widths, bits = grid.cells(np.array([100.0, 60.0, 20.0, 7.5]))
    assert widths.tolist() == [25, 1, 5, 0.1]
    assert grid.resolution == 0.1
    assert bits[1] == pytest.approx(log2(18 / 0.5) + 1)
    assert bits[3] == pytest.approx(log2(20 / 1.5) + log2(6))


def test_the_last_half_decides():
    hundredths = np.round(random().normal(20, 3, 40), 2)
    whole = np.round(random().normal(20, 3, 200))
    widths, _ = Grid().cells(np.r_[hundredths, whole])
    assert (widths[1:128] == 0.01).all()
    assert (widths[128:] == 1).all()
    still = np.full(200, 20.0)  # stands for no steps at all
    widths, _ = Grid().cells(np.r_[hundredths, still])
    assert (widths[1:] == 0.01).all()


def test_rows_with_full_digits_are_four_spacings_of_floats_wide():
    values = random().normal(0, 1, 1000)
    widths, _ = Grid().cells(values)
    assert (widths[100:] >= np.spacing(np.abs(values[100:]))).all()
    assert (widths[100:] <= np.maximum(4 * np.spacing(np.abs(values[100:])), 1e-17)).all()


@pytest.mark.parametrize(
    "before",
    [[], [7], [0.5], [0.25, 7, 3.5], [0.3, 0.6, 0, 0.9] * 5, [2, 6, 8, 0] * 4, [12, 18, 6, 0, 24] * 4, [0.25] * 3],
)
def test_masses_add_to_no_more_than_one(before):
    """Of all rows with up to three decimals under a flat law; what is missing belongs to more decimals."""
    grid = after(before)
    thousandths = np.arange(72_000)
    total = 0.0
    # Rows with the same factors among those of the grids here are charged alike.
    _, examples, counts = np.unique(np.gcd(thousandths, 72_000), return_index=True, return_counts=True)
    for row, count in zip(thousandths[examples] / 1000, counts, strict=True):
        widths, bits = copy.deepcopy(grid).cells(np.array([row]))
        total += count * widths[0] * 2 ** -bits[0] / 72
    assert 0.7 < total <= 1 + 1e-12


def test_a_resolution_given():
    values = np.array([0.3, 0.31, -0.26, np.nan, 1e300, 7.0])
    grid = Grid(0.1)
    widths, bits = grid.cells(values)
    assert widths.tolist() == [0.1, 0.1, 0.1, 0.1, 4 * np.spacing(1e300), 0.1]
    assert not bits.any()
    assert grid.resolution == 0.1
    np.testing.assert_array_equal(grid.snap(values), [0.3, 0.3, -0.3, np.nan, 1e300, 7])
    assert Grid(25).snap(np.array([30.0, 40.0])).tolist() == [25, 50]
    assert Grid(1 / 3).snap(np.array([0.3, 0.7])) == pytest.approx([1 / 3, 2 / 3], abs=1e-15)
    assert Grid(1e-300).snap(np.array([1e300])).tolist() == [1e300]
    assert Grid().snap(values) is values


@pytest.mark.parametrize("resolution", [0, -1, float("nan"), float("inf"), 1e-320])
def test_a_resolution_that_is_none(resolution):
    with pytest.raises(OptionError, match=r"a resolution of .*; it must be positive"):
        Grid(resolution)
