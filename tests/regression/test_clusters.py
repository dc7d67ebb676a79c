"""Row-level covariances by hand on two entities and three dates, with both published factors."""

import numpy as np
import pytest

from carrylab.errors import InferenceError
from carrylab.regression.clusters import cluster_factor, clustered
from carrylab.regression.covariance import ErrorOptions, standard_errors
from carrylab.regression.fit import fit
from carrylab.regression.sample import make_sample

from .samples import build, random_sample

# x is -1, 0, 1 in both entities: A = 4. y = x + e with e orthogonal to x and summing to zero, so b = 1, const = 0.
X = np.array([[-1.0, -1], [0, 0], [1, 1]])[:, :, None]
E = np.array([[1.0, 2], [-6, 0], [2, 1]])  # sum 0; sum of x e = -3 + 3 = 0
# scores x e: entity A -1, 0, 2; entity B -2, 0, 1
SCORES = np.array([[-1.0, -2], [0, 0], [2, 1]])
SAMPLE = build(X, X + E[:, :, None])


def slope_variance(kind, factor):
    errors = standard_errors(SAMPLE, fit(SAMPLE, effects="none"), ErrorOptions(kind, factor=factor))
    return errors.std_error[0, 0] ** 2


def test_the_estimate_is_as_constructed() -> None:
    np.testing.assert_allclose(fit(SAMPLE, effects="none").coefficients[:, 0], [1, 0], atol=1e-15)


@pytest.mark.parametrize(
    ("kind", "factor", "variance"),
    [
        ("classical", "none", 46 / 6 / 4),  # sum e^2 = 46, n = 6
        ("classical", "n/(n-k)", 46 / 4 / 4),
        ("robust", "none", 10 / 16),  # 1 + 4 + 4 + 1
        ("robust", "n/(n-k)", 10 / 16 * 6 / 4),
        ("clustered: entity", "none", (1 + 1) / 16),  # entity sums 1 and -1
        ("clustered: date", "none", (9 + 9) / 16),  # date sums -3, 0, 3
        ("clustered: both", "none", (2 + 18 - 10) / 16),
        ("clustered: entity", "clusters", 2 / 16 * 2 / 1 * 5 / 4),
        ("clustered: date", "clusters", 18 / 16 * 3 / 2 * 5 / 4),
        ("clustered: both", "clusters", (2 * 2 / 1 + 18 * 3 / 2 - 10 * 6 / 5) / 16 * 5 / 4),
        ("clustered: both", "clusters, one factor", (2 + 18 - 10) / 16 * 2 / 1 * 5 / 4),
        ("clustered: both", "n/(n-k)", (2 + 18 - 10) / 16 * 6 / 4),
    ],
)
def test_by_hand(kind, factor, variance) -> None:
    assert slope_variance(kind, factor) == pytest.approx(variance)


def test_degrees_of_freedom_are_clusters_less_one() -> None:
    estimate = fit(SAMPLE, effects="none")
    freedom = {
        kind: standard_errors(SAMPLE, estimate, ErrorOptions(kind)).df[0]
        for kind in ("classical", "clustered: entity", "clustered: date", "clustered: both")
    }
    assert freedom == {"classical": 4, "clustered: entity": 1, "clustered: date": 2, "clustered: both": 1}


def test_absorbed_effects_nested_in_the_clusters_are_not_counted() -> None:
    sample = random_sample(1)
    estimate = fit(sample, effects="entity")
    plain, counted = (clustered(sample, estimate, by, "n/(n-k)").covariance for by in ("entity", "date"))
    n = estimate.n_obs
    np.testing.assert_allclose(plain, clustered(sample, estimate, "entity", "none").covariance * n / (n - 3))
    np.testing.assert_allclose(
        counted, clustered(sample, estimate, "date", "none").covariance * n / (n - estimate.parameters)
    )


def test_a_two_way_variance_that_is_not_positive_is_replaced_and_said() -> None:
    # scores +1 -1 / -1 +1 in the corners cancel both by entity and by date: V = 0 + 0 - V_row < 0
    e = np.array([[1.0, -1], [0, 0], [1, -1]])
    sample = build(X, X + e[:, :, None])
    found = clustered(sample, fit(sample, effects="none"), "both", "none")
    assert "not positive; the larger one-way covariance, by" in found.problem
    said = standard_errors(sample, fit(sample, effects="none"), ErrorOptions("clustered: both")).warnings
    assert any("not positive" in text for text in said)


def test_joint_across_legs_and_effects() -> None:
    sample = random_sample(2)
    estimate = fit(sample, effects="both")
    for kind in ("classical", "robust", "clustered: entity", "clustered: date"):
        covariance = standard_errors(sample, estimate, ErrorOptions(kind)).covariance
        np.testing.assert_allclose(covariance, covariance.T, atol=1e-15)
        scale = np.sqrt(np.diag(covariance))
        assert np.linalg.eigvalsh(covariance / np.outer(scale, scale))[0] > -1e-8
    alone = build(np.where(sample.mask[:, :, None], sample.x, np.nan), sample.y[:, :, 1:2])
    one = standard_errors(alone, fit(alone, effects="both"), ErrorOptions("classical")).std_error
    both = standard_errors(sample, estimate, ErrorOptions("classical")).std_error
    np.testing.assert_allclose(one[:, 0], both[:, 1])


def test_one_cluster_is_refused() -> None:
    sample = build(X[:, :1], (X + E[:, :, None])[:, :1])
    with pytest.raises(InferenceError, match="clustered: entity needs at least two clusters and there is 1"):
        standard_errors(sample, fit(sample, effects="none"), ErrorOptions("clustered: entity"))


def test_factors_by_hand() -> None:
    assert cluster_factor("clusters", 100, 4, 10) == pytest.approx(10 / 9 * 99 / 96)
    assert cluster_factor("n/(n-k)", 100, 4, 10) == pytest.approx(100 / 96)


def test_two_entities_under_time_effects_leave_no_variance() -> None:
    rng = np.random.default_rng(8)
    x = rng.normal(size=(30, 2, 1))
    y = rng.normal(size=(30, 2, 1))
    steps = np.ones(30, dtype=np.int64)
    sample = make_sample(x, y, terms=("signal",), legs=("return",), steps=steps, overlap=0, one_step=(None,))
    estimate = fit(sample, effects="time")
    with pytest.raises(InferenceError, match="scores of 2 clusters cancel"):
        clustered(sample, estimate, "entity", "clusters")
    assert clustered(sample, estimate, "date", "clusters").covariance[0, 0] > 0
