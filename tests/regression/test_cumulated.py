"""Cumulated horizons against one fit a horizon with the package's own errors, with holes and late entrants."""

import numpy as np
import pytest

from carrylab.errors import SampleError
from carrylab.regression.covariance import ErrorOptions, standard_errors
from carrylab.regression.cumulated import bartlett_sum, cumulated
from carrylab.regression.fit import fit
from carrylab.regression.longrun import kernel_sum
from carrylab.regression.sample import Floats, OneStep, Sample, make_sample


def summed(x: Floats, r: Floats, h: int) -> Sample:
    """The sample of one horizon, its outcomes added up one by one."""
    T = len(x)
    y = np.full_like(r, np.nan)
    for t in range(T - h):
        y[t] = r[t + 1 : t + 1 + h].sum(axis=0)
    return make_sample(
        x[:, :, None],
        y[:, :, None],
        terms=("signal",),
        legs=("return",),
        steps=np.where(np.arange(T) < T - h, h, 0),
        overlap=h - 1,
        one_step=[OneStep(r, np.ones(h))],
    )


@pytest.mark.parametrize("holes", [False, True])
def test_every_horizon_is_the_fit_of_its_own_sample(holes: bool) -> None:
    rng = np.random.default_rng(1)
    x, r = rng.standard_normal((80, 4)).cumsum(axis=0), rng.standard_normal((80, 4))
    if holes:
        x[:30, 0], r[:31, 0] = np.nan, np.nan
        x[17, 2] = np.nan
        r[60:, 3] = np.nan
    horizons = (1, 2, 5, 12)
    found = cumulated(x, r, horizons)
    for at, h in enumerate(horizons):
        sample = summed(x, r, h)
        estimate = fit(sample, effects="entity")
        assert found.slopes[at] == pytest.approx(estimate.coefficients[0, 0], abs=1e-11)
        assert found.r2[at] == pytest.approx(estimate.r2[0], abs=1e-11)
        assert (found.n_obs[at], found.n_dates[at]) == (estimate.n_obs, estimate.n_dates)
        for kind, errors in (("bartlett", found.bartlett), ("one-period", found.one_period)):
            options = ErrorOptions(kind, lags=h - 1 if kind == "bartlett" else None)
            known = standard_errors(sample, estimate, options)
            assert errors[at] == pytest.approx(known.std_error[0, 0], rel=1e-9), (kind, h)


def test_the_bartlett_sum_by_moving_sums_is_the_kernels() -> None:
    scores = np.random.default_rng(2).standard_normal(50)
    for lag in (0, 1, 7, 49):
        assert bartlett_sum(scores, lag) == pytest.approx(kernel_sum(scores[:, None], "bartlett", lag)[0, 0])


def test_three_dates_by_hand() -> None:
    # x = 1, 2, 3 then the outcomes 1, 0, 5 after them: means 2 and 2, slope (-1 x -1 + 0 + 1 x 3) / 2 = 2.
    found = cumulated(np.array([[1.0], [2.0], [3.0], [9.0]]), np.array([[7.0], [1.0], [0.0], [5.0]]), [1])
    assert found.slopes[0] == pytest.approx(2.0)
    # 1B: outcomes less their mean -1, -2, 3 times x~ -1, 0, 1: scores 1, 0, 3; root of 10 over 2.
    assert found.one_period[0] == pytest.approx(np.sqrt(10.0) / 2)


def test_a_horizon_beyond_the_sample_is_refused() -> None:
    with pytest.raises(SampleError, match="horizon 9: no row in which the signal varies"):
        cumulated(np.ones((5, 1)), np.ones((5, 1)), [9])
