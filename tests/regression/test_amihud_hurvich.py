"""Amihud-Hurvich by hand, its identity with least squares, and the bias that it takes out."""

import numpy as np
import pytest

from carrylab.errors import InferenceError
from carrylab.regression.amihud_hurvich import CAP, amihud_hurvich


def test_by_hand() -> None:
    # x = 1, 0, -1, 0, 1: four pairs, before (1, 0, -1, 0), after (0, -1, 0, 1), both of mean 0 and orthogonal.
    # phi = 0, Var(phi) = (2 / 2) / 2 = 1/2; phi_c = 1/4 + 3/16 = 7/16.
    # y = 3, 0, 1, 2: slopes on before and after are (3 - 1)/2 = 1 and (-0 + 2)/2 = 1, so g = 1, b_c = 1 + 7/16.
    # Residuals .5, -.5, .5, -.5: s^2 = 1 / (4 - 3) = 1; OLS variance of b_c = 1/2 + (7/16)^2 / 2.
    # se^2 = (1 + 3/4 + 9/16)^2 / 2 + 1/2 + 49/512.
    found = amihud_hurvich(np.array([1.0, 0, -1, 0, 1]), np.array([np.nan, 3, 0, 1, 2]))
    assert found.persistence == pytest.approx(7 / 16)
    assert (found.shock_slope, found.n, found.capped) == (pytest.approx(1.0), 4, False)
    assert found.slope == pytest.approx(1 + 7 / 16)
    assert found.std_error == pytest.approx(np.sqrt(2.3125**2 / 2 + 1 / 2 + 49 / 512))


def world(rng, T, phi, delta=-0.9):
    v = rng.normal(size=T)
    y = delta * v + np.sqrt(1 - delta**2) * rng.normal(size=T)
    x = np.zeros(T)
    x[0] = rng.normal() / np.sqrt(1 - phi**2)
    for t in range(1, T):
        x[t] = phi * x[t - 1] + v[t]
    return x, y


def test_the_correction_is_the_shock_slope_times_the_change_in_persistence() -> None:
    x, y = world(np.random.default_rng(2), 90, 0.9)
    found = amihud_hurvich(x, y)
    xd = x[:-1] - x[:-1].mean()
    phi, ols = xd @ x[1:] / (xd @ xd), xd @ y[1:] / (xd @ xd)
    assert found.slope == pytest.approx(ols + found.shock_slope * (found.persistence - phi))


def test_holes_take_out_their_pairs_and_order_of_the_rest_stays() -> None:
    x, y = world(np.random.default_rng(3), 60, 0.8)
    x[20] = np.nan
    assert amihud_hurvich(x, y).n == 57


def test_bias_goes_and_size_is_near_nominal() -> None:
    # T = 120, phi = .95, correlation -.9: OLS is biased up by .9 (1 + 3 x .95)/120 = .029
    rng = np.random.default_rng(5)
    ols, corrected, rejected = [], [], 0
    for _ in range(400):
        x, y = world(rng, 121, 0.95)
        xd = x[:-1] - x[:-1].mean()
        ols.append(xd @ y[1:] / (xd @ xd))
        found = amihud_hurvich(x, y)
        corrected.append(found.slope)
        rejected += abs(found.slope / found.std_error) > 1.96
    assert np.mean(ols) == pytest.approx(0.029, abs=0.008)
    assert abs(np.mean(corrected)) < 0.008
    assert 0.02 <= rejected / 400 <= 0.11


def test_persistence_at_one_is_capped_and_said() -> None:
    rng = np.random.default_rng(0)
    found = amihud_hurvich(np.cumsum(np.ones(40) + 0.1 * rng.normal(size=40)), rng.normal(size=40))
    assert found.capped
    assert found.persistence == CAP


def test_what_it_refuses() -> None:
    with pytest.raises(InferenceError, match="needs 4 pairs of dates and there are 3"):
        amihud_hurvich(np.arange(4.0), np.arange(4.0))
    with pytest.raises(InferenceError, match="follows its own past exactly"):
        amihud_hurvich(np.tile([1.0, -1.0], 10), np.arange(20.0))
