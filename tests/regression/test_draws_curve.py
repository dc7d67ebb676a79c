"""Draws of curves: loadings and claims by hand, each draw against the routines, what is refused, and the size."""

from concurrent.futures import ThreadPoolExecutor

import numpy as np
import pytest

from carrylab.errors import InferenceError
from carrylab.regression.covariance import ErrorOptions, standard_errors
from carrylab.regression.draws_curve import (
    Claims,
    Curves,
    claims_of,
    draw_curves,
    forward_spot_claims,
    simulate_curves,
)
from carrylab.regression.draws_curve_null import average_weights, choose_roots, fit_curves, state_of
from carrylab.regression.draws_measure import Question
from carrylab.regression.draws_tests import equal_tailed
from carrylab.regression.fit import fit
from carrylab.regression.sample import make_sample, take

MATURITIES = np.array([1, 12, 24, 36, 48, 60])
ROOTS = (0.7, 0.94, 0.99)


def expectations(seed, T=240, N=1, *, roots=ROOTS, shock=0.003, noise=3e-4):
    """Yields (T, N, M) that hold the expectations hypothesis, plus noise of three basis points."""
    rng = np.random.default_rng(seed)
    yields = np.full((T, N, len(MATURITIES)), 0.05)
    for root in roots:
        factor = shock * (rng.standard_normal((T, N)) + rng.standard_normal((T, 1))) / np.sqrt(2)
        factor[0] /= np.sqrt(1 - root**2)
        for t in range(1, T):
            factor[t] += root * factor[t - 1]
        yields += factor[:, :, None] * average_weights(np.array([root]), MATURITIES)[:, 0]
    return yields + noise * rng.standard_normal(yields.shape)


def claims(yields, long=(24, 60), holding=12, *, effects="entity", controls=0):
    """Forward-spot claims of every economy on every maturity, their legs worked from prices."""
    (T, N, _), place = yields.shape, {int(n): m for m, n in enumerate(MATURITIES)}
    price = -yields * MATURITIES / 12
    signal, leg = [], []
    for n in long:  # h y(h) = -p(h), so both sides hold p(n) - p(h)
        now = price[:, :, place[n]] - price[:, :, place[holding]]
        signal.append(price[:, :, place[n - holding]] - now)
        held = np.full((T, N), np.nan)
        held[:-holding] = price[holding:, :, place[n - holding]] - now[:-holding]
        leg.append(held)
    signal, leg = (np.concatenate(part, axis=1) for part in (signal, leg))
    x = np.concatenate([signal[:, :, None], np.zeros((T, signal.shape[1], controls))], axis=2)
    sample = make_sample(
        x,
        leg[:, :, None],
        terms=[f"x{k}" for k in range(1 + controls)],
        legs=["return"],
        steps=np.where(np.arange(T) < T - holding, holding, 0),
        overlap=holding - 1,
        one_step=[None],
    )
    count = signal.shape[1]
    weights = forward_spot_claims(MATURITIES, np.repeat(long, N), holding, 1 / 12)
    groups = (np.arange(count), *(np.array([e]) for e in range(count)))
    return Claims(Question(sample, 0, 0.0, effects), groups, np.tile(np.arange(N), len(long)), *weights)


def curves_of(yields):
    return Curves(yields, MATURITIES, tuple(f"E{i}" for i in range(yields.shape[1])))


def test_weights_of_the_average_by_hand():
    """Mean of 1, .5, .25 is .5833; for one period it is one."""
    assert np.allclose(average_weights(np.array([0.5]), np.array([1, 3]))[:, 0], [1.0, 1.75 / 3])


def test_the_state_is_the_shortest_the_middle_and_the_longest():
    assert state_of(MATURITIES).tolist() == [0, 2, 5]


