"""Draws under the null: by hand, against the routines on each draw one by one, and their size."""

from concurrent.futures import ThreadPoolExecutor
from dataclasses import replace

import numpy as np
import pytest

import carrylab.regression.draws
from carrylab.errors import InferenceError
from carrylab.regression.covariance import ErrorOptions, standard_errors
from carrylab.regression.draws import SCHEMES, Case, draw, picked, prepare, simulate
from carrylab.regression.draws_measure import Question, window_sums
from carrylab.regression.draws_null import Fed, dated_shocks, fit_null, pooled_shocks, shock_pool
from carrylab.regression.draws_tests import equal_tailed
from carrylab.regression.fit import fit
from carrylab.regression.sample import OneStep, make_sample, take


def world(
    seed=0, T=90, N=4, h=3, *, phi=0.9, link=-0.8, holes=0.0, controls=0, null=0.0, weights=None, late=0, through=0.0
):
    """A panel in which nothing predicts, and whose shocks to signal and outcome go together."""
    rng = np.random.default_rng(seed)
    weights = np.ones(h) if weights is None else np.asarray(weights)
    one = rng.standard_normal((T, N)) + rng.standard_normal((T, 1))
    shocks = link * one + rng.standard_normal((T, N))
    signal = rng.standard_normal((T, N))
    for t in range(1, T):
        signal[t] = phi * signal[t - 1] + shocks[t]
    signal[rng.random((T, N)) < holes] = np.nan
    signal[:late, -1] = np.nan
    leg = np.full((T, N), np.nan)
    for t in range(T - h):
        leg[t] = weights @ one[t + 1 : t + 1 + h]
    one[rng.random((T, N)) < holes / 4] = np.nan
    x = rng.standard_normal((T, N, controls))
    return case_of(signal, leg + null * signal, OneStep(one, weights), h, null, x, through=through)


def case_of(signal, leg, one_step, h, null=0.0, controls=None, effects="entity", groups=None, through=0.0):
    T, N = signal.shape
    x = signal[:, :, None] if controls is None else np.concatenate([signal[:, :, None], controls], axis=2)
    sample = make_sample(
        x,
        leg[:, :, None],
        terms=[f"x{k}" for k in range(x.shape[2])],
        legs=["return"],
        steps=np.where(np.arange(T) < T - h, h, 0),
        overlap=h - 1,
        one_step=[one_step],
    )
    groups = groups or (np.arange(N), *(np.array([i]) for i in range(N)))
    return Case(Question(sample, 0, null, effects, through), signal, groups, tuple(f"entity {i}" for i in range(N)))


def with_effects(case, effects, groups=None):
    question = replace(case.question, effects=effects)
    return Case(question, case.signal, groups or case.groups, case.entities)


def by_routines(sample, question, group):
    """Slope, t (1B), t (cosine) and R2 by the routines of the package, one sample at a time."""
    part = take(sample, group)
    found = fit(part, effects=question.effects)
    errors = [standard_errors(part, found, ErrorOptions(kind)).std_error[0, 0] for kind in ("one-period", "cosine")]
    slope = found.coefficients[0, 0]
    return [slope, (slope - question.null) / errors[0], (slope - question.null) / errors[1], found.r2[0]]


def drawn_sample(case, signal, outcome):
    """A Sample from one draw, with plain loops over origins and steps, and the holes of the data."""
    sample, one = case.question.sample, case.question.sample.one_step[0]
    beside = case.question.null - case.question.through
    T, N = signal.shape
    leg = np.full((T, N), np.nan)
    for t in range(T):
        for i in range(N):
            if sample.mask[t, i]:
                ahead = sum(one.weights[s - 1] * outcome[t + s, i] for s in range(1, sample.steps[t] + 1))
                leg[t, i] = beside * signal[t, i] + ahead
    x = sample.x.copy()
    x[:, :, 0] = signal
    x[~sample.mask] = np.nan
    return make_sample(
        x,
        leg[:, :, None],
        terms=sample.terms,
        legs=sample.legs,
        steps=sample.steps,
        overlap=sample.overlap,
        one_step=[OneStep(np.where(np.isfinite(one.outcomes), outcome, np.nan), one.weights)],
    )


