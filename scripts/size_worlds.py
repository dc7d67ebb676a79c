"""Random worlds in which nothing is paid: samples of currencies and equities, and yield curves that only expect."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.signal import lfilter

from carrylab.regression.draws_curve import Claims, Curves, forward_spot_claims
from carrylab.regression.draws_curve_null import average_weights
from carrylab.regression.draws_measure import Question
from carrylab.regression.sample import Floats, Ints, OneStep, Sample, make_sample

DIFFERENTIAL = 0.97  # persistence of rate differentials, a month
SIZE = 0.05  # standard deviation of a differential over that of a month's currency return
ENDOGENOUS = -0.9  # correlation of a log dividend yield's shock with the return
NOISE = 3e-4  # three basis points in every yield but the shortest
YEAR = 12  # months that bonds are held


@dataclass(frozen=True, eq=False, slots=True)
class Returns:
    """Signal `x` (T, N), one-period outcomes `one` (T, N) by the row in which they fall, persistence of the signal.

    With `revised`, a return over h periods lacks what the signal itself was revised by within them, as a currency's
    return over a deposit of h months does.
    """

    x: Floats
    one: Floats
    persistence: float
    revised: bool


def correlated(rng: np.random.Generator, shape: tuple[int, int], across: float) -> Floats:
    """Standard normal shocks (T, N), correlated `across` entities."""
    share = across if shape[1] > 1 else 0.0
    shocks: Floats = share**0.5 * rng.standard_normal((shape[0], 1)) + (1 - share) ** 0.5 * rng.standard_normal(shape)
    return shocks


def autoregressive(shocks: Floats, phi: float) -> Floats:
    """Stationary first-order autoregressions (T, N) from their shocks."""
    started = shocks.copy()
    started[0] /= (1 - phi**2) ** 0.5
    x: Floats = lfilter([1.0], [1.0, -phi], started, axis=0)
    return x


def currencies(rng: np.random.Generator, T: int, N: int, *, slope: float = 0.0) -> Returns:
    """Differentials (shocks correlated .4) and the currency returns (.5) that they forecast with a slope, here none.

    In units of a month's currency return; the differential earned is part of the return, and its expected cost.
    """
    shocks = SIZE * (1 - DIFFERENTIAL**2) ** 0.5 * correlated(rng, (T, N), 0.4)
    x = autoregressive(shocks, DIFFERENTIAL)
    one = correlated(rng, (T, N), 0.5)
    one[1:] += slope * x[:-1]
    return Returns(x, one, DIFFERENTIAL, revised=True)


def equities(rng: np.random.Generator, T: int, N: int, phi: float) -> Returns:
    """Log dividend yields whose shocks correlate -.9 with returns, both correlated .6 across markets."""
    v = correlated(rng, (T, N), 0.6)
    one = ENDOGENOUS * v + (1 - ENDOGENOUS**2) ** 0.5 * correlated(rng, (T, N), 0.6)
    return Returns(autoregressive(v, phi), one, phi, revised=False)


def held(world: Returns, h: int) -> Sample:
    """Sample of the returns over h periods on the signal."""
    T = len(world.x)
    y = np.full_like(world.one, np.nan)
    y[: T - h] = _ahead(world.one, h)
    if world.revised and h > 1:
        expected = world.persistence * (1 - world.persistence ** (h - 1)) / (1 - world.persistence)
        y[: T - h] -= _ahead(world.x, h - 1)[: T - h] - expected * world.x[: T - h]
    return make_sample(
        world.x[:, :, None],
        y[:, :, None],
        terms=("signal",),
        legs=("excess return",),
        steps=np.where(np.arange(T) < T - h, h, 0),
        overlap=h - 1,
        one_step=[OneStep(world.one, np.ones(h))],
    )


def _ahead(values: Floats, h: int) -> Floats:
    """Sums (T - h, N) of the next h values after each date."""
    totals = np.cumsum(values, axis=0)
    return np.asarray(totals[h:] - totals[:-h])


def slope_over(one_period: float, h: int) -> float:
    """The slope of h periods' currency returns, sum of slope x phi^j for j below h."""
    return one_period * (1 - DIFFERENTIAL**h) / (1 - DIFFERENTIAL)