def test_forward_spot_weights_by_hand():
    """Two years held one: spread 2 y(2) - 2 y(1), return 2 y(2) - y(1) today less y(1) a year later."""
    signal, now, later = forward_spot_claims(MATURITIES, np.array([24]), 12, 1 / 12)
    assert np.allclose(signal, [[0, -2, 2, 0, 0, 0]])
    assert np.allclose(now, [[0, -1, 2, 0, 0, 0]])
    assert np.allclose(later, [[0, -1, 0, 0, 0, 0]])


def test_claims_are_those_worked_from_prices():
    yields = expectations(1, N=2)
    case = claims(yields)
    signal, held = claims_of(case, yields[:, :, :, None])
    rows = case.question.sample.mask
    assert np.allclose(signal[:, :, 0][rows], case.question.sample.x[:, :, 0][rows])
    assert np.allclose(held[:, :, 0][rows], case.question.sample.y[:, :, 0][rows])


def test_roots_that_are_on_the_grid_are_found():
    yields = expectations(2, T=6000, roots=(0.7, 0.94, 0.99), noise=0.0)[:, 0]
    z = yields[:, state_of(MATURITIES)]
    found = choose_roots(z[:-1] - z[:-1].mean(axis=0), z[1:] - z[1:].mean(axis=0), MATURITIES[state_of(MATURITIES)])
    assert np.allclose(found, [0.7, 0.94, 0.99], atol=0.011)


def test_drawn_curves_hold_the_hypothesis():
    """Without noise the expected yields ahead are in the curve: 12 y(12) = sum of the next twelve one-month yields.

    Over many draws their difference has no slope on any spread; here it has mean zero date by date.
    """
    null = fit_curves(expectations(3, T=200, noise=1e-9), MATURITIES, ["E"])
    drawn = simulate_curves(null, MATURITIES, (40, 20_000), np.random.default_rng(0))[:, 0]
    today, ahead = drawn[20], drawn[20:32, 0].mean(axis=0)
    news = ahead - today[1]
    error = news.std() / np.sqrt(news.size)
    assert abs(news.mean()) < 4 * error
    spread = today[5] - today[0]
    assert abs(np.corrcoef(news, spread)[0, 1]) < 4 / np.sqrt(news.size)


def test_a_draw_by_hand():
    """Factors from their start, each moved on by its own root and one date's shocks; yields are loadings of them."""
    null = fit_curves(expectations(4, noise=1e-9), MATURITIES, ["E"])
    picks = np.random.default_rng(7).integers(0, len(null.shocks), (3, 1))[:, 0]
    drawn = simulate_curves(null, MATURITIES, (3, 1), np.random.default_rng(7))[:, 0, :, 0]
    one = null.roots[0] * null.start[0] + null.shocks[picks[1], 0]
    two = null.roots[0] * one + null.shocks[picks[2], 0]
    assert np.allclose(drawn, [null.loadings[0] @ factor for factor in (null.start[0], one, two)], atol=1e-7)


def by_routines(sample, question, group):
    part = take(sample, group)
    found = fit(part, effects=question.effects)
    errors = [standard_errors(part, found, ErrorOptions(kind)).std_error[0, 0] for kind in ("cosine", "bartlett")]
    slope = found.coefficients[0, 0]
    return [slope, slope / errors[0], slope / errors[1], found.r2[0]]


@pytest.mark.parametrize("effects", ["entity", "none"])
def test_data_and_each_draw_are_regressed_as_the_routines_do(effects):
    yields = expectations(5, N=2)
    yields[60, 0, 2] = np.nan
    yields[:40, 1] = np.nan
    case = claims(yields, effects=effects)
    found = draw_curves(curves_of(yields), [case], 2, seed=3)
    drawn = simulate_curves(found.fitted, MATURITIES, (240, 2), np.random.default_rng(3).spawn(1)[0])
    samples = [case.question.sample]
    for b in range(2):
        again = claims(drawn[..., b], effects=effects).question.sample
        x, y = again.x.copy(), again.y.copy()
        x[~case.question.sample.mask] = np.nan
        samples.append(
            make_sample(x, y, terms=["x0"], legs=["return"], steps=again.steps, overlap=again.overlap, one_step=[None])
        )
    every = [
        np.vstack([getattr(found.data, name), getattr(found.draws, name)])
        for name in ("slope", "cosine", "bartlett", "r2")
    ]
    for b, sample in enumerate(samples):
        wanted = [by_routines(sample, case.question, group) for group in case.groups]
        assert np.allclose(np.array([part[b] for part in every]).T, wanted, rtol=1e-8)


