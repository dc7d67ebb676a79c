"""Rates of every quotation as log rates, and day counts, against numbers computed by hand."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from carrylab.data.units import TIMES_A_YEAR, accrual, log_rate, to_decimal
from carrylab.options import Compounding, DayCount

ALL: tuple[Compounding, ...] = (
    "continuous",
    "annual",
    "semi-annual",
    "quarterly",
    "monthly",
    "simple",
    "discount",
    "discount factor",
)


def one(rate: float, tau: float, years: float, compounding: Compounding) -> float:
    return float(log_rate(np.array([rate]), tau, years, compounding)[0])


def count(start: str, end: str, day_count: DayCount) -> float:
    days = np.array([start, end], dtype="datetime64[D]")
    return float(accrual(days[:1], days[1:], day_count)[0])


@pytest.mark.parametrize(
    ("rate", "compounding", "expected"),
    [
        # by hand: ln 1.05; 2 ln 1.025; 4 ln 1.0125; 12 ln(1 + .05/12); ln .9925
        (0.05, "continuous", 0.05),
        (0.05, "annual", 0.048790164),
        (0.05, "semi-annual", 0.049385225),
        (0.05, "quarterly", 0.049690080),
        (0.05, "monthly", 0.049896122),
        (-0.0075, "annual", -0.007528266),
        (0.0, "semi-annual", 0.0),
    ],
)
def test_compounded_rates(rate: float, compounding: Compounding, expected: float) -> None:
    assert one(rate, 1.0, 1.0, compounding) == pytest.approx(expected, abs=5e-10)
    assert one(rate, 1.0, 10.0, compounding) == pytest.approx(expected, abs=5e-10)


def test_a_simple_rate_has_its_own_accrual_and_the_study_its_own_time() -> None:
    # 5% Act/360 over 91 days: ln(1 + .05 x 91/360) = ln 1.01263889 = .01255968; over 91/365 years .05037676
    assert one(0.05, 91 / 360, 91 / 365, "simple") == pytest.approx(0.0503768, abs=5e-8)
    # on a time axis where three months are a quarter: .01255968 x 4
    assert one(0.05, 91 / 360, 0.25, "simple") == pytest.approx(0.0502387, abs=5e-8)


def test_a_bank_discount_is_taken_off_the_price() -> None:
    # P = 1 - .05 x 91/360 = .98736111; -ln P x 365/91 = .01271943 x 4.01098901
    assert one(0.05, 91 / 360, 91 / 365, "discount") == pytest.approx(0.0510175, abs=5e-8)


def test_a_discount_factor_above_one_is_a_negative_rate() -> None:
    assert one(0.9, 0.0, 2.0, "discount factor") == pytest.approx(0.05268026, abs=5e-9)  # -ln(.9)/2
    assert one(1.01, 0.0, 2.0, "discount factor") == pytest.approx(-0.00497517, abs=5e-9)


@pytest.mark.parametrize(
    ("rate", "compounding"),
    [
        (-1.0, "annual"),
        (-2.0, "semi-annual"),
        (-4.0, "quarterly"),
        (-12.0, "monthly"),
        (-4.0, "simple"),
        (4.0, "discount"),
        (0.0, "discount factor"),
        (-0.1, "discount factor"),
    ],
)
def test_no_growth_factor_above_zero_is_no_rate(rate: float, compounding: Compounding) -> None:
    assert np.isnan(one(rate, 0.25, 0.25, compounding))


@pytest.mark.parametrize("compounding", ALL)
def test_a_hole_stays_a_hole_and_shapes_are_kept(compounding: Compounding) -> None:
    rates = np.array([[0.02, np.nan], [0.5, 0.9]])
    found = log_rate(rates, np.full((2, 2), 0.5), np.full((2, 2), 0.5), compounding)
    assert np.array_equal(np.isnan(found), [[False, True], [False, False]])


@given(st.floats(-0.2, 0.5), st.sampled_from(ALL), st.integers(1, 400))
def test_the_log_rate_grows_to_what_the_quotation_grows_to(rate: float, compounding: Compounding, days: int) -> None:
    tau, years = days / 360, days / 365
    growth = {
        "continuous": np.exp(rate * years),
        "simple": 1 + rate * tau,
        "discount": 1 / (1 - rate * tau),
        "discount factor": 1 / (1 + rate),
    }
    m = TIMES_A_YEAR.get(compounding, 1)
    expected = growth.get(compounding, (1 + rate / m) ** (m * years))
    given_rate = 1 + rate if compounding == "discount factor" else rate
    assert np.exp(years * one(given_rate, tau, years, compounding)) == pytest.approx(expected, rel=1e-12)


def test_units() -> None:
    assert to_decimal(np.array([4.25]), "percent")[0] == pytest.approx(0.0425, abs=1e-17)
    assert to_decimal(np.array([425.0]), "basis points")[0] == pytest.approx(0.0425, abs=1e-17)
    assert to_decimal(np.array([0.0425]), "decimal")[0] == 0.0425


@pytest.mark.parametrize(
    ("start", "end", "bond", "european"),
    [
        # Days by 2006 ISDA Definitions 4.16 (f) and (g), computed by hand from the text of the rule.
        ("2007-01-15", "2007-01-30", 15, 15),
        ("2007-01-15", "2007-02-15", 30, 30),
        ("2007-01-15", "2007-01-31", 16, 15),
        ("2007-01-30", "2007-01-31", 0, 0),
        ("2007-01-31", "2007-02-28", 28, 28),
        ("2007-02-28", "2007-03-31", 33, 32),
        ("2007-09-30", "2008-03-31", 180, 180),
        ("2006-08-31", "2007-02-28", 178, 178),
        ("2007-02-26", "2008-02-29", 363, 363),
        ("2007-12-31", "2008-12-31", 360, 360),
    ],
)
def test_thirty_days_a_month(start: str, end: str, bond: int, european: int) -> None:
    assert count(start, end, "30/360") == pytest.approx(bond / 360, abs=1e-15)
    assert count(start, end, "30e/360") == pytest.approx(european / 360, abs=1e-15)


def test_actual_days_over_a_fixed_year() -> None:
    # 2024-01-31 to 2024-07-31 is 182 days: 29 + 31 + 30 + 31 + 30 + 31
    assert count("2024-01-31", "2024-07-31", "act/360") == 182 / 360
    assert count("2024-01-31", "2024-07-31", "act/365f") == 182 / 365
    assert count("2024-01-01", "2025-01-01", "act/365f") == 366 / 365  # also in a leap year


@pytest.mark.parametrize(
    ("start", "end", "expected"),
    [
        # ISDA, "EMU and Market Conventions: Recent Developments" (1998), the ISDA method in its examples; from memory.
        ("2003-11-01", "2004-05-01", 61 / 365 + 121 / 366),
        ("1999-02-01", "1999-07-01", 150 / 365),
        ("1999-07-01", "2000-07-01", 184 / 365 + 182 / 366),
        ("2002-08-15", "2003-07-15", 334 / 365),
        ("1999-07-30", "2000-01-30", 155 / 365 + 29 / 366),
        ("2000-01-30", "2000-06-30", 152 / 366),
        ("1999-12-31", "2002-01-01", 1 / 365 + 1 + 1),
    ],
)
def test_actual_days_in_leap_years_over_366(start: str, end: str, expected: float) -> None:
    assert count(start, end, "act/act") == pytest.approx(expected, abs=1e-12)
