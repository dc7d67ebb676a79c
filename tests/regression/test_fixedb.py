"""The fixed-b law: published and simulated quantiles, the limits it must meet, and the error kind built on it."""

import numpy as np
import pytest

from carrylab.regression.covariance import ErrorOptions, standard_errors
from carrylab.regression.fit import fit
from carrylab.regression.fixedb import bandwidth_lag, critical, tail
from carrylab.regression.law import statistics, upper_tail

from .samples import overlapping, random_sample, sample_of

BANDWIDTHS = (0.02, 0.06, 0.1, 0.2, 0.5, 0.8, 1.0)
# Kiefer and Vogelsang (2005, Econometric Theory 21:1130), Bartlett: 97.5% quantile as printed there, the others from
# memory. One-sided level -> a0, a1, a2, a3 of the cubic in b.
CUBICS = {
    0.90: (1.2816, 1.3040, 0.5135, -0.3386),
    0.95: (1.6449, 2.1859, 0.3142, -0.3427),
    0.975: (1.9600, 2.9694, 0.4160, -0.5324),
    0.99: (2.3263, 4.1618, 0.5368, -0.9060),
}


@pytest.mark.parametrize("level", CUBICS)
def test_quantiles_lie_on_the_published_cubics(level) -> None:
    cubic = np.polynomial.Polynomial(CUBICS[level])
    for b in BANDWIDTHS:
        assert critical(2 * level - 1, b) == pytest.approx(cubic(b), rel=0.02)


def test_quantiles_meet_simulated_ones() -> None:
    # .95 quantiles of |t| from 20,000 series of 1,000 independent normals, made with other code
    simulated = {0.02: 2.007, 0.06: 2.126, 0.1: 2.244, 0.2: 2.532, 0.5: 3.434}
    for b, value in simulated.items():
        assert critical(0.95, b) == pytest.approx(value, rel=0.02)


def test_with_all_lags_it_is_the_law_without_a_bandwidth() -> None:
    # Kiefer, Vogelsang and Bunzel (2000, Econometrica 68:695), table II: 5.323, 6.747, 8.613 at .95, .975, .99
    # (from memory); theirs is the root of two times the Bartlett statistic at b = 1.
    for level, value in {0.95: 5.323, 0.975: 6.747, 0.99: 8.613}.items():
        assert critical(2 * level - 1, 1.0) * np.sqrt(2) == pytest.approx(value, rel=0.01)


def test_p_values_invert_critical_values_and_approach_the_normal() -> None:
    for confidence in (0.5, 0.9, 0.99, 0.9999):
        assert float(tail(critical(confidence, 0.3), 0.3)) == pytest.approx(1 - confidence, rel=1e-6)
    values = np.array([[0.0, 1.0], [2.0, -3.0]])
    found = tail(values, 0.005)
    assert found.shape == (2, 2)
    assert found[0, 0] == pytest.approx(1.0)
    np.testing.assert_allclose(found, 2 * upper_tail(np.abs(values), np.inf), atol=0.005)
    assert (np.diff([float(tail(2.0, b)) for b in BANDWIDTHS]) > 0).all()
    assert np.isnan(tail(np.nan, 0.2))


def test_the_law_holds_for_the_bartlett_statistic_of_a_noise() -> None:
    # 4,000 series of 150 normals, lag 29, b = .2: rejections at 5% within three Monte Carlo errors (1.03 points)
    s = np.random.default_rng(1).normal(size=(4000, 150))
    away = s - s.mean(axis=1, keepdims=True)
    variance = (away**2).sum(axis=1)
    for lag in range(1, 30):
        variance += 2 * (1 - lag / 30) * (away[:, lag:] * away[:, :-lag]).sum(axis=1)
    t = s.sum(axis=1) / np.sqrt(variance)
    assert np.mean(np.abs(t) > critical(0.95, 0.2)) == pytest.approx(0.05, abs=0.0103)
    assert np.mean(np.abs(t) > 1.96) > 0.1  # the normal law is far off


def test_the_error_kind_has_the_lag_the_law_and_the_words() -> None:
    x, y, _, _ = overlapping(1, T=144, h=4)
    sample = sample_of(x, y, None, 4)
    estimate = fit(sample, effects="entity")
    # 140 dates: ceil(1.3 x 11.83) - 1 = 15 lags, b = 16/140
    found = standard_errors(sample, estimate, ErrorOptions("bartlett, fixed-b"))
    plain = standard_errors(sample, estimate, ErrorOptions("bartlett", lags=15))
    assert found.lags == (15,)
    assert found.bandwidth[0] == pytest.approx(16 / 140)
    np.testing.assert_array_equal(found.covariance, plain.covariance)
    assert "lag 15, no finite-sample factor, fixed-b law at bandwidth 0.11 of the sample" in found.words[0]
    value, error = estimate.coefficients[0, 0], found.std_error[0, 0]
    judged = statistics(value, error, 0.0, np.inf, 0.95, found.bandwidth[0])
    assert judged.p_value == pytest.approx(float(tail(value / error, 16 / 140)))
    assert judged.upper - value == pytest.approx(critical(0.95, 16 / 140) * error)
    assert plain.bandwidth[0] == 0.0


def test_lag_rule() -> None:
    assert bandwidth_lag(100, 0) == 12
    assert bandwidth_lag(100, 59) == 59  # never below the overlap
    assert bandwidth_lag(10, 30) == 9


def test_a_chosen_normal_law_is_the_plain_bartlett_error() -> None:
    sample = random_sample(2)
    estimate = fit(sample, effects="entity")
    found = standard_errors(sample, estimate, ErrorOptions("bartlett, fixed-b", lags=3, reference="normal"))
    assert found.bandwidth[0] == 0.0
    assert found.words[0].endswith("lag 3, no finite-sample factor, normal")
