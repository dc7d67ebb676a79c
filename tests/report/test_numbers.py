"""Numbers as text."""

import math

import pytest

from carrylab.report import numbers


@pytest.mark.parametrize(
    ("value", "digits", "text"),
    [
        (1.2, 2, "1.20"),
        (-0.001, 2, "0.00"),
        (-0.005, 2, "-0.01"),
        (0.5, 0, "0"),
        (math.nan, 2, "-"),
        (math.inf, 2, "inf"),
    ],
)
def test_fixed(value: float, digits: int, text: str) -> None:
    assert numbers.fixed(value, digits) == text


def test_errors_intervals_and_counts() -> None:
    assert numbers.in_parentheses(0.2) == "(0.20)"
    assert numbers.in_parentheses(math.nan) == ""
    assert numbers.in_brackets(-1.0, 2.0) == "[-1.00, 2.00]"
    assert numbers.in_brackets(-math.inf, math.inf) == "[-inf, inf]"
    assert numbers.count(12736.0) == "12,736"


@pytest.mark.parametrize(("p", "text"), [(0.04, "0.040"), (0.0004, "<0.001"), (1.0, "1.000"), (math.nan, "-")])
def test_p_values(p: float, text: str) -> None:
    assert numbers.p_value(p) == text


def test_digits_follow_the_error() -> None:
    assert [numbers.digits_of(error) for error in (0.2, 0.03, 0.01, 0.004, 0.001, 0.0005)] == [2, 2, 2, 4, 4, 5]
    assert [numbers.digits_of(error) for error in (0.0, math.nan, math.inf)] == [2, 2, 2]
