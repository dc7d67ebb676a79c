"""True size of Clark-West with cosines where nothing can be forecast, at few runs and a fixed seed."""

import numpy as np

from carrylab.regression.accuracy import clark_west, r2_out_of_sample
from carrylab.regression.forecast import forecasts, training
from carrylab.regression.sample import make_sample

RUNS, T, H = 300, 240, 12


def test_clark_west_with_overlap_rejects_about_as_often_as_it_says() -> None:
    """A persistent signal, twelve-month outcomes and nothing to forecast, at a nominal 5%."""
    rng = np.random.default_rng(20260101)
    rejected, positive = [], []
    ends = np.where(np.arange(T) + H < T, np.arange(T) + H, -1)
    train = training(ends, T // 2)
    for _ in range(RUNS):
        shocks = rng.standard_normal((T, 2)) @ np.linalg.cholesky(np.array([[1.0, -0.9], [-0.9, 1.0]])).T
        x = np.zeros(T)
        for t in range(1, T):
            x[t] = 0.97 * x[t - 1] + shocks[t, 0]
        total = np.concatenate([np.zeros(1), np.cumsum(shocks[:, 1])])
        y = np.full(T, np.nan)
        y[: T - H] = total[H + 1 :] - total[1 : T - H + 1]
        sample = make_sample(
            x[:, None, None],
            y[:, None, None],
            terms=("signal",),
            legs=("return",),
            steps=np.full(T, H),
            overlap=H - 1,
            one_step=[None],
        )
        found = forecasts(sample, x[:, None, None], train, entity=True)
        parts = (y[:, None], np.where(np.isfinite(y)[:, None], found.model[:, :, 0], np.nan), found.mean[:, :, 0])
        rejected.append(clark_west(*parts, H - 1).p_value < 0.05)
        positive.append(r2_out_of_sample(*parts) > 0)
    assert 0.02 <= np.mean(rejected) <= 0.14
    assert 0.1 <= np.mean(positive) <= 0.4
