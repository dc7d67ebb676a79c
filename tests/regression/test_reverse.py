"""The reverse regression by hand, its one-period limit, and what its interval covers."""

import numpy as np
import pytest

from carrylab.errors import InferenceError
from carrylab.regression.reverse import reverse_interval


def test_by_hand() -> None:
    # h = 2, x = 0, 2, 4, 6: X_t = 2, 6, 10 at t = 1, 2, 3; next outcomes 1, 2, 6. Xd = -4, 0, 4, c = 20/32 = .625.
    # e = .5, -1, .5, scores -2, 0, 2: se(c) = sqrt(8)/32. x over the same rows 2, 4, 6: ratio 32/8 = 4.
    x = np.array([0.0, 2, 4, 6, 99])[:, None]  # the last signal has no outcome after it
    y = np.array([99.0, 99, 1, 2, 6])[:, None]
    found = reverse_interval(x, y, np.ones(2), 0.95)
    assert (found.reverse_slope, found.ratio, found.n_obs) == (pytest.approx(0.625), pytest.approx(4.0), 3)
    assert found.slope == pytest.approx(2.5)
    assert found.std_error == pytest.approx(np.sqrt(8) / 8)
    assert found.upper - found.lower == pytest.approx(2 * 1.959964 * np.sqrt(8) / 8)


def test_weights_count_back_from_the_signal() -> None:
    # weights 1, 1/2: X_t = x_t + x_{t-1}/2 = 2, 5, 8 instead: Xd = -3, 0, 3, ratio 18/8
    x = np.array([0.0, 2, 4, 6, 99])[:, None]
    found = reverse_interval(x, np.array([99.0, 99, 1, 2, 6])[:, None], np.array([1.0, 0.5]), 0.95)
    assert (found.reverse_slope, found.ratio) == (pytest.approx(15 / 18), pytest.approx(18 / 8))


def test_one_period_ahead_it_is_least_squares_with_date_scores() -> None:
    rng = np.random.default_rng(0)
    x, y = rng.normal(size=(30, 3)), rng.normal(size=(30, 3))
    y[7, 1] = x[12, 2] = np.nan
    there = np.isfinite(x[:-1]) & np.isfinite(y[1:])
    xd, yd = (np.where(there, part, 0) for part in (x[:-1], y[1:]))
    xd, yd = ((part - part.sum(axis=0) / there.sum(axis=0)) * there for part in (xd, yd))
    slope = (xd * yd).sum() / (xd**2).sum()
    scores = (xd * (yd - slope * xd)).sum(axis=1)
    found = reverse_interval(x, y, np.ones(1), 0.9)
    assert (found.ratio, found.slope) == (pytest.approx(1.0), pytest.approx(slope))
    assert found.std_error == pytest.approx(np.sqrt((scores**2).sum()) / (xd**2).sum())
    order = [2, 0, 1]
    assert reverse_interval(x[:, order], y[:, order], np.ones(1), 0.9).slope == pytest.approx(slope)


def test_it_covers_a_true_slope_that_is_not_zero() -> None:
    # exogenous signal, phi .9, one-period slope .1: the 12-period slope is .1 (1 - .9^12)/.1 = .7176
    rng, covered, h, T = np.random.default_rng(4), 0, 12, 360
    for _ in range(300):
        shocks, noise = rng.normal(size=(T, 1)), rng.normal(size=(T, 1))
        x = np.zeros((T, 1))
        for t in range(1, T):
            x[t] = 0.9 * x[t - 1] + shocks[t]
        y = np.vstack([noise[:1], 0.1 * x[:-1] + noise[1:]])
        found = reverse_interval(x, y, np.ones(h), 0.95)
        covered += found.lower <= 0.7176 <= found.upper
    assert 0.90 <= covered / 300 <= 0.985


def test_too_few_rows_are_refused() -> None:
    with pytest.raises(InferenceError, match="over 12 periods has 0 rows"):
        reverse_interval(np.zeros((8, 1)), np.zeros((8, 1)), np.ones(12), 0.95)
