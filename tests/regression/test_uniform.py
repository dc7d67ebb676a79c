"""Critical values of the sup-t band against the two laws known in closed form."""

import math

import numpy as np
import pytest
from scipy import stats

from carrylab.regression.uniform import sup_t


def test_independent_estimates_need_the_quantile_of_their_largest() -> None:
    """P(max |z| < c) = (2 Phi(c) - 1)^m for m independent normals: 2.236 for two, 2.569 for five."""
    series = np.random.default_rng(1).standard_normal((20_000, 5))
    for m, known in ((2, 2.236), (5, 2.569)):
        assert known == pytest.approx(stats.norm.ppf((1 + 0.95 ** (1 / m)) / 2), abs=1e-3)
        found = sup_t(series[:, :m], math.inf, confidence=0.95, cosines=800, seed=1)
        assert found == pytest.approx(known, abs=0.05)


def test_one_and_the_same_estimate_needs_its_own_law() -> None:
    """Student's t of 10 degrees of freedom: 2.228; the normal: 1.960."""
    series = np.random.default_rng(2).standard_normal((400, 1)) * np.array([1.0, -2.0, 0.5])
    assert sup_t(series, 10.0, confidence=0.95, cosines=20, seed=3) == pytest.approx(2.228, abs=0.06)
    assert sup_t(series, math.inf, confidence=0.95, cosines=20, seed=3) == pytest.approx(1.960, abs=0.04)


def test_the_seed_decides() -> None:
    series = np.random.default_rng(2).standard_normal((400, 3))
    first, again, other = (sup_t(series, 8.0, confidence=0.9, cosines=10, seed=seed) for seed in (1, 1, 2))
    assert first == again
    assert first != other
