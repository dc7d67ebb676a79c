"""Block draws of dates: by hand, the identity, and every draw against a regression on the drawn rows themselves."""

import itertools
from concurrent.futures import ThreadPoolExecutor
from dataclasses import replace

import numpy as np
import pytest

from carrylab.errors import InferenceError
from carrylab.regression.batch import bartlett, factor, invert, running, solve
from carrylab.regression.blocks import block_draws, block_length, block_slopes, date_blocks
from carrylab.regression.covariance import ErrorOptions, standard_errors
from carrylab.regression.fit import fit
from carrylab.regression.sample import make_sample


def panel(seed=0, T=75, N=4, K=2, L=2, *, holes=0.0, late=0, h=3):
    """Random terms and legs that move together, with entity means, holes and a late start."""
    rng = np.random.default_rng(seed)
    x = rng.standard_normal((T, N, K)) + 3 * rng.standard_normal((N, K))
    y = 0.5 * x.sum(axis=2, keepdims=True) + rng.standard_normal((T, N, L)) + rng.standard_normal((T, 1, L))
    x[rng.random((T, N)) < holes] = np.nan
    x[:late, -1] = np.nan
    y[T - h :] = np.nan
    return make_sample(
        x,
        y,
        terms=[f"x{k}" for k in range(K)],
        legs=[f"y{leg}" for leg in range(L)],
        steps=np.where(np.arange(T) < T - h, h, 0),
        overlap=h - 1,
        one_step=[None] * L,
    )


def by_loop(sample, rows, effects, lags):
    """Slopes and Driscoll-Kraay errors (K, L) of dummy-variable least squares on the drawn rows, one after another."""
    K, L, N = sample.x.shape[2], sample.y.shape[2], sample.mask.shape[1]
    x, y, place = [], [], []
    for at, t in enumerate(rows):
        for i in range(N):
            if sample.mask[t, i]:
                entity, date = np.eye(N)[i], np.eye(len(sample.mask))[t]
                dummies = {
                    "none": [1.0],
                    "entity": entity,
                    "time": date,
                    "both": np.concatenate([entity, date]),
                }
                x.append(np.concatenate([sample.x[t, i], dummies[effects]]))
                y.append(sample.y[t, i])
                place.append(at)
    x, y, place = np.array(x), np.array(y), np.array(place)
    inverse = np.linalg.pinv(x.T @ x)
    slopes = inverse @ (x.T @ y)
    errors = np.empty((K, L))
    for leg in range(L):
        scores = np.zeros((len(rows), x.shape[1]))
        np.add.at(scores, place, x * (y - x @ slopes)[:, [leg]])
        influence = (scores @ inverse)[:, :K]
        meat = influence.T @ influence
        for lag in range(1, lags + 1):
            cross = influence[lag:].T @ influence[:-lag]
            meat += (1 - lag / (lags + 1)) * (cross + cross.T)
        errors[:, leg] = np.sqrt(np.diag(meat))
    return slopes[:K], errors


CASES = {
    "balanced": (panel(1), "entity"),
    "holes and a late start": (panel(2, holes=0.08, late=30), "entity"),
    "four terms and three legs": (panel(3, K=4, L=3, holes=0.05), "entity"),
    "one term, one leg": (panel(4, K=1, L=1, holes=0.05), "entity"),
    "no effects": (panel(5, holes=0.05), "none"),
    "both effects": (panel(7), "both"),
}


@pytest.mark.parametrize("name", CASES)
def test_every_draw_is_the_regression_on_its_rows(name):
    sample, effects = CASES[name]
    blocks = date_blocks([sample], 6, seed=3, length=7)
    (found,) = block_draws([sample], blocks, effects=effects)
    quick = block_slopes(sample, blocks, effects=effects)
    for b, rows in enumerate(blocks.rows()):
        slopes, errors = by_loop(sample, rows, effects, sample.overlap)
        assert np.abs(quick[b] - slopes).max() < 1e-10
        assert np.abs(found.slopes[b] - slopes).max() < 1e-10
        assert np.abs(found.std_errors[b] - errors).max() < 1e-10


def test_time_effects_are_those_of_the_data_in_every_draw():
    """A date drawn twice keeps one mean of its own, as its dummy is drawn with it."""
    sample = panel(6, holes=0.05)
    blocks = date_blocks([sample], 4, seed=3, length=7)
    (found,) = block_draws([sample], blocks, effects="time")
    for b, rows in enumerate(blocks.rows()):
        slopes, errors = by_loop(sample, rows, "time", sample.overlap)
        assert np.abs(found.slopes[b] - slopes).max() < 1e-10
        assert np.abs(found.std_errors[b] - errors).max() < 1e-10


@pytest.mark.parametrize("effects", ["none", "entity", "time"])
def test_every_date_once_is_the_estimate_on_the_data(effects):
    sample = panel(2, holes=0.08, late=20, K=3)
    blocks = date_blocks([sample], 1, seed=1, length=11)
    (found,) = block_draws([sample], replace(blocks, starts=blocks.in_order()), effects=effects)
    estimate = fit(sample, effects=effects)
    errors = standard_errors(sample, estimate, ErrorOptions("bartlett"))
    for slopes in (found.slope, found.slopes[0]):
        assert np.allclose(slopes, estimate.coefficients[:-1], rtol=1e-12, atol=1e-12)
    for error in (found.std_error, found.std_errors[0]):
        assert np.allclose(error, errors.std_error[:-1], rtol=1e-11)


