"""Shares, their sums and the resolved premium share with its delta-method series."""

import numpy as np
import pytest

from carrylab.errors import InferenceError
from carrylab.regression.fit import fit
from carrylab.regression.shares import shares

from .samples import build

ROLES = ("return", "other", "fundamental", "carried over", "approximation")
WEIGHTS = np.array([1.0, 1.0, -1.0, 0.96, 1.0])


def test_by_hand() -> None:
    slopes = np.array([0.4, 0.05, -0.15, 0.40625, 0.01])  # shares .4, .05, .15, .39, .01
    series = np.arange(10.0).reshape(2, 5)
    found = shares(slopes, series, WEIGHTS, ROLES)
    np.testing.assert_allclose([leg.value for leg in found.legs], [0.4, 0.05, 0.15, 0.39, 0.01])
    assert found.total.value == pytest.approx(1.0)
    assert (found.premium.value, found.expectation.value) == (pytest.approx(0.4), pytest.approx(0.15))
    assert found.resolved.value == pytest.approx(0.4 / 0.61)
    # d(p / (1 - c)) = dp / .61 + .4 x .96 d(slope) / .61^2
    np.testing.assert_allclose(found.resolved.series, series[:, 0] / 0.61 + 0.4 * 0.96 * series[:, 3] / 0.61**2)
    np.testing.assert_allclose(found.expectation.series, -series[:, 2])


def test_without_a_valuation_leg_the_resolved_share_is_the_premium_share() -> None:
    found = shares(np.array([0.7, 0.3]), np.ones((3, 2)), np.ones(2), ("return", "fundamental"))
    assert found.resolved.value == found.premium.value == pytest.approx(0.7)
    np.testing.assert_array_equal(found.resolved.series, found.premium.series)


def test_the_resolved_series_is_the_derivative() -> None:
    rng = np.random.default_rng(0)
    y = rng.normal(size=(40, 3, 2))
    x = y.sum(axis=2, keepdims=True) + rng.normal(size=(40, 3, 1))
    sample, weights = build(x, y), np.array([1.0, 0.96])

    def resolved(dates):
        found = fit(sample, effects="entity", weights=dates)
        return shares(found.coefficients[0], found.influence[:, 0], weights, ("return", "carried over")).resolved

    base, moved = resolved(np.ones(40)), resolved(np.ones(40) + 1e-6 * (np.arange(40) == 7))
    assert (moved.value - base.value) / 1e-6 == pytest.approx(base.series[7], rel=1e-3)


def test_everything_carried_over_is_one_line() -> None:
    with pytest.raises(InferenceError, match="nothing is resolved at this horizon"):
        shares(np.array([0.0, 1.0]), np.ones((3, 2)), np.ones(2), ("return", "carried over"))
