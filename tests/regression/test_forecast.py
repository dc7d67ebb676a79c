"""Forecasts against a plain loop over origins, a hand case, and a proof that nothing later moves anything."""

import numpy as np
import pytest

from carrylab.errors import SampleError
from carrylab.regression.forecast import forecasts, training
from carrylab.regression.sample import Floats, Sample, make_sample

T, N, H = 60, 3, 4


def world(seed: int = 1, *, level: float = 0.0) -> tuple[Floats, Floats]:
    """A signal with a late entrant and a hole, and outcomes over four periods."""
    rng = np.random.default_rng(seed)
    x = level + rng.standard_normal((T, N)).cumsum(axis=0)
    y = 0.3 * x + rng.standard_normal((T, N))
    x[:20, 2], x[33, 0] = np.nan, np.nan
    y[T - H :] = np.nan
    return x, y


def sample_of(x: Floats, y: Floats) -> Sample:
    return make_sample(
        x[:, :, None],
        y[:, :, None],
        terms=("signal",),
        legs=("return",),
        steps=np.full(T, H),
        overlap=H - 1,
        one_step=[None],
        label="own",
    )


def ends() -> np.ndarray:
    found = np.arange(T) + H
    found[found >= T] = -1
    return found


def loop(x: Floats, y: Floats, t: int, i: int, start: int, *, entity: bool) -> tuple[float, float]:
    """Forecast and mean for one entity at one origin, from rows whose outcome is known at t."""
    rows = [(s, j) for s in range(start, T) for j in range(N) if s + H <= t and np.isfinite(x[s, j] + y[s, j])]
    groups = range(N) if entity else [None]
    pairs = []
    for group in groups:
        own = [(x[s, j], y[s, j]) for s, j in rows if group is None or j == group]
        means = np.mean(own, axis=0) if own else np.zeros(2)
        pairs += [(a - means[0], b - means[1]) for a, b in own]
    slope = sum(a * b for a, b in pairs) / sum(a * a for a, _ in pairs)
    own = [(x[s, j], y[s, j]) for s, j in rows if not entity or j == i]
    x_mean, y_mean = np.mean(own, axis=0)
    return y_mean + slope * (x[t, i] - x_mean), y_mean


@pytest.mark.parametrize("entity", [True, False])
@pytest.mark.parametrize("length", [None, 20])
def test_every_forecast_is_that_of_a_plain_loop(entity: bool, length: int | None) -> None:
    x, y = world(level=1e4)
    start = None if length is None else np.maximum(np.arange(T) - H - length, 0)
    train = training(ends(), 25, start=start, least=5)
    found = forecasts(sample_of(x, y), x[:, :, None], train, entity=entity)
    assert not np.isfinite(found.model[:25]).any()
    compared = 0
    for t in range(25, T):
        for i in range(N):
            if np.isfinite(found.model[t, i, 0]):
                begin = 0 if start is None else int(start[t])
                model, mean = loop(x, y, t, i, begin, entity=entity)
                assert found.model[t, i, 0] == pytest.approx(model, abs=1e-8)
                assert found.mean[t, i, 0] == pytest.approx(mean, abs=1e-8)
                compared += 1
    assert compared > 80


def test_nothing_dated_later_moves_a_forecast_by_a_bit() -> None:
    """Signals after t and outcomes known after t are turned upside down: all forecasts to t stay as they were."""
    x, y = world()
    before = forecasts(sample_of(x, y), x[:, :, None], training(ends(), 25, least=5), entity=True)
    for t in (30, 45, 55):
        later, outcome = x.copy(), y.copy()
        later[t + 1 :] = -3.0 * later[t + 1 :] + 1.0
        unknown = np.arange(T) + H > t
        outcome[unknown] = 100.0 - outcome[unknown]
        after = forecasts(sample_of(later, outcome), later[:, :, None], training(ends(), 25, least=5), entity=True)
        for one, other in ((before.model, after.model), (before.mean, after.mean), (before.variance, after.variance)):
            assert np.array_equal(one[: t + 1], other[: t + 1], equal_nan=True)
        assert not np.array_equal(before.model[t + 1 :], after.model[t + 1 :], equal_nan=True)


def test_four_dates_by_hand() -> None:
    # One step ahead: at the fourth date rows 1 and 2 are known, (1, 3) and (2, 5): slope 2, forecast at 4: 4 + 2 x 2.5.
    x = np.array([[1.0], [2.0], [9.0], [4.0]])
    y = np.array([[3.0], [5.0], [7.0], [np.nan]])
    sample = make_sample(
        x[:, :, None],
        y[:, :, None],
        terms=("signal",),
        legs=("return",),
        steps=np.full(4, 2),
        overlap=1,
        one_step=[None],
    )
    found = forecasts(sample, x[:, :, None], training(np.array([2, 3, -1, -1]), 3), entity=True)
    assert found.slopes[3, 0, 0] == pytest.approx(2.0)
    assert found.model[3, 0, 0] == pytest.approx(9.0)
    assert found.mean[3, 0, 0] == pytest.approx(4.0)
    assert found.variance[3, 0, 0] == pytest.approx(2.0)


def test_an_origin_before_any_outcome_is_refused() -> None:
    x, y = world()
    with pytest.raises(SampleError, match="own: no outcome is known by the first origin"):
        forecasts(sample_of(x, y), x[:, :, None], training(np.full(T, -1), 10), entity=True)
