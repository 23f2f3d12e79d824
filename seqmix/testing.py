"""The contract of a model, to be run by who writes one: `check_model(MyModel)`.

Each check raises AssertionError that says what broke. The library's own models pass the same checks.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from functools import partial
from itertools import pairwise
from typing import Any

import numpy as np

from seqmix.models.protocol import Ask, Context
from seqmix.series.rows import Rows

HOUR = 3_600_000_000
CONTEXT = Context((24, 168), HOUR, True)
"""Of the logs of numbers that models are checked on."""

Make = Callable[[], Any]


def check_model(model: Any, kinds: Sequence[str] | None = None, rows: int = 1000) -> None:
    """Run the whole contract over a model's class.

    model: called with the alphabet (0, or 256 for bytes), or with a `Context` for numbers; kinds: to check, None for
    all in model.kinds; rows: of the longest log. A model that sleeps all the time passes: see that it does not.
    """
    for kind in kinds or model.kinds:
        checks = NUMBER_CHECKS if kind == "numbers" else STATES_CHECKS
        for log in number_logs(rows) if kind == "numbers" else [states_log(kind, rows)]:
            for check in checks:
                check(made(model, kind), log)


def made(model: Callable[..., Any], kind: str) -> Make:
    """How to make a blank model for a kind of log."""
    return partial(model, CONTEXT if kind == "numbers" else 256 if kind == "bytes" else 0)


# ---- logs ----------------------------------------------------------------------------------------------------------


def states_log(kind: str, rows: int, seed: int = 7) -> Rows:
    """A log of states or bytes with habits, noise, missing rows and, for states, new ones until late."""
    rng = np.random.default_rng(seed)
    codes = np.zeros(rows, dtype=np.int64)
    for t in range(1, rows):
        codes[t] = rng.integers(0, 14) if rng.random() < 0.15 else (codes[t - 1] + (t % 5 == 0)) % 9
    missing = rng.random(rows) < 0.02
    if kind == "bytes":
        codes = np.array([32, 97, 98, 65, 46, 10, 200, 0, 255, 99, 100, 101, 48, 49])[codes]
    else:
        _, first = np.unique(codes[~missing], return_index=True)
        rank = np.zeros(14, dtype=np.int64)
        rank[codes[~missing][np.sort(first)]] = np.arange(len(first))
        codes = rank[codes]
    codes[missing] = -1
    times = 1_700_000_000_000_000 + np.arange(rows, dtype=np.int64) * HOUR // 60 if kind == "states" else None
    return Rows(codes.astype(np.int32), times, 0)


def number_rows(values: np.ndarray, width: float) -> Rows:
    """Hourly rows on a grid of `width`; NaN = missing."""
    n = len(values)
    times = 1_700_000_000_000_000 // HOUR * HOUR + np.arange(n, dtype=np.int64) * HOUR
    codes = np.where(np.isnan(values), -1, 0).astype(np.int32)
    return Rows(codes, times, 0, values.astype(np.float64), np.full(n, width))


def waves(rows: int) -> Rows:
    """A daily wave with noise, missing rows, a jump and one negative value."""
    rng = np.random.default_rng(3)
    day = 6 * np.sin(np.arange(rows) * 2 * np.pi / 24)
    values = 20 + day + rng.normal(size=rows).cumsum() * 0.1 + rng.normal(size=rows)
    values[rows // 2 :] += 4
    values = np.round(values, 1)
    values[[0, 30, 31, 32, rows // 3]] = np.nan
    values[rows // 4] = -2.5
    return number_rows(values, 0.1)


def small_counts(rows: int) -> Rows:
    rng = np.random.default_rng(4)
    return number_rows(rng.poisson(3 + 2 * np.sin(np.arange(rows) * 2 * np.pi / 24) ** 2).astype(float), 1.0)


def few_levels(rows: int) -> Rows:
    rng = np.random.default_rng(5)
    return number_rows(np.array([10.0, 12.5, 15.0])[(np.arange(rows) // 5 + (rng.random(rows) < 0.1)) % 3], 2.5)


def squares(rows: int) -> Rows:
    return number_rows(np.arange(1.0, rows + 1) ** 2, 1.0)


NUMBER_LOGS: dict[str, Callable[[int], Rows]] = {
    "waves": waves, "counts": small_counts, "levels": few_levels, "squares": squares
}  # fmt: skip


def number_logs(rows: int) -> list[Rows]:
    return [log(rows) for log in NUMBER_LOGS.values()]


# ---- checks of every kind ------------------------------------------------------------------------------------------


def _same(found: np.ndarray, wanted: np.ndarray, what: str) -> None:
    equal = (found == wanted) | (np.isnan(found) & np.isnan(wanted))
    if not equal.all():
        t = int(np.argmin(equal))
        raise AssertionError(f"{what}: row {t} costs {found[t]!r} bits, not {wanted[t]!r}")


def has_what_a_model_has(make: Make, rows: Rows) -> None:
    one = make()
    for name in ("name", "kinds", "prior_cost", "summary", "source"):
        assert getattr(one, name), f"a model has '{name}'"
    assert isinstance(one.setting(), str), "setting() is text"


def any_chunking_gives_equal_bits(make: Make, rows: Rows) -> None:
    n = len(rows)
    whole = make().absorb(rows)
    assert whole.shape == (n,), "one loss a row"
    for cuts in ([1], sorted({15, 16, 17, 64, n // 2} & set(range(1, n))), list(range(7, n, 7))):
        one = make()
        pieces = [one.absorb(rows[a:b]) for a, b in pairwise([0, *cuts, n])]
        _same(np.concatenate(pieces), whole, "cut into other chunks")


def state_out_and_in_gives_equal_bits(make: Make, rows: Rows) -> None:
    for cut in (1, 5, 2 * len(rows) // 3):
        first, second = make(), make()
        first.absorb(rows[:cut])
        state = first.state()
        odd = [name for name, value in state.items() if not isinstance(value, np.ndarray | int | float | str | None)]
        assert not odd, f"no array or plain value in the state: {odd}"
        rest = first.absorb(rows[cut:])
        second.restore(state)
        _same(second.absorb(rows[cut:]), rest, "gone on from a state")


# ---- checks of states and bytes ------------------------------------------------------------------------------------


def _time(rows: Rows, t: int) -> int | None:
    return None if rows.times is None else int(rows.times[t])


def _ahead(rows: Rows, steps: int) -> list[int | None] | None:
    if rows.times is None:
        return None
    cadence = int(rows.times[-1] - rows.times[-2])
    return [int(rows.times[-1]) + (i + 1) * cadence for i in range(steps)]


def states_law_adds_up_and_is_charged(make: Make, rows: Rows) -> None:
    one = make()
    for t in range(min(len(rows), 400)):
        row, code = rows[t : t + 1], int(rows.codes[t])
        law = one.predict(_time(rows, t))
        bits = one.absorb(row)[0]
        if law is None:
            assert np.isnan(bits) or code < 0, f"row {t} was not predicted, so its loss is NaN"
            continue
        assert abs(law.masses.sum() + law.unseen - 1) < 1e-12, f"the law of row {t} does not add up to 1"
        assert (law.masses > 0).all(), f"the law of row {t} has no mass for a state that was seen"
        mass = 1.0 if code < 0 else law.masses[code] if code < len(law.masses) else law.unseen
        assert abs(bits + np.log2(mass)) < 1e-9, f"row {t} costs {bits} bits; its law says {-np.log2(mass)}"


def laws_asked_for_are_those_predicted(make: Make, rows: Rows) -> None:
    n = len(rows)
    states = max(len(getattr(make().predict(_time(rows, 0)), "masses", ())), int(rows.codes.max()) + 1)
    at = sorted({0, 1, 5, n // 6, n // 2, n - 2, n - 1})
    ask = Ask.of(n, at, states)
    whole, plain, stepwise = make(), make(), make()
    _same(whole.absorb(rows, ask), plain.absorb(rows), "asked for laws")
    done = 0
    for line, t in enumerate(at):
        stepwise.absorb(rows[done:t])
        done = t
        law = stepwise.predict(_time(rows, t))
        if law is None:
            continue
        known = len(law.masses)
        np.testing.assert_allclose(ask.laws[line, :known], law.masses, rtol=1e-9, atol=1e-15)
        assert not ask.laws[line, known:-1].any(), "mass for a state that was not seen yet"
        assert abs(ask.laws[line, -1] - law.unseen) < 1e-12


def new_states_and_missing_rows_are_met(make: Make, rows: Rows) -> None:
    one = make()
    missing = one.absorb(Rows(np.full(5, -1, dtype=np.int32), np.arange(5, dtype=np.int64), 0))
    assert not np.nan_to_num(missing).any(), "a missing row costs nothing"
    new = one.absorb(Rows(np.arange(200, dtype=np.int32), np.arange(200, dtype=np.int64), 5))
    assert not np.isinf(new).any(), "a new state costs no infinite loss"


def first_step_of_walk_is_predict(make: Make, rows: Rows) -> None:
    one = make()
    one.absorb(rows)
    when = _ahead(rows, 4)
    law = one.predict(when[0] if when else None)
    if law is None:
        return
    walk = one.walk(4, 300, when)
    np.testing.assert_allclose(walk.laws.sum(axis=1), 1, atol=1e-12)
    np.testing.assert_allclose(walk.laws[0, :-1], law.masses, atol=1e-3)
    assert walk.exact >= 1


def walk_agrees_with_sampled_paths(make: Make, rows: Rows) -> None:
    one = make()
    one.absorb(rows)
    when = _ahead(rows, 3)
    if one.predict(when[0] if when else None) is None:
        return
    paths = one.sample(3, 4000, np.random.default_rng(5), when)
    assert paths.shape == (4000, 3), "(paths, steps)"
    walk = one.walk(3, 2000, when)
    for step in range(3):
        shares = np.bincount(paths[:, step], minlength=walk.laws.shape[1]) / len(paths)
        assert np.abs(shares - walk.laws[step]).max() < 0.05, f"paths and laws part at step {step + 1}"


def frozen_rows_teach_nothing(make: Make, rows: Rows) -> None:
    """Read twice after the same rows, a row costs the same: nothing but its place moved on."""
    cut = 2 * len(rows) // 3
    one, two = make(), make()
    one.absorb(rows[:cut])
    two.absorb(rows[:cut])
    law = one.predict(_time(rows, cut))
    bits = one.absorb(rows[cut : cut + 40], frozen=True)
    if law is None:
        return
    assert abs(bits[0] - two.absorb(rows[cut : cut + 1])[0]) < 1e-9, "frozen, a row costs what it would cost"


STATES_CHECKS: tuple[Callable[[Make, Rows], None], ...] = (
    has_what_a_model_has,
    states_law_adds_up_and_is_charged,
    laws_asked_for_are_those_predicted,
    any_chunking_gives_equal_bits,
    state_out_and_in_gives_equal_bits,
    new_states_and_missing_rows_are_met,
    first_step_of_walk_is_predict,
    walk_agrees_with_sampled_paths,
    frozen_rows_teach_nothing,
)


# ---- checks of numbers ---------------------------------------------------------------------------------------------


def number_law_adds_up_and_is_charged(make: Make, rows: Rows) -> None:
    one = make()
    assert rows.values is not None and rows.cells is not None
    last = min(len(rows), 220) - 1
    for t in range(last + 1):
        value, width = float(rows.values[t]), float(rows.cells[t])
        law = one.predict(_time(rows, t))
        bits = float(one.absorb(rows[t : t + 1])[0])
        if np.isnan(value):
            assert np.isnan(bits) or bits == 0, "a missing row costs nothing"
        elif law is None:
            assert np.isnan(bits), f"row {t} was not predicted, so its loss is NaN"
        else:
            assert abs(bits - law.bits(value, width)) < 1e-7, f"row {t} costs {bits}, its law {law.bits(value, width)}"
            assert abs(law.weights.sum() - 1) < 1e-9
            if t in (60, last):
                cells_add_up(law, width)


def laws_told_are_those_predicted(make: Make, rows: Rows) -> None:
    """Told for many rows at once, or one by one: the same to the last bit."""
    one, stepwise, n = make(), make(), len(rows)
    if not hasattr(one, "tell"):
        return
    assert rows.values is not None
    there = ~np.isnan(rows.values)
    bits = np.empty(n)
    laws: dict[int, Any] = {}
    for a, b in pairwise(sorted({0, n, *range(37, n, 37), *(np.flatnonzero(np.diff(there)) + 1).tolist()})):
        if there[a]:
            bits[a:b], told = one.tell(rows[a:b])
            laws.update(enumerate(told, a))
        else:
            bits[a:b] = one.absorb(rows[a:b])
    _same(bits, make().absorb(rows), "told")
    done = 0
    for t in sorted({0, 1, 2, 3, 8, 31, 63, 64, 127, 128, 200, 256, 257, n - 1} & set(laws)):
        stepwise.absorb(rows[done:t])
        done, law, wanted = t, laws[t], stepwise.predict(_time(rows, t))
        assert (law is None) == (wanted is None), f"row {t}: asleep for tell and for predict alike"
        for name in ("weights", "centres", "scales", "shapes", "logs") if law is not None else ():
            assert np.array_equal(getattr(law, name), getattr(wanted, name)), f"row {t}: other {name}"


def cells_add_up(law: Any, width: float) -> None:
    """Masses of 2,001 cells around the median, and of the tails beyond, are 1 together."""
    middle, far = round(law.median / width), 1000
    low, high = (middle - far - 0.5) * width, (middle + far + 0.5) * width
    cells = (middle + np.arange(-far, far + 1)) * width
    inside = sum(2.0 ** -law.bits(x, width) for x in cells.tolist())
    below, above = law.cdf(np.nextafter(low, -np.inf)), law.cdf(np.nextafter(high, -np.inf))
    assert abs(inside + below + 1 - above - 1) < 1e-9, f"masses add up to {inside + below + 1 - above}"


def number_steps_agree_with_sampled_paths(make: Make, rows: Rows) -> None:
    one = make()
    one.absorb(rows)
    times = _ahead(rows, 6)
    assert times is not None and rows.cells is not None
    law, laws = one.predict(times[0]), one.walk(6, 500, times)
    assert (laws is None) == (law is None), "asleep for predict and for walk alike"
    if laws is None or law is None:
        return
    near = max(0.02 * abs(law.median), 0.2)
    assert abs(laws[0].median - law.median) <= near, "the first step of walk is what predict says"
    paths = one.sample(6, 3000, np.random.default_rng(1), times)
    assert paths.shape == (3000, 6), "(paths, steps)"
    assert np.isfinite(paths).all(), "paths are finite"
    half = rows.cells[0] / 2
    for step in (0, 5):
        share = laws[step].cdf(np.quantile(paths[:, step], [0.25, 0.5, 0.75]) + half)
        assert (share > [0.1, 0.3, 0.5]).all(), f"paths lie below the law of step {step + 1}"
        share = laws[step].cdf(np.quantile(paths[:, step], [0.25, 0.5]) - half)
        assert (share < [0.45, 0.7]).all(), f"paths lie above the law of step {step + 1}"


NUMBER_CHECKS: tuple[Callable[[Make, Rows], None], ...] = (
    has_what_a_model_has,
    number_law_adds_up_and_is_charged,
    laws_told_are_those_predicted,
    any_chunking_gives_equal_bits,
    state_out_and_in_gives_equal_bits,
    number_steps_agree_with_sampled_paths,
)
