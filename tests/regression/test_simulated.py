"""Many simulated samples at once: every number against the routines on each sample, and the worlds by hand."""

from concurrent.futures import ThreadPoolExecutor
from dataclasses import replace

import numpy as np
import pytest

from carrylab.errors import InferenceError
from carrylab.regression.bias import predicted_bias
from carrylab.regression.calibrated import simulate
from carrylab.regression.covariance import ERRORS, ErrorOptions, standard_errors
from carrylab.regression.draws_curve import Claims, forward_spot_claims
from carrylab.regression.draws_curve_null import average_weights, fit_curves
from carrylab.regression.draws_measure import Question
from carrylab.regression.fit import fit
from carrylab.regression.sample import OneStep, make_sample
from carrylab.regression.simulated import frame_of, sample_of
from carrylab.regression.simulated_curves import CurveWorld, life_of
from carrylab.regression.simulated_errors import KINDS, measure, offer
from carrylab.regression.simulated_worlds import by_steps_world, moving_average_world, one_period_world

EXACT = 1e-10
SLOPES = (0.0, 0.6, -2.0)


def panel(seed=0, T=90, N=4, h=6, *, holes=0.05, controls=0, phi=0.93, steps=False, one_period=True, late=25):
    """Signal and h-period outcomes with holes, a late start and missing one-period outcomes."""
    rng = np.random.default_rng(seed)
    one = rng.standard_normal((T, N)) + rng.standard_normal((T, 1))
    shocks = -0.6 * one + rng.standard_normal((T, N))
    x = np.zeros((T, N))
    for t in range(1, T):
        x[t] = phi * x[t - 1] + shocks[t]
    y = np.full((T, N), np.nan)
    by_step = np.full((T, N, h), np.nan)
    for t in range(T - h):
        y[t] = one[t + 1 : t + 1 + h].sum(axis=0)
        by_step[t] = one[t + 1 : t + 1 + h].T
    x[rng.random((T, N)) < holes] = np.nan
    x[:late, -1] = np.nan
    outcomes = by_step if steps else one
    outcomes[rng.random(outcomes.shape) < holes / 5] = np.nan
    terms = np.concatenate([x[:, :, None], rng.standard_normal((T, N, controls)).cumsum(axis=0)], axis=2)
    sample = make_sample(
        terms,
        y[:, :, None],
        terms=[f"x{k}" for k in range(1 + controls)],
        legs=["return"],
        steps=np.where(np.arange(T) < T - h, h, 0),
        overlap=h - 1,
        one_step=[OneStep(outcomes, np.ones(h)) if one_period else None],
    )
    return sample, x


def staged(case, effects="entity", make=one_period_world, scheme="resampled"):
    sample, signal = case
    frame = frame_of(sample, 0, effects)
    return frame, make(frame, signal, [f"E{i}" for i in range(signal.shape[1])], scheme)


CASES = {
    "balanced": staged(panel(1, holes=0.0, late=0)),
    "holes and a late start": staged(panel(2)),
    "wild": staged(panel(3), scheme="wild"),
    "no effects": staged(panel(4), "none"),
    "time effects": staged(panel(5), "time"),
    "both effects": staged(panel(6), "both"),
    "two added predictors": staged(panel(7, controls=2)),
    "two added predictors and both effects": staged(panel(8, controls=2), "both"),
    "one series, no overlap": staged(panel(9, N=1, h=1, late=0)),
    "one short series, long overlap": staged(panel(10, T=60, N=1, h=12, late=0, holes=0.0)),
    "outcomes by step": staged(panel(11, steps=True), make=by_steps_world),
    "outcomes by step, wild, no effects": staged(panel(12, steps=True), "none", by_steps_world, "wild"),
    "no one-period outcomes": staged(panel(13, one_period=False, late=0, holes=0.01), make=moving_average_world),
}


def offers_of(frame):
    return [offer(frame, ErrorOptions(kind)) for kind in ERRORS]


