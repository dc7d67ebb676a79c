"""What holds for every parity: its legs add up, holes stay holes, nothing of the future is known, all shapes agree."""

import dataclasses

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from markets_built import CASES, Case, built, changed_after, random_market, steps_summed, total

from carrylab.data.checks import Check
from carrylab.markets import MARKETS
from carrylab.markets.parity import identity
from carrylab.markets.proof import identity_check
from carrylab.options import PARITIES

every_case = pytest.mark.parametrize("case", CASES, ids=str)
CUT = 30


def test_the_cases_are_all_parities_of_all_markets() -> None:
    assert {(case.kind, case.parity) for case in CASES} == {(kind, name) for kind in MARKETS for name in PARITIES[kind]}


@every_case
@settings(max_examples=10, deadline=None)
@given(seed=st.integers(0, 2**32 - 1), holes=st.sampled_from([0.0, 0.1]), scale=st.floats(1e-4, 0.3))
def test_the_legs_add_up_to_the_signal_on_any_data(case: Case, seed: int, holes: float, scale: float) -> None:
    for parity in built(random_market(case, seed, holes=holes, scale=scale)):
        gaps = np.abs(parity.signal - total(parity))
        # A share of a tenth of holes may leave no row whole over twenty-four months.
        assert holes or np.isfinite(gaps).sum() >= 12
        assert np.nanmax(gaps, initial=0.0) < 1e-12


@every_case
def test_shapes_names_and_the_rows_of_the_legs(case: Case) -> None:
    for parity in built(random_market(case, 1)):
        T, N = parity.signal.shape
        assert (len(parity.calendar), len(parity.entities)) == (T, N)
        assert len({entity.name for entity in parity.entities}) == N
        assert parity.name == case.parity
        assert [leg.role for leg in parity.legs].count("return") == 1
        past = parity.window.ends < 0
        assert past.any()
        for leg in parity.legs:
            assert leg.values.shape == (T, N)
            assert np.isnan(leg.values[past]).all() or leg.name.startswith("riskless rate")
            assert leg.one_step is None or leg.one_step.shape[:2] == (T, N)


@every_case
def test_numeric_nulls_stand_in_two_leg_parities_only_and_add_up_to_one(case: Case) -> None:
    for parity in built(random_market(case, 1)):
        nulls = [leg.null for leg in parity.legs]
        if len(parity.legs) == 2:
            assert sum(leg.weight * leg.null for leg in parity.legs) == 1.0
        else:
            assert [null for null in nulls if null is not None] == [0.0]


@every_case
def test_nothing_after_a_date_moves_its_signal_or_a_leg_that_has_ended(case: Case) -> None:
    data = random_market(case, 2)
    for before, after in zip(built(data), built(changed_after(data, CUT, 1.3)), strict=True):
        np.testing.assert_array_equal(before.signal[: CUT + 1], after.signal[: CUT + 1])
        ended = (before.window.ends >= 0) & (before.window.ends <= CUT)
        assert case.kind == "columns" or ended.sum() > 5
        for old, new in zip(before.legs, after.legs, strict=True):
            np.testing.assert_array_equal(old.values[ended], new.values[ended])
            if old.one_step is not None and old.one_step.ndim == 2:
                np.testing.assert_array_equal(old.one_step[: CUT + 1], new.one_step[: CUT + 1])
            elif old.one_step is not None:
                known = np.arange(len(before.calendar))[:, None] + np.arange(1, old.one_step.shape[2] + 1) <= CUT
                there = known[:, None, :] & np.ones_like(old.one_step, dtype=bool)
                np.testing.assert_array_equal(old.one_step[there], new.one_step[there])


@every_case
def test_what_comes_after_a_date_does_move_legs_that_have_not_ended(case: Case) -> None:
    data = random_market(case, 2)
    for before, after in zip(built(data), built(changed_after(data, CUT, 1.3)), strict=True):
        open_rows = before.window.ends > CUT
        pairs = zip(before.legs, after.legs, strict=True)
        assert any((old.values[open_rows] != new.values[open_rows]).any() for old, new in pairs)


@pytest.mark.parametrize("case", [case for case in CASES if case.kind == "bonds"], ids=str)
def test_one_period_bond_returns_telescope_exactly(case: Case) -> None:
    """They add up to leg - null x signal of each leg, so nothing but the null is assumed."""
    for parity in built(random_market(case, 3)):
        for leg in parity.legs:
            summed = steps_summed(parity, leg)
            there = np.isfinite(leg.values)
            np.testing.assert_allclose(summed[there], (leg.values - leg.null * parity.signal)[there], atol=1e-14)


def test_the_proof_notes_the_largest_gap() -> None:
    (parity,) = built(random_market(CASES[0], 4))
    proof = identity(parity)
    rows = 2 * 2 * (len(parity.calendar) - 3)
    assert proof.rows == rows
    assert proof.gap < 1e-14
    note = identity_check(parity, "yields.csv")
    assert (note.id, note.level, note.file) == ("I1", "note", "yields.csv")
    assert note.seen == f"forward-spot, 3m: largest gap {proof.gap:.1e} over {rows} rows"


def test_a_broken_identity_is_an_error_that_says_where() -> None:
    (parity,) = built(random_market(CASES[0], 4))
    values = parity.legs[1].values.copy()
    values[7, 3] += 0.001
    broken = dataclasses.replace(parity, legs=(parity.legs[0], dataclasses.replace(parity.legs[1], values=values)))
    assert identity_check(broken, "yields.csv") == Check(
        id="I1",
        level="error",
        file="yields.csv",
        series="EB 12m",
        first="2000-08",
        last="2000-08",
        seen="forward-spot, 3m: |signal - sum of weight x leg| is 0.001, above 1e-10",
        advice="check the legs' weights, units and dates, or set tolerance",
    )


def test_an_approximation_beyond_its_bound_is_an_error() -> None:
    case = next(case for case in CASES if case.parity == "dividend-price")
    parity = built(random_market(case, 5))[0]
    wide = identity_check(parity, "prices.csv")
    assert wide.level == "note"
    assert ", approximation up to " in wide.seen
    tight = identity_check(dataclasses.replace(parity, approximation_bound=1e-6), "prices.csv")
    assert tight.level == "error"
    assert tight.seen.startswith("dividend-price, 12m: the log-linear approximation is off by up to ")
    assert tight.seen.endswith(", above 1e-06")


def test_legs_without_weights_claim_no_identity() -> None:
    (parity,) = built(random_market(CASES[0], 4))
    free = dataclasses.replace(parity, legs=tuple(dataclasses.replace(leg, weight=None) for leg in parity.legs))
    assert identity(free) is None
    assert identity_check(free, "yields.csv").advice == "no identity is claimed"


def test_a_parity_without_a_whole_row_has_no_gap() -> None:
    (parity,) = built(random_market(CASES[0], 4))
    empty = dataclasses.replace(parity, signal=np.full_like(parity.signal, np.nan))
    assert identity(empty).rows == 0
