"""IVX of one series against an independent implementation in plain loops, its invariances and its size."""

import math

import numpy as np
import pytest

from carrylab.errors import InferenceError
from carrylab.regression.instrument import filtered
from carrylab.regression.ivx import ivx

from .worlds_null import endogenous


def by_loops(x, y, h):
    """One term, straight from the formulas with Python floats: slope and variance."""
    T = len(y) - 1
    R = 1 - 1 / T**0.95
    z = [0.0]
    for t in range(1, T):
        z.append(R * z[t - 1] + x[t] - x[t - 1])
    before, after, out = x[:T], x[1:], y[1:]
    mx, my, ma = sum(before) / T, sum(out) / T, sum(after) / T
    sxx = sum((v - mx) ** 2 for v in before)
    b = sum((v - mx) * (w - my) for v, w in zip(before, out, strict=True)) / sxx
    phi = sum((v - mx) * (w - ma) for v, w in zip(before, after, strict=True)) / sxx
    e = [w - my - b * (v - mx) for v, w in zip(before, out, strict=True)]
    u = [w - ma - phi * (v - mx) for v, w in zip(before, after, strict=True)]
    M = math.floor(T ** (1 / 3) + 1e-9)
    see = sum(v * v for v in e) / T
    ouu, oeu = sum(v * v for v in u) / T, sum(v * w for v, w in zip(u, e, strict=True)) / T
    for m in range(1, M + 1):
        weight = 1 - m / (M + 1)
        ouu += 2 * weight * sum(u[t] * u[t - m] for t in range(m, T)) / T
        oeu += weight * sum(u[t] * e[t - m] for t in range(m, T)) / T
    n = T - h + 1
    yh, xh, zh = ([sum(part[t : t + h]) for t in range(n)] for part in (out, before, z))
    my, mx, mz = sum(yh) / n, sum(xh) / n, sum(zh) / n
    bottom = sum(z[t] * (xh[t] - mx) for t in range(n))
    middle = see * sum(v * v for v in zh) - n * mz**2 * (see - oeu**2 / ouu)
    return sum(z[t] * (yh[t] - my) for t in range(n)) / bottom, middle / bottom**2


def world(seed=0, T=120, slope=0.02):
    x, y = endogenous(np.random.default_rng(seed), T=T, slope=slope)
    return x, y[:, 0]


def test_the_filter_by_hand() -> None:
    # R = 1/2, x = 1, 2, 4: z = 0, 1, 1/2 + 2. A hole at the second date: z_3 = (1/2)^2 0 + 3 - 1, z_4 = 2/2 + 4 - 3.
    x, whole = np.array([1.0, 2, 4])[:, None, None], np.ones((3, 1), bool)
    np.testing.assert_allclose(filtered(x, whole, 0.5)[:, 0, 0], [0, 1, 2.5])
    x = np.array([1.0, 0, 3, 4])[:, None, None]
    np.testing.assert_allclose(filtered(x, np.array([[1], [0], [1], [1]], bool), 0.5)[:, 0, 0], [0, 0, 2, 2])


@pytest.mark.parametrize("h", [1, 3, 12])
@pytest.mark.parametrize("seed", [0, 1])
def test_against_plain_loops(h, seed) -> None:
    x, y = world(seed)
    slope, variance = by_loops(list(x[:, 0]), list(y), h)
    found = ivx(x, y, horizon=h)
    assert found.slopes[0] == pytest.approx(slope, rel=1e-9)
    assert found.covariance[0, 0] == pytest.approx(variance, rel=1e-9)
    assert (found.lags, found.root) == (4, pytest.approx(1 - 119**-0.95))


def test_one_restriction_is_the_squared_t() -> None:
    x, y = world(2)
    found = ivx(x, y, horizon=4)
    assert found.wald == pytest.approx(found.slopes[0] ** 2 / found.covariance[0, 0])


def test_units_levels_and_order_of_the_terms_do_not_matter() -> None:
    rng = np.random.default_rng(3)
    x, y = world(3)
    both = np.hstack([x, np.cumsum(rng.normal(size=(120, 1)), axis=0)])
    found = ivx(both, y, horizon=6)
    turned = ivx((both * [100.0, 1.0] + [7.0, -3.0])[:, ::-1], y + 5.0, horizon=6)
    np.testing.assert_allclose(turned.slopes[::-1], found.slopes / [100.0, 1.0], rtol=1e-8)
    assert turned.wald == pytest.approx(found.wald, rel=1e-8)


def test_an_unrelated_second_term_leaves_the_first_almost_alone() -> None:
    rng = np.random.default_rng(4)
    x, y = world(4, T=2000)
    both = np.hstack([x, rng.normal(size=(2000, 1))])
    alone, together = ivx(x, y), ivx(both, y)
    assert together.slopes[0] == pytest.approx(alone.slopes[0], abs=0.2 * math.sqrt(alone.covariance[0, 0]))


@pytest.mark.parametrize("h", [1, 12])
def test_size_where_least_squares_is_biased(h) -> None:
    # measured elsewhere: 3.8 to 4.8% at h = 1 and 3.3 to 4.1% at h = 12 over the same kind of worlds
    rng = np.random.default_rng(10)
    rejected = 0
    for _ in range(300):
        x, y = endogenous(rng, T=241)
        rejected += ivx(x, y[:, 0], horizon=h).p_value < 0.05
    assert 0.01 <= rejected / 300 <= 0.085


def test_holes_and_short_series_are_refused() -> None:
    x, y = world(5)
    x[4] = np.nan
    with pytest.raises(InferenceError, match="series without holes"):
        ivx(x, y)
    with pytest.raises(InferenceError, match="at 12 periods needs 24 one-period outcomes and there are 19"):
        ivx(x[10:30], y[10:30], horizon=12)