def compared(frame, world, samples=3):
    """Every kind on simulated samples, by the routines of the package one sample at a time; kinds that stood in."""
    offers = offers_of(frame)
    drawn = world.simulate(np.random.default_rng(4), samples)[0]
    parts = {(r, b): sample_of(frame, drawn, r, b) for r in range(samples) for b in SLOPES}
    found = measure(frame, drawn, offers)
    stood_in = set()
    for (r, b), sample in parts.items():
        estimate = fit(sample, effects=frame.effects)
        for one in offers:
            if one.problem:
                continue
            wanted = standard_errors(sample, estimate, one.options)
            slope = (found[one.kind].slope[0] + b * found[one.kind].slope[1])[r]
            error = np.sqrt(found[one.kind].variance(b)[r])
            assert slope == pytest.approx(wanted.estimate.coefficients[0, 0], rel=EXACT)
            assert error == pytest.approx(wanted.std_error[0, 0], rel=EXACT)
            assert (one.df, one.bandwidth) == (wanted.df[0], wanted.bandwidth[0])
            stood_in |= {(one.kind, wanted.kinds[0])} if wanted.kinds[0] != one.kind else set()
            stood_in |= {(one.kind, text) for text in wanted.warnings if "stands in its place" in text}
    return {one.kind for one in offers if not one.problem}, stood_in


@pytest.mark.parametrize("name", CASES)
def test_every_kind_is_that_of_the_routines_on_each_sample(name):
    offered, _ = compared(*CASES[name])
    expected = set(ERRORS)
    if name.startswith("no one-period"):
        expected -= {"one-period", "instrument"}
    if CASES[name][0].mask.shape[1] == 1:
        expected -= {"clustered: entity", "clustered: both", "clustered: both, lagged"}
    assert offered == expected


def test_variances_that_are_not_positive_are_replaced_as_the_routines_replace_them():
    """A rectangular kernel over a fifth of a short series fails often, two-way clusters of two entities too."""
    _, series = compared(*CASES["one short series, long overlap"], samples=25)
    assert ("rectangular", "one-period") in series
    _, few = compared(*staged(panel(20, T=60, N=2, h=8, late=0, holes=0.0)), samples=40)
    assert {kind for kind, _ in few} >= {"rectangular", "clustered: both, lagged"}
    _, average = compared(
        *staged(panel(14, T=60, N=1, h=12, one_period=False, late=0, holes=0.0), make=moving_average_world), 25
    )
    assert any(kind == "rectangular" for kind, _ in average)


@pytest.mark.parametrize("name", [name for name, (frame, _) in CASES.items() if len(frame.there) == 1])
def test_the_bias_is_that_of_the_routines_on_each_sample(name):
    frame, world = CASES[name]
    drawn = world.simulate(np.random.default_rng(4), 2)[0]
    parts = {(r, b): sample_of(frame, drawn, r, b) for r in range(2) for b in SLOPES}
    found = measure(frame, drawn, [offer(frame, ErrorOptions("auto"))])["auto"]
    for (r, b), sample in parts.items():
        estimate = fit(sample, effects=frame.effects)
        error = float(standard_errors(sample, estimate, ErrorOptions("auto")).std_error[0, 0])
        ratio = found.shift.ratio(frame, b, np.sqrt(found.variance(b)))[r]
        assert ratio == pytest.approx(predicted_bias(sample, estimate, 0, error).ratio, rel=1e-9)


def test_the_table_of_kinds_is_that_of_the_routines():
    assert set(KINDS) == {*ERRORS, "auto"}


MATURITIES = np.arange(1, 10)


