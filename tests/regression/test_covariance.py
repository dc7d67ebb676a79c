"""The table of error kinds: what is refused, what is said, which lag, factor and law come by default."""

import numpy as np
import pytest

from carrylab.errors import InferenceError
from carrylab.regression.covariance import ERRORS, ErrorOptions, scaled, standard_errors
from carrylab.regression.fit import fit
from carrylab.regression.law import critical, statistics
from carrylab.regression.longrun import longrun
from carrylab.regression.sample import OneStep, make_sample

from .samples import overlapping, random_sample, sample_of, series


def two_legs(h=4, T=120, seed=0, with_one=(True, False)):
    x, y, one, weights = overlapping(seed, T=T, h=h)
    steps = np.where(np.arange(T) < T - h, h, 0)
    return make_sample(
        x[:, :, None],
        np.stack([y, x - y], axis=2),
        terms=["spread"],
        legs=["excess return", "rate rise"],
        steps=steps,
        overlap=h - 1,
        one_step=[
            OneStep(sign * one, weights) if there else None for there, sign in zip(with_one, (1, -1), strict=True)
        ],
    )


@pytest.mark.parametrize("kind", ERRORS)
def test_every_kind_gives_errors_words_and_a_source(kind) -> None:
    sample = random_sample(0) if kind not in ("one-period", "instrument") else two_legs()
    estimate = fit(sample, effects="entity")
    errors = standard_errors(sample, estimate, ErrorOptions(kind))
    assert (errors.std_error > 0).all()
    assert errors.words[0].startswith(ERRORS[kind].words)
    assert "factor" in errors.words[0]
    assert ERRORS[kind].source
    flat = np.sqrt(np.diag(errors.covariance)).reshape(errors.std_error.shape)
    np.testing.assert_allclose(flat, errors.std_error)


@pytest.mark.parametrize("kind", ["classical", "robust", "clustered: entity", "clustered: date", "clustered: both"])
def test_kinds_without_a_lag_are_refused_with_overlap_unless_forced(kind) -> None:
    sample = two_legs()
    estimate = fit(sample, effects="entity")
    with pytest.raises(InferenceError, match=r"outcomes overlap by 3 periods; .* or set lags = 0 to force it"):
        standard_errors(sample, estimate, ErrorOptions(kind))
    forced = standard_errors(sample, estimate, ErrorOptions(kind, lags=0))
    assert any("ignore an overlap of 3 periods" in text for text in forced.warnings)


@pytest.mark.parametrize("kind", ["bartlett", "rectangular"])
def test_a_lag_below_the_overlap_is_refused_and_the_default_is_the_overlap(kind) -> None:
    sample = two_legs()
    estimate = fit(sample, effects="entity")
    with pytest.raises(InferenceError, match="lags = 2 is below the overlap of 3 periods"):
        standard_errors(sample, estimate, ErrorOptions(kind, lags=2))
    errors = standard_errors(sample, estimate, ErrorOptions(kind))
    assert errors.lags == (3, 3)
    assert ", lag 3, no finite-sample factor, normal" in errors.words[0]
    assert standard_errors(sample, estimate, ErrorOptions(kind, lags=9)).lags == (9, 9)


def test_auto_is_one_period_where_there_are_outcomes_else_cosines() -> None:
    sample = two_legs()
    errors = standard_errors(sample, fit(sample, effects="entity"), ErrorOptions())
    assert errors.kinds == ("one-period", "cosine")
    assert np.isinf(errors.df[0])
    assert errors.df[1] == errors.lags[1] == 9  # .4 x 116^(2/3) = 9.5
    assert "null of no premium" in errors.words[0]
    assert "9 cosines" in errors.words[1]
    assert np.isnan(errors.covariance[0, 1])  # between kinds there is no covariance


def test_one_period_errors_of_both_legs_are_the_same_fact() -> None:
    sample = two_legs(with_one=(True, True))
    errors = standard_errors(sample, fit(sample, effects="entity"), ErrorOptions("one-period"))
    assert errors.std_error[0, 0] == pytest.approx(errors.std_error[0, 1])
    assert errors.covariance[0, 1] == pytest.approx(-errors.covariance[0, 0])


def test_one_period_without_outcomes_is_one_line() -> None:
    sample = random_sample(0)
    with pytest.raises(InferenceError, match='errors = "one-period" needs one-period outcomes and no leg has them'):
        standard_errors(sample, fit(sample, effects="entity"), ErrorOptions("one-period"))


