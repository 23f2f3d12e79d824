"""The flow of the Nile at Aswan, 1871-1970: lower since 1899 (Cobb 1978, Biometrika 65, from memory), when the dam was
begun. The series: statsmodels.datasets.nile.
"""

from __future__ import annotations

import statsmodels.api as sm

import seqmix

NILE = sm.datasets.nile.load_pandas().data


def test_nile_shifts_once_and_is_known_by_1905():
    found = seqmix.shifts(NILE["volume"].tolist())
    assert len(found.shifts) == 1
    shift = found.shifts[0]
    years = NILE["year"].astype(int).tolist()
    assert 1898 <= years[shift.row - 1] <= 1900
    assert years[shift.known_row - 1] <= 1905
    assert shift.odds >= 100
    assert shift.level_before is not None
    assert shift.level_after is not None
    assert shift.level_before - shift.level_after > 150
