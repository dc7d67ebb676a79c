"""Errors under the null: the identity behind them, hand-computed edges, the panel sum and outcomes by step."""

import numpy as np
import pytest

from carrylab.errors import InferenceError
from carrylab.regression.covariance import ErrorOptions, standard_errors
from carrylab.regression.fit import fit
from carrylab.regression.one_period import null_influence
from carrylab.regression.sample import OneStep

from .samples import overlapping, sample_of

EFFECTS = ("none", "entity", "time", "both")


def test_two_period_outcomes_by_hand() -> None:
    # x = 1, 2, 3 at t = 0, 1, 2; xd = -1, 0, 1, A = 2, h = 2. Windows cover tau = 1..4.
    # W_1 = -1, W_2 = -1 + 0, W_3 = 0 + 1, W_4 = 1 (cut at both edges).
    # y_tau = 1, 5, 2, 8 has mean 4, u = -3, 1, -2, 4: scores 3, -1, -2, 4.
    one = np.array([99.0, 1, 5, 2, 8])[:, None]  # what falls before the first window plays no part
    y = np.array([6.0, 7, 10, np.nan, np.nan])[:, None]
    x = np.array([1.0, 2, 3, 4, 5])[:, None]
    sample = sample_of(x, y, OneStep(one, np.ones(2)), 2)
    found = null_influence(sample, fit(sample, effects="entity"), 0)
    np.testing.assert_allclose(found.series[:, 0], np.array([0, 3, -1, -2, 4]) / 2)
    # the constant: one-period sums over 3 rows are u_1, 2 u_2, 2 u_3, u_4, less mean x = 2 times the slope's
    np.testing.assert_allclose(found.series[:, 1], np.array([0, -3, 2, -4, 4]) / 3 - np.array([0, 3, -1, -2, 4]))
    assert (found.missing, found.covered) == (0, 4)
    options = ErrorOptions("one-period")
    errors = standard_errors(sample, fit(sample, effects="entity"), options)
    assert errors.std_error[0, 0] == pytest.approx(np.sqrt((9 + 1 + 4 + 16) / 4))


@pytest.mark.parametrize("effects", EFFECTS)
@pytest.mark.parametrize("weights", [None, (1.0, 0.96, 0.9)])
def test_the_overlap_moves_from_the_outcome_to_the_signal(effects, weights) -> None:
    # sum_t xd_t Y_t = sum_tau y_tau W_tau exactly, so with the raw outcomes in place of u the series sums to the slope.
    x, y, one, weights = overlapping(1, weights=weights, holes=0.2)
    sample = sample_of(x, y, OneStep(one, weights), 3)
    estimate = fit(sample, effects=effects)
    total = null_influence(sample, estimate, 0).series.sum(axis=0)
    expected = estimate.coefficients[0, 0]
    moved = np.zeros_like(one)
    xd = (sample.x[:, :, 0] - estimate.absorbed.entity[:, 0] - estimate.absorbed.date[:, :1]) * sample.mask
    for step, weight in enumerate(weights, start=1):
        moved[step:] += weight * xd[:-step]
    assert (one * moved).sum() * estimate.bread[0, 0] == pytest.approx(expected)
    if effects == "entity":
        # with entity means out of the outcomes nothing of the slope is lost, for W sums to zero in each entity
        np.testing.assert_allclose(moved.sum(axis=0), 0, atol=1e-12)
        assert total[0] == pytest.approx(expected)


@pytest.mark.parametrize("effects", EFFECTS)
def test_outcomes_by_origin_and_step_give_the_same_slope(effects) -> None:
    rng = np.random.default_rng(3)
    T, N, h = 25, 3, 4
    weights = np.array([1.0, 1.0, 0.5, 0.25])
    steps = rng.normal(size=(T, N, h)) + np.arange(h)
    y, x = steps @ weights, rng.normal(size=(T, N))
    x[rng.random((T, N)) < 0.2] = np.nan
    y[-h:] = np.nan
    sample = sample_of(x, y, OneStep(steps, weights), h)
    estimate = fit(sample, effects=effects)
    # each step's mean is taken out over the origins in use, so the sum over all dates is exactly the slope
    assert null_influence(sample, estimate, 0).series[:, 0].sum() == pytest.approx(estimate.coefficients[0, 0])