def curve_world(T=120, N=2, long=(6, 9), holding=3, seed=0):
    """Curves of nine maturities, claims on two of them held three periods, and their returns step by step."""
    rng = np.random.default_rng(seed)
    yields = np.full((T, N, len(MATURITIES)), 0.05)
    for root in (0.7, 0.94, 0.99):
        factor = 0.003 * rng.standard_normal((T, N))
        for t in range(1, T):
            factor[t] += root * factor[t - 1]
        yields += factor[:, :, None] * average_weights(np.array([root]), MATURITIES)[:, 0]
    yields += 2e-4 * rng.standard_normal(yields.shape)
    price = np.concatenate([np.zeros((T, N, 1)), -yields * MATURITIES / 12], axis=2)
    own = np.repeat(long, N)
    one = np.full((T, len(own), holding), np.nan)
    signal, held = np.empty((T, len(own))), np.full((T, len(own)), np.nan)
    for e, n in enumerate(own):
        # What the bond is worth less the one that matures at the horizon, s periods after it was bought.
        worth = [price[:, e % N, n - s] - price[:, e % N, holding - s] for s in range(holding + 1)]
        signal[:, e] = price[:, e % N, n - holding] - worth[0]
        held[:-holding, e] = worth[holding][holding:] - worth[0][:-holding]
        for s in range(1, holding + 1):
            one[: T - s, e, s - 1] = worth[s][s:] - worth[s - 1][s - 1 : T - 1]
    sample = make_sample(
        signal[:, :, None],
        held[:, :, None],
        terms=["signal"],
        legs=["return"],
        steps=np.where(np.arange(T) < T - holding, holding, 0),
        overlap=holding - 1,
        one_step=[OneStep(one, np.ones(holding))],
    )
    weights = forward_spot_claims(MATURITIES, own, holding, 1 / 12)
    claims = Claims(
        Question(sample, 0, 0.0, "entity"), (np.arange(len(own)),), np.tile(np.arange(N), len(long)), *weights
    )
    null = fit_curves(yields, MATURITIES, [f"E{i}" for i in range(N)], at_edge=True)
    life = life_of(MATURITIES, own, holding, np.full(len(own), 1 / 12))
    return frame_of(sample, 0, "entity"), CurveWorld(null, MATURITIES, T, (claims,), (life,))


def test_curves_every_kind_is_that_of_the_routines_on_each_sample():
    offered, _ = compared(*curve_world())
    assert offered == set(ERRORS)


def test_the_steps_of_a_bond_add_up_to_its_return():
    """In the data and in every sample, whatever is added to the slope."""
    frame, world = curve_world()
    for sample in (frame.sample, sample_of(frame, world.simulate(np.random.default_rng(1), 2)[0], 1, 0.7)):
        total = sample.one_step[0].outcomes.sum(axis=2)
        assert np.allclose(total[sample.mask], sample.y[:, :, 0][sample.mask], atol=1e-12)


def test_a_premium_by_hand():
    """One period ahead a slope of one adds the signal itself; two ahead kappa = 1/(1 + phi) of the next two."""
    frame, world = staged(panel(1, h=1, holes=0.0, late=0))
    drawn = world.simulate(np.random.default_rng(0), 2)[0]
    assert np.allclose(drawn.leg[1, :-1], drawn.signal[:-1])
    assert np.allclose(measure(frame, drawn, offers_of(frame))["classical"].slope[1], 1.0)
    frame, world = staged(panel(2, h=2, N=1, holes=0.0, late=0))
    drawn, phi, mean = world.simulate(np.random.default_rng(0), 1)[0], world.null.persistence[0], world.null.mean[0]
    away = drawn.signal[:, 0, 0] - mean
    assert np.allclose(drawn.leg[1, :-2, 0, 0], (away[:-2] + away[1:-1]) / (1 + phi) + mean)


def test_a_slope_of_one_is_one_on_average():
    """Over the horizon the premium that is added has slope one on the signal, up to what falls due inside it."""
    frame, world = staged(panel(3, T=600, N=3, h=12, holes=0.02))
    found = simulate(world, [frame], [offers_of(frame)[:1]], 200, seed=1, workers=map)[0]["classical"]
    assert found.slope[1].mean() == pytest.approx(1.0, abs=0.1)


