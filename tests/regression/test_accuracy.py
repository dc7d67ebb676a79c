"""Accuracy of forecasts: R2 and Clark-West in plain loops and by hand, and the size of the test in simulation."""

import math

import numpy as np
import pytest

from carrylab.errors import InferenceError
from carrylab.regression.accuracy import (
    certainty_equivalent,
    clark_west,
    encompassing,
    held,
    mean_above_zero,
    r2_out_of_sample,
)


def three(seed: int = 1, T: int = 40, N: int = 2) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    rng = np.random.default_rng(seed)
    actual, benchmark = rng.standard_normal((T, N)), 0.1 * rng.standard_normal((T, N))
    model = benchmark + 0.3 * rng.standard_normal((T, N))
    actual[3, 0] = np.nan
    return actual, model, benchmark


def test_r2_in_a_plain_loop() -> None:
    actual, model, benchmark = three()
    ours = others = 0.0
    for t in range(40):
        for i in range(2):
            if not math.isnan(actual[t, i]):
                ours += (actual[t, i] - model[t, i]) ** 2
                others += (actual[t, i] - benchmark[t, i]) ** 2
    assert r2_out_of_sample(actual, model, benchmark) == pytest.approx(1 - ours / others, rel=1e-12)


def test_clark_west_in_a_plain_loop() -> None:
    """The adjusted difference at each origin, its mean, and cosines worked one by one."""
    actual, model, benchmark = three()
    series = []
    for t in range(40):
        own = [
            (actual[t, i] - benchmark[t, i]) ** 2
            - ((actual[t, i] - model[t, i]) ** 2 - (benchmark[t, i] - model[t, i]) ** 2)
            for i in range(2)
            if not math.isnan(actual[t, i])
        ]
        series.append(sum(own) / len(own))
    mean = sum(series) / 40
    nu = min(int(0.4 * 40 ** (2 / 3)), 40 // 3)
    loads = [
        math.sqrt(2 / 40) * sum((series[t] - mean) * math.cos(math.pi * j * (t + 0.5) / 40) for t in range(40))
        for j in range(1, nu + 1)
    ]
    error = math.sqrt(sum(load**2 for load in loads) / nu / 40)
    found = clark_west(actual, model, benchmark, overlap=2)
    assert found.value == pytest.approx(mean, rel=1e-12)
    assert found.df == nu
    assert found.statistic == pytest.approx(mean / error, rel=1e-10)


def test_clark_west_by_hand() -> None:
    # F1 0, F2 .5. Y 1: 1 - (.25 - .25) = 1; Y 2: 4 - (2.25 - .25) = 2. Half of each: mean 1.5.
    actual = np.array([[1.0], [2.0]] * 5)
    assert clark_west(actual, np.full((10, 1), 0.5), np.zeros((10, 1)), 0).value == pytest.approx(1.5)


def test_encompassing_weights_by_hand() -> None:
    # Y - F1 = 1, 2, 3 and F2 - F1 = 1, 1, 2: weight (1 + 2 + 6) / (1 + 1 + 4) = 1.5.
    actual = np.array([[1.0], [2.0], [3.0]] * 5)
    model = np.array([[1.0], [1.0], [2.0]] * 5)
    assert encompassing(actual, model, np.zeros((15, 1)), 0).value == pytest.approx(1.5)
    with pytest.raises(InferenceError, match="never differ"):
        encompassing(actual, model, model, 0)


def test_an_investor_by_hand() -> None:
    # .06 / (3 x .04) = .5; .3 / .12 = 2.5 is cut at 1.5. Returns 1% and 3% over half a year: 2 x (.02 - 1.5 x .0002).
    assert held(np.array([0.06, 0.3, -0.3]), np.full(3, 0.04), 3.0, 1.5) == pytest.approx([0.5, 1.5, -1.5])
    assert certainty_equivalent(np.array([0.01, 0.03, np.nan]), 3.0, 0.5) == pytest.approx(2 * (0.02 - 1.5 * 0.0002))


def test_too_few_forecasts_are_refused() -> None:
    with pytest.raises(InferenceError, match="20 forecasts of 12 periods each are too few"):
        mean_above_zero(np.ones(20), 11)