def curves(
    rng: np.random.Generator, shape: tuple[int, int], roots: tuple[tuple[float, float], ...], years: int
) -> Curves:
    """Yields of one month and of every year up to `years` that expect the short rate, three basis points apart.

    The short rate is a sum of autoregressions; `roots` are pairs of persistence and of the shock's standard deviation
    in yield a year. Shocks are correlated .5 across economies. `shape`: dates and economies.
    """
    maturities = np.array([1, *(YEAR * year for year in range(1, years + 1))], dtype=np.int64)
    yields = np.zeros((*shape, len(maturities)))
    for root, shock in roots:
        factor = autoregressive(shock * correlated(rng, shape, 0.5), root)
        yields += factor[:, :, None] * average_weights(np.array([root]), maturities)[:, 0]
    yields[:, :, 1:] += NOISE * rng.standard_normal(yields[:, :, 1:].shape)
    return Curves(yields, maturities, tuple(f"E{i}" for i in range(shape[1])))


def bonds(drawn: Curves, years: tuple[int, ...]) -> Claims:
    """Bonds of some `years` held twelve months, on their forward-spot spread, and what their returns are in yields.

    Groups: each maturity over all economies, then all bonds. One-period returns are those of the bond that was bought
    over the one-year bond, month by month, months between the yields filled by straight lines.
    """
    T, N, _ = drawn.yields.shape
    price = prices(drawn)
    long = np.repeat(np.array([YEAR * year for year in years], dtype=np.int64), N)
    parts = [_held_a_year(price, YEAR * year) for year in years]
    signal, leg, steps = (np.concatenate(part, axis=1) for part in zip(*parts, strict=True))
    sample = make_sample(
        signal[:, :, None],
        leg[:, :, None],
        terms=("spread",),
        legs=("excess return",),
        steps=np.where(np.arange(T) < T - YEAR, YEAR, 0),
        overlap=YEAR - 1,
        one_step=[OneStep(steps, np.ones(YEAR))],
    )
    groups: tuple[Ints, ...] = (*(np.flatnonzero(long == YEAR * year) for year in years), np.arange(len(long)))
    weights = forward_spot_claims(drawn.maturities, long, YEAR, 1 / YEAR)
    return Claims(Question(sample, 0, 0.0, "entity"), groups, np.tile(np.arange(N), len(years)), *weights)


def prices(drawn: Curves) -> Floats:
    """Log prices (T, N, months + 1) by months of life from none to the longest, yields filled by straight lines."""
    months = np.arange(1, drawn.maturities[-1] + 1)
    fill = np.stack([np.interp(months, drawn.maturities, unit) for unit in np.eye(len(drawn.maturities))])
    yields = drawn.yields @ fill
    return np.concatenate([np.zeros((*yields.shape[:2], 1)), -yields * months / 12], axis=2)


def _held_a_year(price: Floats, n: int) -> tuple[Floats, Floats, Floats]:
    """Spread, return over a year (T, N), and month by month (T, N, 12), of the n-month bond over the one-year bond."""
    T = len(price)
    today = price[:, :, n] - price[:, :, YEAR]
    leg = np.full_like(today, np.nan)
    leg[: T - YEAR] = price[YEAR:, :, n - YEAR] - today[: T - YEAR]
    steps = np.full((*today.shape, YEAR), np.nan)
    for s in range(YEAR):
        before, after = (price[:, :, n - gone] - price[:, :, YEAR - gone] for gone in (s, s + 1))
        steps[: T - s - 1, :, s] = after[s + 1 :] - before[s : T - 1]
    return price[:, :, n - YEAR] - today, leg, steps
