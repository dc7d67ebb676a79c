"""Predicted bias and size, effective entities and independent windows."""

import numpy as np
import pytest

from carrylab.regression.bias import effective_entities, predicted_bias, predicted_size, window_warning
from carrylab.regression.fit import fit
from carrylab.regression.sample import OneStep

from .samples import build, sample_of


@pytest.mark.parametrize(
    ("ratio", "size"), [(0.0, 0.05), (0.3, 0.06), (0.5, 0.08), (0.75, 0.12), (1.0, 0.17), (1.4, 0.29)]
)
def test_predicted_size(ratio, size) -> None:
    # shifts of a standard normal statistic: arithmetic on the normal table
    assert predicted_size(ratio) == pytest.approx(size, abs=0.006)
    assert predicted_size(-ratio) == pytest.approx(predicted_size(ratio))


def test_effective_entities_at_both_ends() -> None:
    rng = np.random.default_rng(0)
    x, e = rng.normal(size=(4000, 1, 1)), rng.normal(size=(4000, 1, 1))
    together = build(np.repeat(x, 6, axis=1), np.repeat(e, 6, axis=1))
    assert effective_entities(together, fit(together, effects="entity"), 0) == pytest.approx(1.0)
    apart = build(rng.normal(size=(4000, 6, 1)), rng.normal(size=(4000, 6, 1)))
    assert 5.3 < effective_entities(apart, fit(apart, effects="entity"), 0) <= 6.0


def world(rng, T, N, phi, h, common):
    """Returns whose shocks are -.9 correlated with those of a persistent signal, correlated over entities."""

    def shock():
        return np.sqrt(common) * rng.normal(size=(T, 1)) + np.sqrt(1 - common) * rng.normal(size=(T, N))

    v = shock()
    one = -0.9 * v + np.sqrt(1 - 0.81) * shock()
    x = np.zeros((T, N))
    x[0] = v[0] / np.sqrt(1 - phi**2)
    for t in range(1, T):
        x[t] = phi * x[t - 1] + v[t]
    total = np.cumsum(one, axis=0)
    y = np.full((T, N), np.nan)
    y[:-h] = total[h:] - total[:-h]
    return x, y, one


@pytest.mark.parametrize(("N", "phi", "h"), [(1, 0.95, 1), (1, 0.95, 12), (10, 0.95, 1), (10, 0.9, 6)])
def test_predicted_bias_is_the_simulated_bias(N, phi, h) -> None:
    rng = np.random.default_rng(5)
    slopes, predicted = [], []
    for _ in range(200):
        x, y, one = world(rng, 240, N, phi, h, 0.5)
        sample = sample_of(x, y, OneStep(one, np.ones(h)), h)
        estimate = fit(sample, effects="entity")
        slopes.append(estimate.coefficients[0, 0])
        predicted.append(predicted_bias(sample, estimate, 0, 1.0).bias)
    noise = np.std(slopes) / np.sqrt(len(slopes))
    assert np.mean(predicted) == pytest.approx(np.mean(slopes), rel=0.3, abs=2 * noise)


def test_one_series_one_period_is_the_textbook_plug_in() -> None:
    x, y, one = world(np.random.default_rng(1), 400, 1, 0.95, 1, 0.0)
    sample = sample_of(x, y, OneStep(one, np.ones(1)), 1)
    estimate = fit(sample, effects="entity")
    found = predicted_bias(sample, estimate, 0, 0.02)
    assert found.gamma == pytest.approx(-0.9, abs=0.05)
    assert found.bias == pytest.approx(-found.gamma * (1 + 3 * found.persistence) / 399)
    assert found.ratio == pytest.approx(found.bias / 0.02)
    assert found.size == predicted_size(found.ratio)
    assert not found.capped


def test_shocks_are_found_without_one_period_outcomes_too() -> None:
    x, y, one = world(np.random.default_rng(2), 2000, 3, 0.9, 4, 0.0)
    with_them = sample_of(x, y, OneStep(one, np.ones(4)), 4)
    without = sample_of(x, y, None, 4)
    by_step = sample_of(
        x, y, OneStep(np.stack([np.roll(one, -s, axis=0) for s in (1, 2, 3, 4)], axis=2), np.ones(4)), 4
    )
    estimate = fit(with_them, effects="entity")
    gammas = [predicted_bias(sample, estimate, 0, 1.0).gamma for sample in (with_them, without, by_step)]
    np.testing.assert_allclose(gammas, -0.9, atol=0.06)


def test_an_explosive_looking_signal_is_capped_and_marked() -> None:
    x = 1.02 ** np.arange(80.0)[:, None]
    y = np.random.default_rng(0).normal(size=(80, 1))
    sample = sample_of(x, y, None, 1)
    found = predicted_bias(sample, fit(sample, effects="entity"), 0, 1.0)
    assert found.capped
    assert found.persistence == 0.999


def test_windows_are_counted() -> None:
    assert window_warning(480, 11, ["cosine"]) == ()
    assert window_warning(480, 0, ["bartlett"]) == ()
    assert window_warning(200, 11, ["cosine"]) == ("200 dates hold only 16 independent windows of 12 periods",)
    assert "do not rely on their p-values" in window_warning(480, 59, ["bartlett"])[0]


def test_a_signal_without_neighbours_has_no_persistence_to_estimate() -> None:
    # a yearly signal on a monthly calendar
    rng = np.random.default_rng(0)
    x, y = rng.normal(size=(120, 2)), rng.normal(size=(120, 2))
    x[np.arange(120) % 12 > 0] = np.nan
    sample = sample_of(x, y, None, 1)
    found = predicted_bias(sample, fit(sample, effects="entity"), 0, 1.0)
    assert np.isnan(found.ratio)
    assert "never stands on two dates in a row" in found.problem
