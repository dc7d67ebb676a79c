"""Half-panel jackknife by hand, as linear weights, and the bias that it takes out."""

import numpy as np
import pytest

from carrylab.errors import SampleError
from carrylab.regression.fit import fit
from carrylab.regression.jackknife import half_panel, half_panel_null
from carrylab.regression.longrun import longrun
from carrylab.regression.sample import OneStep, take

from .samples import overlapping, random_sample, sample_of, series


def test_by_hand() -> None:
    # x = 0, 1, 2 | 0, 2, 4, y = 0, 3, 4 | 1, 2, 7. Halves: (4 - 0)/2 = 2 and (-2 + 14)/8 = 1.5.
    # Whole: mean 1.5, xd = -1.5, -.5, .5, -1.5, .5, 2.5, A = 11.5, Sxy = -1.5 + 2 - 1.5 + 1 + 17.5 = 17.5.
    # b_J = 2 x 17.5/11.5 - 1.75; first load 2 (-1.5)/11.5 - .5 (-1)/2.
    sample = series([0, 1, 2, 0, 2, 4], [0, 3, 4, 1, 2, 7])
    found = half_panel(sample, fit(sample, effects="entity"))
    assert found.coefficients[0, 0] == pytest.approx(35 / 11.5 - 1.75)
    assert found.coefficients[1, 0] == pytest.approx(17 / 6 - 1.5 * (35 / 11.5 - 1.75))
    assert found.loads[0, 0, 0] == pytest.approx(-3 / 11.5 + 0.25)


def test_under_the_null_by_hand() -> None:
    # the same loads with h = 1 and the same outcomes one period later: u = y - 17/6, series load_t u_{t+1}
    x, y = np.array([0.0, 1, 2, 0, 2, 4, 0])[:, None], np.array([0.0, 3, 4, 1, 2, 7, np.nan])[:, None]
    one = np.vstack([[np.nan], y[:-1]])
    sample = sample_of(x, y, OneStep(one, np.ones(1)), 1)
    estimate = fit(sample, effects="entity")
    found = half_panel(sample, estimate)
    null = half_panel_null(sample, found, 0).series[:, 0]
    np.testing.assert_allclose(null[1:], found.loads[:-1, 0, 0] * (y[:-1, 0] - 17 / 6))
    assert null[0] == 0


@pytest.mark.parametrize("effects", ["none", "entity", "time", "both"])
def test_it_is_linear_in_the_outcomes(effects) -> None:
    sample = random_sample(5, T=40, N=6, legs=2, controls=1)
    weights = np.where(np.arange(40) < 30, 1.0, 0.5)
    estimate = fit(sample, effects=effects, weights=weights)
    found = half_panel(sample, estimate)
    np.testing.assert_allclose(
        np.einsum("t,tik,til->kl", weights, found.loads, sample.y), found.coefficients[:2], rtol=1e-8
    )
    np.testing.assert_allclose(np.einsum("t,tik,til->kl", weights, found.loads, sample.x), np.eye(2), atol=1e-9)
    np.testing.assert_allclose(found.influence.sum(axis=0), 0, atol=1e-9)


def test_a_sample_that_repeats_itself_has_nothing_to_correct() -> None:
    x, y = np.random.default_rng(1).normal(size=(2, 10))
    sample = series(np.tile(x, 2), np.tile(y, 2))
    estimate = fit(sample, effects="entity")
    np.testing.assert_allclose(half_panel(sample, estimate).coefficients, estimate.coefficients, rtol=1e-10)


def test_each_entity_splits_its_own_dates() -> None:
    x, y = np.random.default_rng(2).normal(size=(2, 24, 2))
    x[:12, 1] = np.nan  # the second entity begins halfway: its halves are dates 13-18 and 19-24
    sample = sample_of(x, y, None, 1)
    halves = [x.copy(), x.copy()]
    for half, cuts in zip(halves, (((12, 24), (18, 24)), ((0, 12), (0, 18))), strict=True):
        for i, (a, b) in enumerate(cuts):
            half[a:b, i] = np.nan
    own = fit(sample, effects="entity").coefficients[0, 0]
    # the last row has no steps but stands: one step ahead every row counts here
    parts = [fit(sample_of(half, y, None, 1), effects="entity").coefficients[0, 0] for half in halves]
    found = half_panel(sample, fit(sample, effects="entity"))
    assert found.coefficients[0, 0] == pytest.approx(2 * own - sum(parts) / 2)


def test_one_period_scores_add_up_to_the_slope_and_entities_may_be_shuffled() -> None:
    x, y, one, weights = overlapping(3, T=80, N=4, h=6)
    sample = sample_of(x, y, OneStep(one, weights), 6)
    found = half_panel(sample, fit(sample, effects="entity"))
    null = half_panel_null(sample, found, 0).series[:, 0]
    # loads sum to zero in each entity, so taking means out of the outcomes loses nothing
    assert null.sum() == pytest.approx(found.coefficients[0, 0])
    mixed = take(sample, [2, 3, 0, 1])
    other = half_panel(mixed, fit(mixed, effects="entity"))
    np.testing.assert_allclose(other.coefficients, found.coefficients)
    np.testing.assert_allclose(half_panel_null(mixed, other, 0).series[:, 0], null, atol=1e-14)


def test_a_half_that_is_too_short_is_named() -> None:
    sample = series([0, 1, 2, 5], [1, 0, 3, 4])
    with pytest.raises(SampleError, match="half-panel jackknife: first half: 2 rows cannot carry 2 parameters"):
        half_panel(sample, fit(sample, effects="entity"))


def test_most_of_the_bias_goes() -> None:
    # six entities, T = 96, phi .97, shocks correlated -.9 with the outcome's: OLS is biased up, about .9 (1 + phi)/T
    rng, slopes = np.random.default_rng(8), []
    for _ in range(150):
        v = rng.normal(size=(97, 6))
        one = -0.9 * v + np.sqrt(1 - 0.81) * rng.normal(size=(97, 6))
        x = np.zeros((97, 6))
        x[0] = v[0] / np.sqrt(1 - 0.97**2)
        for t in range(1, 97):
            x[t] = 0.97 * x[t - 1] + v[t]
        y = np.vstack([one[1:], np.full((1, 6), np.nan)])
        sample = sample_of(x, y, OneStep(one, np.ones(1)), 1)
        estimate = fit(sample, effects="entity")
        found = half_panel(sample, estimate)
        slopes.append((estimate.coefficients[0, 0], found.coefficients[0, 0]))
        assert longrun(found.influence[:, :, 0], "cosine").covariance[0, 0] > 0
    ols, corrected = np.mean(slopes, axis=0)
    assert ols > 0.015
    assert abs(corrected) < 0.4 * ols