def test_a_clustered_factor_needs_clusters() -> None:
    sample = random_sample(0)
    with pytest.raises(InferenceError, match='factor = "clusters" needs clustered errors'):
        standard_errors(sample, fit(sample, effects="entity"), ErrorOptions("bartlett", factor="clusters"))


def alternating(one_step):
    """x e alternates in sign, so the rectangular sum with lag 1 is negative."""
    x = np.array([1.0, 1, -1, -1, 1, 1, -1, -1])
    e = np.array([1.0, -1, -1, 1, 1, -1, -1, 1])
    y = np.append(x[:-1] + e[:-1], np.nan)
    return series(x, y, overlap=1, one_step=one_step)


def test_a_negative_rectangular_variance_is_replaced_in_words() -> None:
    plain = alternating(None)
    errors = standard_errors(plain, fit(plain, effects="none"), ErrorOptions("rectangular"))
    assert errors.kinds == ("bartlett",)
    assert any(text.startswith("y0: the rectangular kernel with lag 1") for text in errors.warnings)
    outcomes = np.random.default_rng(0).normal(size=(8, 1))
    rich = alternating([OneStep(outcomes, np.ones(2))])
    errors = standard_errors(rich, fit(rich, effects="none"), ErrorOptions("rectangular"))
    assert errors.kinds == ("one-period",)
    assert any("Hodrick 1B stands in its place" in text for text in errors.warnings)


def test_factor_and_reference_can_be_chosen() -> None:
    sample = two_legs()
    estimate = fit(sample, effects="entity")
    plain = standard_errors(sample, estimate, ErrorOptions("bartlett"))
    chosen = standard_errors(sample, estimate, ErrorOptions("bartlett", factor="n/(n-k)", reference="t"))
    n, k = estimate.n_obs, estimate.parameters
    np.testing.assert_allclose(chosen.covariance, plain.covariance * n / (n - k))
    assert chosen.df[0] == estimate.n_dates - 2
    assert "factor n/(n-k), t with 114 degrees of freedom" in chosen.words[0]
    series = scaled(estimate, "n/(n-k)").reshape(len(sample.mask), -1)
    np.testing.assert_allclose(longrun(series, "bartlett", lags=3).covariance, chosen.covariance)


def test_few_windows_and_few_clusters_are_said() -> None:
    sample = two_legs(h=12, T=100)
    said = standard_errors(sample, fit(sample, effects="entity"), ErrorOptions("bartlett")).warnings
    assert "88 dates hold only 7 independent windows of 12 periods; kernel errors are far too small here" in said[0]
    short = random_sample(0)
    said = standard_errors(short, fit(short, effects="entity"), ErrorOptions("clustered: entity")).warnings
    assert any("rests on 6 clusters" in text for text in said)


def test_one_entity_is_the_time_series_formula() -> None:
    x, y, one, weights = overlapping(3, T=200, N=1)
    sample = sample_of(x, y, OneStep(one, weights), 3)
    used = ~np.isnan(y[:, 0])
    design = np.column_stack([x[used, 0], np.ones(used.sum())])
    inverse = np.linalg.inv(design.T @ design)
    scores = design * (y[used, 0] - design @ (inverse @ design.T @ y[used, 0]))[:, None]
    meat = scores.T @ scores
    for lag in (1, 2):
        cross = scores[lag:].T @ scores[:-lag]
        meat += (1 - lag / 3) * (cross + cross.T)
    for effects in ("none", "entity"):
        errors = standard_errors(sample, fit(sample, effects=effects), ErrorOptions("bartlett"))
        np.testing.assert_allclose(errors.covariance, inverse @ meat @ inverse, rtol=1e-10)


def test_statistics_by_hand() -> None:
    found = statistics([2.0, 2.0], [1.0, 0.5], [0.0, 1.0], [np.inf, 4.0], 0.95)
    np.testing.assert_allclose(found.statistic, [2, 2])
    # two-sided p of 2: .0455 normal, .1161 Student with 4 (textbook tables)
    np.testing.assert_allclose(found.p_value, [0.0455, 0.1161], atol=5e-5)
    np.testing.assert_allclose(found.lower, [2 - 1.96, 2 - 0.5 * 2.7764], atol=5e-5)
    assert np.isnan(statistics(1.0, 0.0, 0.0, np.inf, 0.95).p_value)
    assert critical(0.95, 16).item() == pytest.approx(2.120, abs=5e-4)