def test_the_rows_of_a_draw_by_hand():
    """Ten dates in blocks of four: starts 6, 0, 3 give 6-9, 0-3 and the first two of the last block."""
    sample = panel(T=13, N=3)
    blocks = replace(date_blocks([sample], 1, seed=0, length=4), starts=np.array([[6, 0, 3]]))
    assert (blocks.span, blocks.last) == (slice(0, 10), 2)
    assert blocks.rows().tolist() == [[6, 7, 8, 9, 0, 1, 2, 3, 3, 4]]


def test_how_often_a_date_is_drawn_on_average():
    """Every start of every block once, by hand: the mean count is exactly that of all draws."""
    sample = panel(T=13, N=3)
    blocks = date_blocks([sample], 1, seed=0, length=4)
    starts = np.array(list(itertools.product(range(7), repeat=3)))
    every = replace(blocks, starts=starts).rows()
    assert np.allclose(blocks.expected(), np.bincount(every.ravel(), minlength=10) / len(starts))


def test_drawn_slopes_scatter_around_their_centre():
    sample = panel(8, T=60, h=12, K=1, L=1)
    (found,) = block_draws([sample], date_blocks([sample], 20_000, seed=5))
    middle, error = found.slopes.mean(), found.slopes.std() / 20_000**0.5
    assert abs(middle - found.centre.item()) < 0.1 * found.slopes.std()
    assert error < 0.01 * found.slopes.std()
    assert np.allclose(found.statistics, (found.slopes - found.centre) / found.std_errors)


def test_samples_drawn_together_share_their_dates():
    """The same sample at two horizons: each keeps its own draws when drawn alone on the same dates."""
    short, long = panel(1, h=1), panel(1, h=12)
    blocks = date_blocks([short, long], 50, seed=2)
    assert blocks.length == 12
    assert blocks.span == slice(0, 74)
    both = block_draws([short, long], blocks)
    (alone,) = block_draws([long], blocks)
    assert np.array_equal(both[1].slopes, alone.slopes)
    assert np.corrcoef(both[0].slopes[:, 0, 0], both[1].slopes[:, 0, 0])[0, 1] > 0.3


@pytest.mark.parametrize(
    "work", [block_slopes, lambda sample, blocks, spread: block_draws([sample], blocks, spread=spread)]
)
def test_any_number_of_workers_gives_the_same_bits(work, monkeypatch):
    monkeypatch.setattr("carrylab.regression.blocks.CHUNK", 40)
    monkeypatch.setattr("carrylab.regression.blocks.SCORED", 1 << 13)
    sample = panel(2, holes=0.05)
    blocks = date_blocks([sample], 300, seed=9)
    with ThreadPoolExecutor(3) as pool:
        parts = [work(sample, blocks, spread=spread) for spread in (map, pool.map)]
    pairs = [(part,) if isinstance(part, np.ndarray) else (part[0].slopes, part[0].std_errors) for part in parts]
    assert all(np.array_equal(one, three) for one, three in zip(*pairs, strict=True))
    assert len(pairs[0][0]) == 300


def test_blocks_are_a_window_or_the_cube_root_of_all_dates():
    """1000 dates: 10; outcomes over 12 months: 12; never more than there are."""
    assert (block_length(1000, 2), block_length(1000, 11), block_length(5, 11)) == (10, 12, 5)


def test_what_cannot_be_drawn_is_refused_in_one_line():
    sample = panel(1)
    with pytest.raises(InferenceError, match="one calendar"):
        date_blocks([sample, panel(1, T=60)], 5, seed=1)
    with pytest.raises(InferenceError, match="blocks of 73 dates cannot be drawn from 72"):
        date_blocks([sample], 5, seed=1, length=73)
    with pytest.raises(InferenceError, match="with holes cannot be taken out draw by draw"):
        block_slopes(panel(1, holes=0.1), date_blocks([sample], 5, seed=1), effects="both")
    few = panel(1, T=8, N=1, K=3, L=1)
    with pytest.raises(InferenceError, match="draws hold too few different dates for 3 terms"):
        block_slopes(few, date_blocks([few], 50, seed=1, length=1))


def test_small_systems_of_many_draws_are_solved_as_one_by_one():
    rng = np.random.default_rng(0)
    wide = rng.standard_normal((5, 4, 6))
    matrix, right = np.einsum("tkb,tjb->kjb", wide, wide), rng.standard_normal((4, 3, 6))
    lower = factor(matrix)
    for b in range(6):
        assert np.allclose(solve(lower, right)[:, :, b], np.linalg.solve(matrix[:, :, b], right[:, :, b]))
        assert np.allclose(invert(lower)[:, :, b], np.linalg.inv(matrix[:, :, b]))


@pytest.mark.parametrize("lags", [0, 1, 4, 9, 10, 30])
def test_bartlett_by_windows_is_bartlett_by_lags(lags):
    series = np.random.default_rng(1).standard_normal((10, 2))
    wanted = (series**2).sum(axis=0)
    for lag in range(1, min(lags, 9) + 1):
        wanted = wanted + 2 * (1 - lag / (lags + 1)) * (series[lag:] * series[:-lag]).sum(axis=0)
    assert np.allclose(bartlett(running(series), lags), wanted)