def test_a_moving_average_has_the_leg_of_the_data():
    """Its variance is the data's, and overlap alone makes its autocorrelation, 1 - l/L."""
    sample, signal = panel(3, T=400, N=3, h=8, one_period=False, holes=0.0, late=0)
    frame = frame_of(sample, 0, "entity")
    world = moving_average_world(frame, signal, ["a", "b", "c"], "resampled")
    leg = world.simulate(np.random.default_rng(2), 100)[0].leg[0][:392]
    data = sample.y[:392, :, 0]
    assert np.allclose(leg.std(axis=(0, 2)), data.std(axis=0), rtol=0.1)
    for lag in (1, 4, 8):
        wanted = max(0.0, 1 - lag / 8)
        found = np.mean([np.corrcoef(leg[lag:, 0, b], leg[:-lag, 0, b])[0, 1] for b in range(100)])
        assert found == pytest.approx(wanted, abs=0.05)
    assert np.corrcoef(leg[:, 0].ravel(), leg[:, 1].ravel())[0, 1] == pytest.approx(
        np.corrcoef(data[:, 0], data[:, 1])[0, 1], abs=0.1
    )


def test_any_number_of_workers_gives_the_same_bits():
    frame, world = CASES["holes and a late start"]
    offers = [offers_of(frame)]
    alone = simulate(world, [frame], offers, 450, seed=3, workers=map)[0]
    for count in (2, 5):
        with ThreadPoolExecutor(count) as pool:
            again = simulate(world, [frame], offers, 450, seed=3, workers=pool.map)[0]
        assert all(np.array_equal(alone[kind].slope, again[kind].slope) for kind in alone)
        assert all(np.array_equal(alone[kind].variance(0.5), again[kind].variance(0.5)) for kind in alone)
    other = simulate(world, [frame], offers, 450, seed=4, workers=map)[0]
    assert not np.array_equal(alone["robust"].slope, other["robust"].slope)


def test_wild_samples_keep_the_size_of_every_shock():
    _, world = CASES["wild"]
    drawn = world.simulate(np.random.default_rng(0), 3)[0]
    news = drawn.outcomes(0)[0]
    there = world.null.pairs
    assert np.allclose(np.abs(news)[there], np.abs(world.null.outcome)[there][:, None])


def test_too_few_dates_are_refused_by_name():
    sample, signal = panel(1, T=40, N=2, h=6, late=30, holes=0.0, one_period=False)
    with pytest.raises(InferenceError, match=r"E1 has .* leave it out"):
        moving_average_world(frame_of(sample, 0, "entity"), signal, ["E0", "E1"], "resampled")


def test_kinds_that_ignore_the_overlap_are_forced_and_marked():
    frame, _ = CASES["balanced"]
    assert offer(frame, ErrorOptions("robust")).ignores == 5
    assert offer(frame, ErrorOptions("bartlett")).ignores == 0
    assert offer(frame, ErrorOptions("bartlett", 9)).lags == 9
    missing = offer(
        staged(panel(13, one_period=False, late=0), make=moving_average_world)[0], ErrorOptions("one-period")
    )
    assert "needs one-period outcomes" in missing.problem


def test_added_predictors_stay_at_their_data():
    frame, world = CASES["two added predictors"]
    drawn = world.simulate(np.random.default_rng(0), 1)[0]
    assert np.array_equal(sample_of(frame, drawn, 0, 0.0).x[:, :, 1:], frame.sample.x[:, :, 1:])


def test_a_frame_takes_one_leg_of_many():
    sample, _ = panel(1)
    both = replace(
        sample,
        legs=("other", "return"),
        y=np.concatenate([3 * sample.y, sample.y], axis=2),
        one_step=(None, *sample.one_step),
        standing=np.concatenate([sample.standing, sample.standing[:, -1:]], axis=1),
    )
    frame = frame_of(both, 1, "entity")
    assert frame.sample.legs == ("return",)
    assert np.array_equal(frame.sample.y, sample.y)
    assert frame.sample.standing.shape == sample.standing.shape
