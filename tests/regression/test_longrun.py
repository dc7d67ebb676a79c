"""Every kernel by hand on a few dates, and one test over the table."""

import numpy as np
import pytest

from carrylab.errors import InferenceError
from carrylab.regression.longrun import KERNELS, cosine_count, longrun

S = np.array([[1.0], [2.0], [-1.0], [3.0]])  # G0 = 15, G1 = 2 - 2 - 3 = -3, G2 = -1 + 6 = 5, G3 = 3
HAND = {
    ("date", 0): 15.0,
    ("bartlett", 0): 15.0,
    ("bartlett", 1): 15.0 + 2 * 0.5 * -3.0,
    ("bartlett", 2): 15.0 + 2 * (2 / 3 * -3.0 + 1 / 3 * 5.0),
    ("rectangular", 1): 15.0 + 2 * -3.0,
    ("rectangular", 2): 15.0 + 2 * (-3.0 + 5.0),
}


@pytest.mark.parametrize(("kind", "lags"), HAND)
def test_by_hand(kind, lags) -> None:
    found = longrun(S, kind, lags=lags)
    assert found.covariance[0, 0] == pytest.approx(HAND[kind, lags])
    assert (found.kind, found.lags, found.problem, found.df) == (kind, lags, "", np.inf)


def test_lag_l_means_weights_one_less_l_over_l_plus_one() -> None:
    # A "truncation parameter m" elsewhere is lag m - 1 here: the weight at lag 3 of 3 is 1/4, not 0.
    assert KERNELS["bartlett"].weight(3, 3) == pytest.approx(0.25)


def test_a_zero_row_keeps_the_lag_count_on_the_calendar() -> None:
    holed = np.array([[1.0], [2.0], [0.0], [3.0]])  # without the hole 2 and 3 would be neighbours
    assert longrun(holed, "rectangular", lags=1).covariance[0, 0] == pytest.approx(14 + 2 * 2)


def test_two_series_by_hand() -> None:
    # s = (1, 0), (0, 1): G1 = s_2 s_1' = [[0, 0], [1, 0]]; Bartlett lag 1 adds half of G1 + G1'.
    found = longrun(np.eye(2), "bartlett", lags=1).covariance
    np.testing.assert_allclose(found, [[1, 0.5], [0.5, 1]])


def test_cosines_by_hand() -> None:
    # n = 3, j = 1: sqrt(2/3) (s_1 cos 30 + s_2 cos 90 + s_3 cos 150) = sqrt(2/3) sqrt(3)/2 (1 - 5) = -2 sqrt 2.
    inside = np.array([[1.0], [7.0], [5.0]])
    edges = np.vstack([np.zeros((4, 1)), inside, np.zeros((2, 1))])  # unused dates at both ends take no part
    found = longrun(edges, "cosine", cosines=1)
    assert found.covariance[0, 0] == pytest.approx(3 * 8.0)
    assert (found.df, found.cosines) == (1.0, 1)


def test_cosines_do_not_see_a_constant() -> None:
    shifted = longrun(S + 10, "cosine", cosines=3).covariance
    np.testing.assert_allclose(shifted, longrun(S, "cosine", cosines=3).covariance)


@pytest.mark.parametrize(
    ("n", "overlap", "count"), [(480, 0, 24), (480, 11, 24), (480, 59, 8), (60, 59, 2), (36, 0, 4)]
)
def test_number_of_cosines(n, overlap, count) -> None:
    assert cosine_count(n, overlap) == count


def test_too_many_cosines_is_one_line() -> None:
    with pytest.raises(InferenceError, match="4 cosines need more than 4 dates and there are 4"):
        longrun(S, "cosine", cosines=4)


def test_a_negative_rectangular_sum_says_so_and_takes_bartlett() -> None:
    falling = np.array([[1.0], [-1.0], [1.0], [-1.0]])  # G0 = 4, G1 = -3: 4 - 6 < 0; Bartlett 4 - 3 = 1
    found = longrun(falling, "rectangular", lags=1)
    assert found.covariance[0, 0] == pytest.approx(1.0)
    assert found.kind == "bartlett"
    assert "not positive definite; Bartlett with the same lag" in found.problem


def test_legs_that_add_up_are_not_taken_for_a_negative_variance() -> None:
    pair = np.hstack([S, -S])
    assert longrun(pair, "rectangular", lags=2).problem == ""


@pytest.mark.parametrize("kind", [*KERNELS, "cosine"])
def test_every_kind_is_symmetric_linear_and_right_for_white_noise(kind) -> None:
    rng = np.random.default_rng(0)
    draws = rng.normal(size=(20_000, 2)) * [1.0, 3.0]
    found = longrun(draws, kind, lags=3)
    np.testing.assert_allclose(found.covariance, found.covariance.T)
    mix = np.array([2.0, -1.0])
    np.testing.assert_allclose(longrun(draws @ mix[:, None], kind, lags=3).covariance, mix @ found.covariance @ mix)
    np.testing.assert_allclose(np.diag(found.covariance) / len(draws), [1, 9], rtol=0.2)
    assert kind == "cosine" or KERNELS[kind].source


def test_positive_kernels_are_positive_on_arbitrary_series() -> None:
    rng = np.random.default_rng(1)
    for kind in [name for name, kernel in KERNELS.items() if kernel.positive]:
        for _ in range(50):
            covariance = longrun(rng.standard_cauchy((12, 3)), kind, lags=7).covariance
            scale = np.sqrt(np.diag(covariance))
            assert np.linalg.eigvalsh(covariance / np.outer(scale, scale))[0] > -1e-12