def test_any_number_of_workers_gives_the_same_bits(monkeypatch):
    monkeypatch.setattr("carrylab.regression.draws.CHUNK", 1 << 14)
    yields = expectations(6, N=2)
    one = draw_curves(curves_of(yields), [claims(yields)], 60, seed=1)
    with ThreadPoolExecutor(3) as pool:
        three = draw_curves(curves_of(yields), [claims(yields)], 60, seed=1, spread=pool.map)
    assert len(np.unique(one.draws.cosine)) == 60 * 5
    assert np.array_equal(one.draws.cosine, three.draws.cosine)
    assert np.array_equal(one.draws.bartlett, three.draws.bartlett)


def test_what_cannot_be_drawn_is_refused_by_name():
    walk = np.cumsum(0.003 * np.random.default_rng(0).standard_normal(400))
    flat = 0.05 + walk[:, None, None] + 2e-4 * np.random.default_rng(1).standard_normal((400, 1, 6))
    with pytest.raises(InferenceError, match=r"E0: the slowest root of its curve is 0\.9995"):
        draw_curves(curves_of(flat), [claims(flat)], 5, seed=1)
    rough = expectations(7, noise=3e-3)
    with pytest.raises(InferenceError, match="E0: three factors miss its yields by"):
        draw_curves(curves_of(rough), [claims(rough)], 5, seed=1)
    with pytest.raises(InferenceError, match="E0 has 49 dates"):
        draw_curves(curves_of(expectations(8, T=50)), [], 5, seed=1)
    with pytest.raises(InferenceError, match="four maturities"):
        fit_curves(expectations(8)[:, :, :3], MATURITIES[:3], ["E0"])
    two = expectations(9)
    with pytest.raises(InferenceError, match="the signal alone, here is also 'x1'"):
        draw_curves(curves_of(two), [claims(two, controls=1)], 5, seed=1)


def test_the_words_name_roots_and_fitting_error():
    yields = expectations(10)
    found = draw_curves(curves_of(yields), [claims(yields)], 5, seed=4)
    assert "three roots (E0 " in found.words
    assert f"fitting error {1e4 * found.fitted.noise[0]:.1f} bp" in found.words


def test_the_fitting_error_is_that_of_the_yields_left_over():
    """A basis point of noise, in each yield and in the state it is set against: sqrt(1 + w'w) bp on average."""
    state = state_of(MATURITIES)
    others = np.setdiff1d(np.arange(6), state)
    loads = average_weights(np.array(ROOTS), MATURITIES)
    weights = loads[others] @ np.linalg.inv(loads[state])
    wanted = np.sqrt(1.0 + (weights**2).sum(axis=1).mean())
    found = fit_curves(expectations(10, T=2000, noise=1e-4), MATURITIES, ["E"])
    assert 1e4 * found.noise[0] == pytest.approx(wanted, rel=0.03)


def test_the_size_of_the_draws_on_a_three_root_world():
    """T 240, five years held one: near 5%, where Newey-West of lag 11 by normal tables rejects a fifth and more."""
    drawn = asymptotic = 0
    for sample in range(120):
        yields = expectations(1000 + sample)
        found = draw_curves(curves_of(yields), [claims(yields, long=(60,))], 199, seed=sample)
        drawn += equal_tailed(found.data.cosine, found.draws.cosine)[0] <= 0.05
        asymptotic += abs(found.data.bartlett[0]) > 1.96
    assert 0.01 < drawn / 120 < 0.12
    assert asymptotic / 120 > 0.15