def test_by_step_by_hand() -> None:
    # one entity, x = -1, 0, 1 (A = 2), h = 2, step outcomes (t, s): (1, 0), (2, 6), (6, 0): means 3 and 2.
    # u = (-2, -2), (-1, 4), (3, -2). tau=1: -1 x -2 = 2; tau=2: -1 x -2 + 0 = 2; tau=3: 1 x 3 + 0 = 3; tau=4: 1 x -2.
    steps = np.array([[1.0, 0], [2, 6], [6, 0], [np.nan, np.nan], [np.nan, np.nan]])[:, None, :]
    x = np.array([-1.0, 0, 1, 2, 3])[:, None]
    sample = sample_of(x, steps.sum(axis=2), OneStep(steps, np.ones(2)), 2)
    found = null_influence(sample, fit(sample, effects="entity"), 0)
    np.testing.assert_allclose(found.series[:, 0], np.array([0, 2, 2, 3, -2]) / 2)


def test_both_forms_agree_when_the_outcome_is_the_same_thing() -> None:
    x, y, one, weights = overlapping(5, T=400, N=2)
    steps = np.stack([np.roll(one, -s, axis=0) for s in (1, 2, 3)], axis=2)
    by_period = sample_of(x, y, OneStep(one, weights), 3)
    by_step = sample_of(x, y, OneStep(steps, weights), 3)
    estimate = fit(by_period, effects="entity")
    a, b = (null_influence(s, estimate, 0).series[:, 0] for s in (by_period, by_step))
    # they differ only in which dates the mean of the outcome is taken over
    np.testing.assert_allclose(a, b, atol=0.02 * a.std())


def test_a_panel_is_summed_by_date_before_it_is_squared() -> None:
    x, y, one, weights = overlapping(2, N=1)
    single = sample_of(x, y, OneStep(one, weights), 3)
    twice = sample_of(np.hstack([x, x]), np.hstack([y, y]), OneStep(np.hstack([one, one]), weights), 3)
    errors = [standard_errors(s, fit(s, effects="entity"), ErrorOptions("one-period")) for s in (single, twice)]
    # a copy of the same market brings no information
    np.testing.assert_allclose(errors[0].std_error, errors[1].std_error)


def test_date_weights_choose_the_windows() -> None:
    x, y, one, weights = overlapping(4, T=30)
    sample = sample_of(x, y, OneStep(one, weights), 3)
    half = fit(sample, effects="entity", weights=(np.arange(30) < 15).astype(float))
    short = sample_of(x[:18], np.where(np.arange(18)[:, None] < 15, y[:18], np.nan), OneStep(one[:18], weights), 3)
    first = fit(short, effects="entity")
    np.testing.assert_allclose(half.coefficients, first.coefficients)
    found = null_influence(sample, half, 0).series
    np.testing.assert_allclose(found[:18], null_influence(short, first, 0).series, atol=1e-14)
    assert not found[18:].any()


def test_holes_in_the_outcomes_are_counted_and_too_many_refused() -> None:
    x, y, one, weights = overlapping(6)
    one[10, 2] = np.nan
    sample = sample_of(x, y, OneStep(one, weights), 3)
    found = null_influence(sample, fit(sample, effects="entity"), 0)
    assert found.missing == 1
    said = standard_errors(sample, fit(sample, effects="entity"), ErrorOptions("one-period")).warnings
    assert any("r: 1 of 156 one-period outcomes are missing" in text for text in said)
    one[10:20] = np.nan
    broken = sample_of(x, y, OneStep(one, weights), 3)
    with pytest.raises(InferenceError, match="leg 'r': 40 of 156 one-period outcomes"):
        null_influence(broken, fit(broken, effects="entity"), 0)
    errors = standard_errors(broken, fit(broken, effects="entity"), ErrorOptions("auto"))
    assert errors.kinds == ("cosine",)


def test_size_is_right_where_the_signal_is_exogenous() -> None:
    # Persistent signal, 12-period overlap, common shocks in five entities: 3.9 to 5.5% measured elsewhere at 5%.
    rng = np.random.default_rng(7)
    rejected, draws, h, T, N = 0, 300, 12, 240, 5
    for _ in range(draws):
        shocks = rng.normal(size=(T, N)) + rng.normal(size=(T, 1))
        one = rng.normal(size=(T, N)) + rng.normal(size=(T, 1))
        x = np.zeros((T, N))
        for t in range(1, T):
            x[t] = 0.97 * x[t - 1] + shocks[t]
        total = np.cumsum(one, axis=0)
        y = np.full((T, N), np.nan)
        y[:-h] = total[h:] - total[:-h]
        sample = sample_of(x, y, OneStep(one, np.ones(h)), h)
        estimate = fit(sample, effects="entity")
        error = standard_errors(sample, estimate, ErrorOptions("one-period")).std_error[0, 0]
        rejected += abs(estimate.coefficients[0, 0] / error) > 1.96
    assert 0.02 <= rejected / draws <= 0.085
