"""Slopes, constants, R2, counts and influence: by hand, by dummies, and under every effect and pattern of holes."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from carrylab.errors import SampleError
from carrylab.regression.fit import fit
from carrylab.regression.sample import Sample, take

from .samples import build, random_sample, series

EFFECTS = ("none", "entity", "time", "both")


def dummies(sample: Sample, effects: str, weights) -> tuple:
    """Slopes and residual sum of squares by least squares on dummies."""
    t, i = np.nonzero(sample.mask & (weights > 0)[:, None])
    columns = [sample.x[t, i]]
    if effects in ("entity", "both"):
        columns.append(i[:, None] == np.unique(i))
    if effects in ("time", "both"):
        columns.append(t[:, None] == np.unique(t))
    if effects == "none":
        columns.append(np.ones((len(t), 1)))
    design = np.hstack([np.asarray(c, float) for c in columns])
    root = np.sqrt(weights[t])[:, None]
    slopes = np.linalg.lstsq(design * root, sample.y[t, i] * root, rcond=None)[0]
    rest = (sample.y[t, i] - design @ slopes) * root
    return slopes[: sample.x.shape[2]], (rest**2).sum(axis=0)


def test_three_dates_by_hand() -> None:
    # x = 0, 1, 2 and y = 1, 2, 5: slope 2, constant 2/3, residuals 1/3, -2/3, 1/3; A = 2.
    found = fit(series([0, 1, 2], [1, 2, 5]), effects="none")
    np.testing.assert_allclose(found.coefficients[:, 0], [2, 2 / 3])
    # slope: xd e / A = (-1/6, 0, 1/6); constant: e/3 - 1 x that.
    np.testing.assert_allclose(found.influence[:, 0, 0], [-1 / 6, 0, 1 / 6], atol=1e-15)
    np.testing.assert_allclose(found.influence[:, 1, 0], [1 / 9 + 1 / 6, -2 / 9, 1 / 9 - 1 / 6], atol=1e-15)
    # total sum of squares 26/3, residual 2/3
    assert found.r2[0] == pytest.approx(1 - (2 / 3) / (26 / 3))
    assert (found.n_obs, found.n_dates, found.n_entities, found.parameters) == (3, 3, 1, 2)


def test_entity_effects_by_hand() -> None:
    # entity A: x 0, 2, y 0, 2 (own slope 1); B: x 10, 14, y 5, 17 (own slope 3). A = 2 + 8, C = 2 + 24: slope 2.6.
    x = np.array([[0.0, 10.0], [2.0, 14.0]])[:, :, None]
    y = np.array([[0.0, 5.0], [2.0, 17.0]])[:, :, None]
    found = fit(build(x, y), effects="entity")
    assert found.coefficients[0, 0] == pytest.approx(2.6)
    assert found.coefficients[1, 0] == pytest.approx(24 / 4 - 2.6 * 26 / 4)  # grand mean of y less x b
    assert found.parameters == 3


@pytest.mark.parametrize("effects", EFFECTS)
@pytest.mark.parametrize("shape", [(30, 6), (6, 30)])
def test_equals_dummies_with_holes_and_date_weights(effects, shape) -> None:
    sample = random_sample(3, *shape)
    rng = np.random.default_rng(1)
    for weights in (np.ones(shape[0]), rng.integers(0, 4, shape[0]).astype(float)):
        found = fit(sample, effects=effects, weights=weights)
        slopes, squares = dummies(sample, effects, weights)
        np.testing.assert_allclose(found.coefficients[:-1], slopes, rtol=1e-9)
        np.testing.assert_allclose(np.diag(found.squares), squares, rtol=1e-9)


@pytest.mark.parametrize("effects", EFFECTS)
def test_counts_as_weights_equal_repeated_dates(effects) -> None:
    sample = random_sample(5, 12, 5)
    counts = np.array([1, 2, 0, 1, 3, 1, 1, 0, 2, 1, 1, 1])
    repeated = np.repeat(np.arange(12), counts)
    holes = np.where(sample.mask[:, :, None], 1.0, np.nan)
    longer = build((sample.x * holes)[repeated], (sample.y * holes)[repeated])
    weighted = fit(sample, effects=effects, weights=counts)
    # with time effects a repeated date has an effect of its own that is the same as its twin's
    np.testing.assert_allclose(weighted.coefficients, fit(longer, effects=effects).coefficients, rtol=1e-10)


def test_influence_is_the_derivative_with_respect_to_a_date_weight() -> None:
    for effects in EFFECTS:
        sample = random_sample(7, 20, 5)
        base = fit(sample, effects=effects)
        for date in (3, 11):
            weights = np.ones(20)
            weights[date] += 1e-6
            moved = (fit(sample, effects=effects, weights=weights).coefficients - base.coefficients) / 1e-6
            np.testing.assert_allclose(moved[:2], base.influence[date, :2], rtol=1e-3, atol=1e-6)
            if effects == "none":  # with effects the constant is judged with the effects held where they are
                np.testing.assert_allclose(moved[2], base.influence[date, 2], rtol=1e-3, atol=1e-6)


@pytest.mark.parametrize("effects", EFFECTS)
def test_influence_sums_to_zero_and_is_zero_on_unused_dates(effects) -> None:
    sample = random_sample(2)
    weights = (np.arange(30) % 3 > 0).astype(float)
    found = fit(sample, effects=effects, weights=weights)
    np.testing.assert_allclose(found.influence.sum(axis=0), 0, atol=1e-12)
    assert not found.influence[weights == 0].any()
    assert (found.first, found.last) == (1, 29)


@pytest.mark.parametrize("effects", EFFECTS)
def test_nothing_changes_when_entities_are_renamed_or_blocks_are_small(effects, monkeypatch) -> None:
    sample = random_sample(4)
    order = np.random.default_rng(0).permutation(6)
    base, shuffled = fit(sample, effects=effects), fit(take(sample, order), effects=effects)
    np.testing.assert_allclose(shuffled.coefficients, base.coefficients, rtol=1e-11)
    np.testing.assert_allclose(shuffled.influence, base.influence, atol=1e-13)
    monkeypatch.setattr("carrylab.regression.effects.BLOCK", 7)
    np.testing.assert_allclose(fit(sample, effects=effects).influence, base.influence, atol=1e-13)


@settings(max_examples=60, deadline=None)
@given(
    seed=st.integers(0, 10_000),
    effects=st.sampled_from(EFFECTS),
    holes=st.floats(0, 0.5),
    legs=st.integers(2, 5),
    controls=st.integers(0, 2),
)
def test_weighted_slopes_sum_to_one_under_every_effect_and_pattern_of_holes(
    seed, effects, holes, legs, controls
) -> None:
    rng = np.random.default_rng(seed)
    T, N = int(rng.integers(12, 30)), int(rng.integers(3, 7))
    weights = rng.choice([-1.0, 1.0, 0.96], legs)
    y = rng.normal(size=(T, N, legs)) * 0.02
    x = np.concatenate([(y @ weights)[:, :, None], rng.normal(size=(T, N, controls))], axis=2)
    y[rng.random((T, N, legs)) < holes / legs] = np.nan
    found = fit(build(x, y), effects=effects)
    np.testing.assert_allclose(found.coefficients @ weights, np.eye(controls + 2)[0], atol=1e-9)
    # ... so that their influence series add up to nothing at all
    assert np.abs(found.influence @ weights).max() < 1e-9


def test_panels_in_two_unconnected_parts() -> None:
    # Entities 0-1 live on dates 0-4, entities 2-3 on dates 5-9: two parts, one parameter less each.
    rng = np.random.default_rng(0)
    x, y = rng.normal(size=(10, 4, 1)), rng.normal(size=(10, 4, 1))
    x[:5, 2:], x[5:, :2] = np.nan, np.nan
    sample = build(x, y)
    found = fit(sample, effects="both")
    assert found.parameters == 1 + 4 + 10 - 2
    np.testing.assert_allclose(found.coefficients[:-1], dummies(sample, "both", np.ones(10))[0], rtol=1e-9)


def test_large_means_cost_no_digits() -> None:
    sample = random_sample(8, holes=0.0)
    moved = build(sample.x + 1e6, sample.y - 1e6)
    for effects in EFFECTS:
        near, far = fit(sample, effects=effects), fit(moved, effects=effects)
        np.testing.assert_allclose(far.coefficients[:-1], near.coefficients[:-1], rtol=1e-8)


def one_line(sample, effects="entity") -> str:
    with pytest.raises(SampleError) as caught:
        fit(sample, effects=effects)
    assert "\n" not in str(caught.value)
    return str(caught.value)


def test_what_a_sample_cannot_carry_is_said_in_one_line() -> None:
    rng = np.random.default_rng(0)
    x, y = rng.normal(size=(9, 3, 2)), rng.normal(size=(9, 3, 2))
    fixed = x.copy()
    fixed[:, :, 0] = 0.1 * np.arange(3)
    message = one_line(build(fixed, y, label="by maturity 24m"))
    assert message.startswith("by maturity 24m: 'x0' does not vary once the entity effects are out")
    same = x.copy()
    same[:, :, 1] = 2 * same[:, :, 0] + np.arange(3)
    assert "'x1' is explained exactly by x0" in one_line(build(same, y))
    common = x.copy()
    common[:, :, 0] = np.arange(9)[:, None]
    assert "'x0' does not vary once entity and time effects are out" in one_line(build(common, y), "both")
    empty = y.copy()
    empty[:, :, 1] = np.nan
    assert "'y1' has no value at all" in one_line(build(x, empty))
    apart = x.copy()
    apart[::2] = np.nan
    never = y.copy()
    never[1::2] = np.nan
    assert "no row in which the signal, every control and every leg stand" in one_line(build(apart, never))
    assert "only one observation is left" in one_line(take(build(x[:1], y[:1]), [0], label="QM"))
    assert "3 rows cannot carry 3 parameters" in one_line(take(build(x[:3], y[:3]), [0]))


def test_arrays_are_read_only_and_inputs_untouched() -> None:
    x, y = np.full((4, 2, 1), np.nan), np.ones((4, 2, 1))
    sample = build(x, y)
    assert np.isnan(x).all()
    for values in (sample.x, sample.y, sample.mask, take(sample, [1]).x):
        with pytest.raises(ValueError, match="read-only"):
            values[0] = 0
