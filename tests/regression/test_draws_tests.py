"""What is made of draws, worked by hand."""

import numpy as np
import pytest

from carrylab.regression.draws_tests import (
    band,
    bias_corrected,
    equal_tailed,
    interval,
    joint,
    one_tailed,
    percentile_t,
    rarity,
    stepdown,
    uniform_reach,
    upper_band,
)

NINE = np.arange(1.0, 10.0)[:, None]


@pytest.mark.parametrize(("value", "p"), [(0.0, 0.2), (9.5, 0.2), (2.0, 0.6), (8.5, 0.4), (5.0, 1.0)])
def test_equal_tailed_p_by_hand(value, p):
    """Nine draws 1..9. At 2.0: two are as low, (1 + 2)/10, twice that; at 5.0 both tails hold 6/10, capped at one."""
    assert equal_tailed(np.array([value]), NINE)[0] == pytest.approx(p)


def test_one_tailed_p_by_hand():
    below, above = one_tailed(np.array([8.5]), NINE)
    assert (below[0], above[0]) == pytest.approx((0.9, 0.2))


def test_bias_is_taken_off_by_hand():
    """Drawn slopes of mean -.7 where the truth is -1 err by .3, so .5 becomes .2."""
    drawn = np.array([[-0.6], [-0.8]])
    assert bias_corrected(np.array([0.5]), drawn, np.array([-1.0]))[0] == pytest.approx(0.2)


def test_bands_by_hand():
    draws = np.arange(101.0)[:, None]
    assert np.allclose(band(draws, 0.9)[:, 0], [5.0, 95.0])
    assert upper_band(draws, 0.95)[0] == pytest.approx(95.0)


def test_interval_by_hand():
    """b = 2, t = 4 so s = .5; t* between -3 and 1 gives 2 - .5 x 1 to 2 + .5 x 3."""
    draws = np.linspace(-3.0, 1.0, 1001)[:, None]
    ends = interval(np.array([2.0]), np.array([4.0]), draws, null=np.array([0.0]), confidence=0.999999)
    assert np.allclose(ends[:, 0], [1.5, 3.5], atol=1e-4)


def test_percentile_t_by_hand():
    """b = 2 with error .5; t* between -1 and 3: 2 - .5 x 3 to 2 + .5 x 1, the longer side where t* is short."""
    ends = percentile_t(np.array([2.0]), np.array([0.5]), np.linspace(-1.0, 3.0, 1001)[:, None], 0.999999)
    assert np.allclose(ends[:, 0], [0.5, 2.5], atol=1e-4)


def test_the_uniform_reach_by_hand():
    """The larger of |t*| in each of four draws: 1, 2, 4, 3; three quarters of the way up they reach 3.25."""
    draws = np.array([[1.0, -0.5], [0.1, 2.0], [-4.0, 1.0], [3.0, -3.0]])
    assert uniform_reach(draws, 0.75) == pytest.approx(3.25)


def test_the_interval_and_the_p_value_agree_at_the_null():
    draws = np.random.default_rng(0).gumbel(size=(9_999, 3))
    statistic = np.array([-1.0, 2.0, 6.0])
    ends = interval(statistic / 10, statistic, draws, null=np.zeros(3))
    outside = (ends[0] > 0) | (ends[1] < 0)
    assert np.array_equal(outside, equal_tailed(statistic, draws) < 0.05)


THREE = np.array([3.0, 1.0, 2.0])
FIVE = np.array([[1.0, 1.5, 2.5], [3.5, 0.5, 0.1], [0.2, 0.3, 0.4], [1.0, 1.1, 0.2], [0.9, 2.2, 1.0]])


def test_stepdown_by_hand():
    """Order 3.0, 2.0, 1.0.

    Largest of all: 2.5, 3.5, .4, 1.1, 2.2; one reaches 3.0: 2/6. Without the first: 2.5, .5, .4, 1.1, 2.2; two
    reach 2.0: 3/6. The last alone: 1.5, .5, .3, 1.1, 2.2; three reach 1.0: 4/6.
    """
    assert np.allclose(stepdown(THREE, FIVE), [2 / 6, 4 / 6, 3 / 6])


def test_stepdown_never_falls():
    """The second alone would have 1/3, but it cannot be more certain than the first."""
    assert np.allclose(stepdown(np.array([2.0, 1.9]), np.array([[3.0, 0.0], [2.5, 0.0]])), [1.0, 1.0])


def test_joint_p_is_the_first_step():
    assert joint(THREE, FIVE) == pytest.approx(2 / 6)


def test_rarity_by_hand():
    """Among -9, 1, 2, 3, 4 the value -9 is lowest: -2/5; the median lies in both tails: -1."""
    found, drawn = rarity(np.array([-9.0]), np.array([[1.0], [2.0], [3.0], [4.0]]))
    assert found[0] == pytest.approx(-0.4)
    assert np.allclose(drawn[:, 0], [-0.8, -1.0, -0.8, -0.4])


def test_rarity_is_the_equal_tailed_p():
    rng = np.random.default_rng(0)
    draws, statistic = rng.gumbel(size=(199, 4)), rng.gumbel(size=4)
    assert np.allclose(-rarity(statistic, draws)[0], equal_tailed(statistic, draws))


def test_one_hypothesis_needs_no_adjustment():
    draws = np.random.default_rng(1).gumbel(size=(199, 1))
    statistic = np.array([3.2])
    rare, drawn = rarity(statistic, draws)
    assert stepdown(rare, drawn)[0] == pytest.approx(equal_tailed(statistic, draws)[0], abs=0.011)


def test_stepdown_keeps_the_chance_of_any_false_rejection():
    """Ten true nulls with common shocks: any is rejected at 5% in about 5% of 400 samples, unadjusted in far more."""
    rng = np.random.default_rng(2)
    any_adjusted = any_single = 0
    for _ in range(400):
        values = rng.standard_normal((400, 10)) + rng.standard_normal((400, 1))
        rare, drawn = rarity(values[0], values[1:])
        any_adjusted += (stepdown(rare, drawn) <= 0.05).any()
        any_single += (-rare <= 0.05).any()
    assert 0.02 < any_adjusted / 400 < 0.09
    assert any_single / 400 > 0.15