CASES = {
    "balanced": world(1),
    "holes and a late start": world(2, holes=0.06, late=30),
    "weights and a null of minus one": world(3, weights=[1.0, 0.9, 0.81], null=-1.0, holes=0.03),
    "a slope of one through one-period outcomes": world(
        10, null=1.0, through=1.0, weights=[1.0, 0.9, 0.81], holes=0.03
    ),
    "two added predictors": world(4, controls=2, holes=0.03),
    "no effects": with_effects(world(5, holes=0.03, N=3), "none"),
    "time effects": with_effects(world(6, holes=0.03), "time", (np.arange(4), np.array([0, 2, 3]))),
    "both effects": with_effects(world(7, holes=0.03, N=5), "both", (np.arange(5), np.array([0, 1, 4]))),
    "one period ahead": world(8, h=1),
    "groups of two": with_effects(world(9, holes=0.03), "entity", (np.array([0, 1]), np.array([1, 3]))),
}


@pytest.mark.parametrize("scheme", SCHEMES)
@pytest.mark.parametrize("name", CASES)
def test_each_draw_is_regressed_as_the_routines_regress_the_data(name, scheme):
    case, count = CASES[name], 3
    found = draw([case], count, seed=5, scheme=scheme)
    (one,) = prepare([case], scheme)
    stream = np.random.default_rng(5).spawn(1)[0]
    signal, outcome = simulate(one, picked(stream, (len(case.signal), count), one.shocks.shape[1], scheme))
    measures = [found.draws.slope, found.draws.one_period, found.draws.cosine, found.draws.r2]
    for b in range(count):
        sample = drawn_sample(case, signal[:, :, b], outcome[:, :, b])
        wanted = [by_routines(sample, case.question, group) for group in case.groups]
        assert np.allclose(np.array([part[b] for part in measures]).T, wanted, rtol=1e-9, atol=1e-12)


@pytest.mark.parametrize("name", CASES)
def test_on_the_data_the_statistics_are_those_of_the_routines(name):
    case = CASES[name]
    data = draw([case], 2, seed=1).data
    wanted = [by_routines(case.question.sample, case.question, group) for group in case.groups]
    assert np.allclose(np.array([data.slope, data.one_period, data.cosine, data.r2]).T, wanted, rtol=1e-9)


def test_two_dates_by_hand():
    """Six dates of pairs are too few to fit, so the null is fitted to more and its recursion worked by hand."""
    case = world(3, T=20, N=1, h=1, phi=0.5)
    (one,) = prepare([case], "resampled")
    picks = np.array([[0], [3], [1]])
    signal, outcome = simulate(one, picks)
    e, v = one.shocks[:, :, 0]
    phi, mean, first = one.null.persistence[0], one.null.mean[0], case.signal[0, 0]
    assert np.allclose(outcome[:, 0, 0], e[[0, 3, 1]])
    x1 = mean + phi * (first - mean) + v[3]
    assert np.allclose(signal[:, 0, 0], [first, x1, mean + phi * (x1 - mean) + v[1]])


def test_a_wild_draw_keeps_dates_in_order_and_turns_both_shocks_of_all_entities_at_once():
    (one,) = prepare([world(3, N=2, h=2)], "wild")
    signs = np.ones((90, 1))
    signs[40:] = -1.0
    _, outcome = simulate(one, signs)
    assert np.allclose(outcome[:, :, 0], signs * one.null.outcome)
    assert np.allclose(one.shocks[1][1:], one.null.signal[1:])


def test_signs_come_up_alike_often():
    signs = picked(np.random.default_rng(0), (200, 200), 0, "wild")
    assert set(np.unique(signs)) == {-1.0, 1.0}
    assert abs(signs.mean()) < 0.02


