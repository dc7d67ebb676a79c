"""Every window against the package's own fit and errors under date weights, with holes; and what is refused."""

import numpy as np
import pytest

from carrylab.errors import SampleError
from carrylab.regression.fit import fit
from carrylab.regression.longrun import kernel_sum
from carrylab.regression.sample import Sample, make_sample
from carrylab.regression.windows import expanding, rolling


def panel(*, holes: bool, level: float = 0.0, T: int = 60, N: int = 3) -> Sample:
    rng = np.random.default_rng(4)
    x = rng.standard_normal((T, N, 2)).cumsum(axis=0) + level
    y = x @ np.array([0.5, -0.2]) + rng.standard_normal((T, N)) + level
    if holes:
        x[:15, 0, 1], y[30:, 2], x[22, 1, 0] = np.nan, np.nan, np.nan
    return make_sample(
        x,
        np.stack([y, 2.0 * y], axis=2),
        terms=("signal", "growth"),
        legs=("return", "other"),
        steps=np.ones(T),
        overlap=0,
        one_step=[None, None],
        label="own",
    )


def known(sample: Sample, start: int, stop: int, leg: int, lags: int) -> tuple[np.ndarray, np.ndarray]:
    weights = np.zeros(len(sample.mask))
    weights[start:stop] = 1.0
    found = fit(sample, effects="entity", weights=weights)
    series = found.influence[start:stop, :2, leg]
    return found.coefficients[:2, leg], np.sqrt(np.diag(kernel_sum(series, "bartlett", lags)))


@pytest.mark.parametrize("holes", [False, True])
@pytest.mark.parametrize("lags", [0, 1, 5])
def test_every_window_is_a_fit_of_its_own(holes: bool, lags: int) -> None:
    sample = panel(holes=holes)
    for found in (rolling(sample, 24, 1, lags=lags), expanding(sample, 20, 1, lags=lags)):
        assert len(found.start) > 30
        for window in range(len(found.start)):
            slopes, errors = known(sample, int(found.start[window]), int(found.stop[window]), 1, lags)
            assert found.slopes[window] == pytest.approx(slopes, rel=1e-9)
            assert found.std_error[window] == pytest.approx(errors, rel=1e-9)


def test_levels_of_ten_thousand_cost_no_digits() -> None:
    low, high = (expanding(panel(holes=True, level=level), 20, 0, lags=3) for level in (0.0, 1e4))
    assert high.slopes == pytest.approx(low.slopes, rel=1e-7)
    assert high.std_error == pytest.approx(low.std_error, rel=1e-7)


def test_one_series_of_four_dates_by_hand() -> None:
    # x = 0, 1, 3: y = 0, 2, 4. Means 4/3 and 2, slope (8/3 + 0 + 10/3) / (16/9 + 1/9 + 25/9) = 6 / (14/3) = 9/7.
    x, y = np.array([0.0, 1.0, 3.0, 3.0]), np.array([0.0, 2.0, 4.0, 0.0])
    sample = make_sample(
        x[:, None, None],
        y[:, None, None],
        terms=("signal",),
        legs=("return",),
        steps=np.ones(4),
        overlap=0,
        one_step=[None],
    )
    assert rolling(sample, 3, 0, lags=0).slopes[0, 0] == pytest.approx(9 / 7)
    assert expanding(sample, 3, 0, lags=0).slopes[0, 0] == pytest.approx(9 / 7)


def test_a_window_that_cannot_be_is_nan_and_one_that_does_not_fit_is_refused() -> None:
    sample = panel(holes=False)
    flat = np.array(sample.x)
    flat[:30, :, 1] = 1.0
    still = make_sample(
        flat,
        sample.y,
        terms=sample.terms,
        legs=sample.legs,
        steps=sample.steps,
        overlap=0,
        one_step=[None, None],
    )
    assert np.isnan(rolling(still, 24, 0, lags=0).slopes[0]).all()
    with pytest.raises(SampleError, match="own: a window of 90 dates does not fit 60 dates"):
        rolling(sample, 90, 0, lags=0)
