"""Clusters with lags of common shocks: the formula in plain loops, its limits, and what replaces a bad variance."""

import numpy as np
import pytest

from carrylab.errors import InferenceError
from carrylab.regression.clusters import clustered
from carrylab.regression.covariance import ErrorOptions, standard_errors
from carrylab.regression.fit import fit
from carrylab.regression.lagged_clusters import clustered_lagged
from carrylab.regression.sample import take

from .samples import build, overlapping, random_sample, sample_of


def loops(q, lags):
    """Thompson (2011): V = V_E + V_D - V_W + 2 sum_l [sum_t s_t s_t-l - sum_i sum_t q_it q_i,t-l], entry by entry."""
    T, N = q.shape
    s = [sum(q[t, i] for i in range(N)) for t in range(T)]
    total = sum(sum(q[t, i] for t in range(T)) ** 2 for i in range(N))
    total += sum(v**2 for v in s) - sum(q[t, i] ** 2 for t in range(T) for i in range(N))
    for lag in range(1, lags + 1):
        for t in range(lag, T):
            total += 2 * (s[t] * s[t - lag] - sum(q[t, i] * q[t - lag, i] for i in range(N)))
    return total


def common(seed, legs=1, controls=0):
    """Persistent common shocks in terms and legs, so that no variance is negative."""
    rng = np.random.default_rng(seed)
    T, N = 40, 5
    shared = np.cumsum(rng.normal(size=(T + 2, 1 + controls + legs)), axis=0)
    moved = shared[2:] - shared[:-2]
    x = moved[:, None, : 1 + controls] + rng.normal(size=(T, N, 1 + controls))
    y = moved[:, None, 1 + controls :] + rng.normal(size=(T, N, legs))
    x[rng.random((T, N)) < 0.2] = np.nan
    return build(x, y)


def test_by_hand() -> None:
    # two entities, three dates, no effects, x of mean 0: (1, -1) at each date, A = 6.
    # y = (1, 1), (-1, 0), (3, 2): Sxy = 0 - 1 + 1 = 0, b = 0, mean 1; e = y - 1 = (0, 0), (-2, -1), (2, 1).
    # q = x e: (0, 0), (-2, 1), (2, -1); s = 0, -1, 1.
    # V_E = 0 + 0, V_D = 2, V_W = 10; lag 1: s_3 s_2 = -1, own = -4 - 1 = -5: 2 (-1 + 5) = 8. V = 0 + 2 - 10 + 8 = 0,
    # not positive. Bartlett by date at lag 1: 2 + 2 (1/2)(-1) = 1, larger than V_E = 0: it stands in, 1 / 36.
    x = np.array([[1.0, -1], [1, -1], [1, -1]])[:, :, None]
    y = np.array([[1.0, 1], [-1, 0], [3, 2]])[:, :, None]
    sample = build(x, y)
    estimate = fit(sample, effects="none")
    assert estimate.coefficients[0, 0] == pytest.approx(0.0)
    found = clustered_lagged(sample, estimate, 1, "none")
    assert found.covariance[0, 0] == pytest.approx(1 / 36)
    assert "lags of common shocks is not positive for x0 of y0" in found.problem
    assert "by date with Bartlett weights at the same lag, stands in its place" in found.problem


@pytest.mark.parametrize("lags", [1, 3])
@pytest.mark.parametrize("effects", ["none", "entity"])
def test_against_plain_loops(lags, effects) -> None:
    sample = common(4)
    estimate = fit(sample, effects=effects)
    xd = (sample.x[:, :, 0] - estimate.absorbed.entity[:, 0]) * sample.mask
    yd = (sample.y[:, :, 0] - estimate.absorbed.entity[:, 1]) * sample.mask
    q = xd * (yd - estimate.coefficients[0, 0] * xd)
    found = clustered_lagged(sample, estimate, lags, "none")
    assert found.problem == ""
    assert found.covariance[0, 0] == pytest.approx(loops(q, lags) / (xd**2).sum() ** 2)


@pytest.mark.parametrize("factor", ["none", "n/(n-k)", "clusters", "clusters, one factor"])
def test_without_lags_it_is_two_way_clustering(factor) -> None:
    sample = common(1, legs=2, controls=1)
    estimate = fit(sample, effects="entity")
    plain, found = clustered(sample, estimate, "both", factor), clustered_lagged(sample, estimate, 0, factor)
    np.testing.assert_allclose(found.covariance, plain.covariance, atol=1e-14)
    assert (found.clusters, found.problem, plain.problem) == (plain.clusters, "", "")


def test_lags_default_to_the_overlap_and_may_not_be_shorter() -> None:
    x, y, _, _ = overlapping(0, T=60, N=5, h=4)
    sample = sample_of(x, y, None, 4)
    estimate = fit(sample, effects="entity")
    found = standard_errors(sample, estimate, ErrorOptions("clustered: both, lagged"))
    assert found.lags == (3,)
    assert "lags of common shocks, lag 3, factor G/(G-1)" in found.words[0]
    assert found.df[0] == 4
    assert any("only 14 independent windows" in text for text in found.warnings)
    with pytest.raises(InferenceError, match="lags = 2 is below the overlap of 3"):
        standard_errors(sample, estimate, ErrorOptions("clustered: both, lagged", lags=2))


def test_order_of_entities_does_not_matter_and_one_is_refused() -> None:
    sample = random_sample(3)
    shuffled = take(sample, [3, 0, 5, 1, 4, 2])
    both = [clustered_lagged(s, fit(s, effects="entity"), 2, "clusters").covariance for s in (sample, shuffled)]
    np.testing.assert_allclose(both[0], both[1], atol=1e-13)
    single = take(sample, [0])
    with pytest.raises(InferenceError, match="needs at least two clusters and there is 1"):
        clustered_lagged(single, fit(single, effects="entity"), 2, "clusters")