def test_persistence_under_the_null_by_hand():
    """The slope on x_t in the regression on (1, x_t, e_{t+1}), plus (1 - delta^2)(1 + 3 phi)/n."""
    rng = np.random.default_rng(0)
    x, y = rng.standard_normal((2, 30))
    x[1:] += 0.7 * x[:-1]
    found = fit_null(x[:, None], y[:, None], ["one"])
    e = y - y.mean()
    full = np.column_stack([np.ones(29), x[:-1], e[1:]])
    phi = np.linalg.lstsq(full, x[1:], rcond=None)[0][1]
    left = x[1:] - full[:, :2] @ np.linalg.lstsq(full[:, :2], x[1:], rcond=None)[0]
    delta = np.corrcoef(left, e[1:])[0, 1]
    corrected = phi + (1 - delta**2) * (1 + 3 * phi) / 29
    assert found.persistence[0] == pytest.approx(corrected)
    assert not found.capped[0]
    v = x[1:] - x.mean() - corrected * (x[:-1] - x.mean())
    assert np.allclose(found.signal[1:, 0], v - v.mean())
    assert found.start[0] == pytest.approx(x[0] - x.mean())


def test_a_slope_imposed_on_window_sums_comes_through_single_periods():
    """Root .5, two steps of weight 1: a sum of slope 1 needs 1/(1 + .5) in each period; weights .5 halve their sum."""
    assert Fed(1.0, np.ones(2)).one_period(np.array([0.5])) == pytest.approx(2 / 3)
    assert Fed(1.0, np.full(2, 0.5)).one_period(np.array([0.5])) == pytest.approx(4 / 3)


def test_the_shocks_of_an_imposed_slope_by_hand():
    """One period ahead with slope 1: the shock is outcome less signal, mean out, and persistence is fitted with it."""
    rng = np.random.default_rng(0)
    x, y = rng.standard_normal((2, 30))
    x[1:] += 0.7 * x[:-1]
    found = fit_null(x[:, None], y[:, None], ["one"], Fed(1.0, np.ones(1)))
    shock = y[1:] - x[:-1]
    assert np.allclose(found.outcome[1:, 0], shock - shock.mean())
    plain = fit_null(x[:, None], np.append(0.0, shock)[:, None], ["one"])
    assert found.persistence[0] == pytest.approx(plain.persistence[0], abs=1e-3)
    assert (found.feed[0], found.level[0]) == pytest.approx((1.0, x.mean()))


@pytest.mark.parametrize("effects", ["entity", "none"])
def test_drawn_slopes_scatter_around_the_slope_imposed(effects):
    """Shocks of signal and outcome apart, so that there is no bias; 12 months, entity means far apart."""
    case = world(12, T=1500, N=5, h=12, phi=0.5, link=0.0, null=1.0, through=1.0)
    case = replace(case, signal=case.signal + 5 * np.arange(5.0), groups=(np.arange(5),))
    question = replace(case.question, effects=effects, sample=shifted(case.question.sample, 5 * np.arange(5.0)))
    found = draw([replace(case, question=question)], 400, seed=2).draws
    assert abs(found.slope.mean() - 1.0) < 4 * found.slope.std() / 20
    assert abs(found.cosine.mean()) < 0.25


def shifted(sample, by):
    x = sample.x + np.where(sample.mask, by, 0.0)[:, :, None]
    return replace(sample, x=x)


def test_persistence_is_capped_and_said_to_be():
    found = fit_null(np.exp(0.05 * np.arange(60.0))[:, None], np.random.default_rng(0).standard_normal((60, 1)), ["a"])
    assert found.persistence[0] == 0.999
    assert found.capped[0]


