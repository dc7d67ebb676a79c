"""The one Wald test: by hand, redundant and contradicting restrictions, laws and refusals."""

import numpy as np
import pytest
from scipy import stats

from carrylab.errors import InferenceError
from carrylab.regression.wald import restrictions, wald

RNG = np.random.default_rng(0)
SERIES = RNG.normal(size=(200, 3)) / 200


def test_one_restriction_is_the_square_of_t() -> None:
    found = wald(SERIES, np.array([0.1, 0, 0]), restrictions(["a is zero"], np.eye(3)[:1]), kind="date")
    t = 0.1 / np.sqrt((SERIES[:, 0] ** 2).sum())
    assert found.statistic == pytest.approx(t**2)
    assert found.p_value == pytest.approx(2 * stats.norm.sf(t))
    assert found.law == "chi-squared(1)"


def test_two_restrictions_by_hand() -> None:
    # V = [[2, 0], [0, 8]], g = (1, 2): W = 1/2 + 4/8 = 1; chi-squared(2) tail exp(-1/2)
    series = np.array([[1.0, 0], [1, 0], [0, 2], [0, 2]])
    found = wald(series, np.array([1.0, 2.0]), restrictions(["a", "b"], np.eye(2)), kind="date")
    assert found.statistic == pytest.approx(1.0)
    assert found.p_value == pytest.approx(np.exp(-0.5))


def test_cosines_are_f() -> None:
    found = wald(SERIES, np.array([0.1, 0.1, 0]), restrictions(["a", "b"], np.eye(3)[:2]), kind="cosine", lags=11)
    nu = 13  # .4 x 200^(2/3) = 13.7; the cap 200/12 = 16 does not bind
    assert (found.cosines, found.df, found.df_denominator) == (nu, 2, nu - 1)
    plain = wald(SERIES, np.array([0.1, 0.1, 0]), restrictions(["a", "b"], np.eye(3)[:2]), kind="cosine", cosines=nu)
    assert found.p_value == pytest.approx(stats.f.sf(plain.statistic, 2, nu - 1))


def test_two_legs_of_a_parity_are_one_fact() -> None:
    pair = np.column_stack([SERIES[:, 0], -SERIES[:, 0]])
    names = ["nothing paid", "all comes true"]
    found = wald(pair, np.array([0.3, 0.7]), restrictions(names, np.eye(2), np.array([0, 1])), kind="date")
    assert (found.kept, found.dropped, found.df) == (("nothing paid",), ("all comes true",), 1)
    with pytest.raises(InferenceError, match="'all comes true' contradicts"):
        wald(pair, np.array([0.3, 0.7]), restrictions(names, np.eye(2), np.array([0, 0.5])), kind="date")


def test_scale_of_a_restriction_does_not_matter() -> None:
    at = np.array([0.1, 0.05, 0])
    small = wald(SERIES, at, restrictions(["a", "b"], np.diag([1e-9, 1e6, 1])[:2]), kind="bartlett", lags=3)
    plain = wald(SERIES, at, restrictions(["a", "b"], np.eye(3)[:2]), kind="bartlett", lags=3)
    assert small.statistic == pytest.approx(plain.statistic)
    assert small.lags == 3


def test_restrictions_beyond_the_degrees_of_freedom_are_refused() -> None:
    with pytest.raises(InferenceError, match="3 restrictions exceed the 2 degrees of freedom of the cosine covariance"):
        wald(SERIES, np.ones(3), restrictions(list("abc"), np.eye(3)), kind="cosine", lags=99)
    with pytest.raises(InferenceError, match="3 restrictions exceed the 2 degrees of freedom of the date covariance"):
        wald(SERIES[:3], np.ones(3), restrictions(list("abc"), np.eye(3)), kind="date")
    with pytest.raises(InferenceError, match="has no sampling variation"):
        wald(np.zeros((5, 1)), np.ones(1), restrictions(["a"], np.eye(1), np.ones(1)), kind="date")


def test_size_under_independence() -> None:
    rng = np.random.default_rng(1)
    rejected = 0
    for _ in range(400):
        draws = rng.normal(size=(150, 2)) / 150
        rejected += wald(draws, draws.sum(axis=0), restrictions(["a", "b"], np.eye(2)), kind="cosine").p_value < 0.05
    assert 0.025 < rejected / 400 < 0.085