def test_an_entity_missing_on_a_drawn_date_takes_its_own_dates_in_turn():
    signal = np.random.default_rng(1).standard_normal((40, 3))
    signal[:20, 1:] = np.nan
    outcomes = np.random.default_rng(2).standard_normal((40, 3))
    null = fit_null(signal, outcomes, ["a", "b", "c"])
    pool = shock_pool([null.pairs])
    assert np.array_equal(pool, np.arange(1, 40))
    shocks = pooled_shocks(null, pool)
    assert np.allclose(shocks.mean(axis=1), 0.0)
    # The late ones stand on rows 21 to 39; of their 20 missing rows the first takes row 21, the last row 21 again.
    own = np.arange(21, 40)
    order = np.concatenate([own, own[:1], own])
    for part, raw in zip(shocks, (null.outcome, null.signal), strict=True):
        filled = raw[order, 1:]
        assert np.allclose(part[:, 1:], filled - filled.mean(axis=0))


def test_shocks_by_date_stand_on_their_own_date_where_they_stand():
    case = world(2, holes=0.06, late=30)
    null = fit_null(case.signal, case.question.sample.one_step[0].outcomes, case.entities)
    outcome, signal = dated_shocks(null)
    assert np.array_equal(outcome[np.isfinite(null.outcome)], null.outcome[np.isfinite(null.outcome)])
    assert np.array_equal(signal[np.isfinite(null.signal)], null.signal[np.isfinite(null.signal)])
    assert np.isfinite(outcome).all()
    assert np.isfinite(signal).all()


def test_window_sums_by_hand():
    """Two steps with weights 1 and .5 on four dates; the third origin's second step lies beyond the sample."""
    ahead = window_sums(np.array([2, 1, 2, 0]), np.array([1.0, 0.5])).toarray()
    assert np.array_equal(ahead, [[0, 1, 0.5, 0], [0, 0, 1, 0], [0, 0, 0, 1], [0, 0, 0, 0]])


def last_first(work, streams, counts):
    """A worker that takes the last chunk first."""
    done = [work(*job) for job in reversed(list(zip(streams, counts, strict=True)))]
    return done[::-1]


@pytest.mark.parametrize("scheme", SCHEMES)
def test_any_number_of_workers_gives_the_same_bits(scheme, monkeypatch):
    monkeypatch.setattr("carrylab.regression.draws.CHUNK", 1 << 12)
    case = world(2, holes=0.05, late=20)
    one = draw([case], 100, seed=9, scheme=scheme)
    with ThreadPoolExecutor(3) as pool:
        three = draw([case], 100, seed=9, scheme=scheme, spread=pool.map)
    backwards = draw([case], 100, seed=9, scheme=scheme, spread=last_first)
    for name in ("slope", "one_period", "cosine", "r2"):
        first = getattr(one.draws, name)
        assert first.shape == (100, 5)
        assert len(np.unique(first)) == first.size
        assert np.array_equal(first, getattr(three.draws, name))
        assert np.array_equal(first, getattr(backwards.draws, name))


def test_cases_drawn_together_share_their_dates():
    """The same panel twice gives the same draws; another seed gives others; a horizon beside it changes nothing."""
    case, longer = world(1, h=3), world(1, h=6)
    both = draw([case, longer, case], 20, seed=3).draws.one_period
    assert np.array_equal(both[:, :5], both[:, 10:])
    assert np.array_equal(both[:, :5], draw([case], 20, seed=3).draws.one_period)
    assert not np.array_equal(both[:, :5], draw([case], 20, seed=4).draws.one_period)
    assert np.corrcoef(both[:, 0], both[:, 5])[0, 1] > 0.3


def test_a_case_that_repeats_another_is_measured_once(monkeypatch):
    measured, made = carrylab.regression.draws.measured, []
    monkeypatch.setattr("carrylab.regression.draws.measured", lambda one, picks: made.append(1) or measured(one, picks))
    case, other = world(1), world(1, null=1.0, through=1.0)
    found = draw([case, other, case], 5, seed=1)
    assert len(made) == 2
    assert found.draws.slope.shape == (5, 15)
    assert np.array_equal(found.draws.slope[:, :5], found.draws.slope[:, 10:])
    assert np.array_equal(found.nulls, np.repeat([0.0, 1.0, 0.0], 5))


def test_an_entity_without_rows_changes_nothing():
    case = world(1, N=2)
    empty = np.full((90, 1), np.nan)
    wide = case_of(
        np.hstack([empty, case.signal]),
        np.hstack([empty, np.where(case.question.sample.mask, case.question.sample.y[:, :, 0], np.nan)]),
        OneStep(np.hstack([empty, case.question.sample.one_step[0].outcomes]), np.ones(3)),
        3,
        groups=(np.arange(3), np.array([1]), np.array([2])),
    )
    assert np.array_equal(draw([wide], 10, seed=1).draws.cosine, draw([case], 10, seed=1).draws.cosine)


def test_what_cannot_be_drawn_is_refused_in_one_line():
    case = world(1)
    stepwise = case_of(case.signal, case.question.sample.y[:, :, 0], OneStep(np.zeros((90, 4, 3)), np.ones(3)), 3)
    with pytest.raises(InferenceError, match="by origin and step"):
        draw([stepwise], 5, seed=1)
    with pytest.raises(InferenceError, match="no one-period outcomes"):
        draw([case_of(case.signal, case.signal, None, 3)], 5, seed=1)
    with pytest.raises(InferenceError, match="one calendar"):
        draw([case, world(1, T=80)], 5, seed=1)
    short = case.signal.copy()
    short[12:, 2] = np.nan
    with pytest.raises(InferenceError, match="entity 2 has 11 dates"):
        draw([case_of(short, case.question.sample.y[:, :, 0], case.question.sample.one_step[0], 3)], 5, seed=1)


def test_the_words_say_what_was_drawn():
    words = draw([world(1)], 5, seed=7, scheme="wild").words
    assert words.startswith("5 draws under the null, dates in order, one random sign a date")
    assert words.endswith("persistence estimated under the null, seed 7")
    assert "added predictors kept at their data, seed 7" in draw([world(4, controls=1)], 5, seed=7).words


def test_few_draws_and_a_capped_persistence_are_said():
    """At 199 draws a p of .05 has an error of sqrt(.05 x .95/199) = .0154."""
    trending = world(1, N=2)
    signal = np.column_stack([np.exp(0.05 * np.arange(90.0)), trending.signal[:, 1]])
    leg = np.where(trending.question.sample.mask, trending.question.sample.y[:, :, 0], np.nan)
    case = case_of(signal, leg, trending.question.sample.one_step[0], 3)
    capped, few = draw([case], 199, seed=1).warnings
    assert capped.startswith("the persistence of entity 0 was held at 0.999")
    assert few.startswith("199 draws leave a p-value of .05 uncertain by 0.015")
    assert draw([trending], 999, seed=1).warnings == ()


def test_the_size_of_the_draws_on_a_dividend_yield():
    """One series, T 240, root .985, shocks correlated -.9, 12 months: near 5%; 1B by normal tables has 7-14%."""
    rng = np.random.default_rng(11)
    rejected = np.zeros(2)
    for _ in range(150):
        one, extra = rng.standard_normal((2, 240, 1))
        signal = rng.standard_normal((240, 1)) / np.sqrt(1 - 0.985**2)
        for t in range(1, 240):
            signal[t] = 0.985 * signal[t - 1] - 0.9 * one[t] + np.sqrt(1 - 0.81) * extra[t]
        leg = np.full((240, 1), np.nan)
        for t in range(228):
            leg[t] = one[t + 1 : t + 13].sum(axis=0)
        found = draw([case_of(signal, leg, OneStep(one, np.ones(12)), 12, groups=(np.array([0]),))], 199, seed=1)
        rejected[0] += equal_tailed(found.data.one_period, found.draws.one_period)[0] <= 0.05
        rejected[1] += equal_tailed(found.data.cosine, found.draws.cosine)[0] <= 0.05
    assert (rejected / 150 > 0.01).all()
    assert (rejected / 150 < 0.12).all()
