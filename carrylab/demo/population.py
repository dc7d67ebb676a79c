"""Slopes of the endless sample the demo world is drawn from: bonds and currencies exactly, equities by simulation.

The law of the rate factors is known, z' = PHI z + shock, so that every signal and the forecast of every leg is
linear in z and a population slope is cov(forecast, signal) / var(signal). Months count as equally long.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.linalg import solve_discrete_lyapunov

from carrylab.demo.economies import CODES, ECONOMIES, FLOATING, HOME
from carrylab.demo.rates import COMMON, PHI, SCALE, SHOCK, TENORS, Floats, loadings
from carrylab.demo.world import DOLLAR, DP_PHI, DYNAMIC, STATIC, equities, recessions

VARIANCE = solve_discrete_lyapunov(PHI, np.diag(SHOCK**2))  # of the factors at scale 1, (3, 3)
ACROSS = np.outer(SCALE, SCALE) * (COMMON + (1 - COMMON) * np.eye(len(SCALE)))  # its scale across economies, (N, N)
SIMULATED_MONTHS, SIMULATION_SEED = 36_000, 2_000
BONDS, CURRENCIES, EQUITIES = "Sovereign bonds", "Currencies", "Equity indices"
EXACT = "exact, from the law the world is drawn from"


@dataclass(frozen=True, slots=True)
class Slope:
    """One population value; `group` is a maturity, a currency, `pooled`, or a part of the rate differential."""

    market: str
    parity: str
    leg: str
    horizon: str
    group: str
    value: float
    how: str


def power(months: int) -> Floats:
    """PHI to the power of months: what is left of the factors, (3, 3)."""
    return np.linalg.matrix_power(PHI, months)


def bond_moments(months: int, horizon: int, parity: str) -> tuple[float, float]:
    """Covariance of the excess return with the signal, and variance of the signal, at scale 1."""
    n, h = months / 12, horizon / 12
    long, short, rest = loadings([months, horizon, months - horizon])
    excess = n * long - h * short - (n - h) * power(horizon).T @ rest
    if parity == "yield-spread":
        excess = excess / (n - h)
        signal = h / (n - h) * (long - short)
    else:
        signal = n * long - h * short - (n - h) * rest
    return float(excess @ VARIANCE @ signal), float(signal @ VARIANCE @ signal)


def bond_slopes(maturities: tuple[int, ...], horizon: int, parity: str) -> dict[str, float]:
    """Slope of the excess return by maturity, and pooled over maturities with entity effects."""
    moments = {f"{months}m": bond_moments(months, horizon, parity) for months in maturities}
    slopes = {group: cov / var for group, (cov, var) in moments.items()}
    cov, var = np.sum(list(moments.values()), axis=0)
    return slopes | {"pooled": float(cov / var)}


def currency_slopes(horizon: int) -> dict[str, float]:
    """Slope of the excess return by currency, and pooled over floating currencies with entity effects.

    A month's return on the differential d_i = b'(z_i - z_home) has the forecast DYNAMIC d_i + (DOLLAR - DYNAMIC)
    times the mean differential; the return over the horizon adds what the currency pays in each month, less what
    rolling one-month deposits pay, to the deposit of the horizon.
    """
    own = np.eye(len(CODES)) - np.eye(len(CODES))[HOME]
    mean = own[list(FLOATING)].mean(axis=0)
    month = loadings([1])[0] / 12
    rolled = sum((power(step).T @ month for step in range(horizon)), start=np.zeros(3))
    signal = loadings([horizon])[0] * horizon / 12
    moments = {}
    for i in FLOATING:
        paid = (DYNAMIC - 1) * own[i] + (DOLLAR - DYNAMIC) * mean
        cov = (rolled @ VARIANCE @ signal) * (paid @ ACROSS @ own[i])
        var = (signal @ VARIANCE @ signal) * (own[i] @ ACROSS @ own[i])
        moments[ECONOMIES[i].currency] = (cov + var, var)
    slopes = {currency: float(cov / var) for currency, (cov, var) in moments.items()}
    cov, var = np.sum(list(moments.values()), axis=0)
    return slopes | {"pooled": float(cov / var)}


def equity_slopes(years: int) -> dict[str, float]:
    """Pooled slopes of the legs of dividend-price over whole years.

    The ratio left is PHI^h and dividend growth is none of its business; the return gets what the identity leaves
    after the approximation error, whose small slope alone is simulated.
    """
    rho = 1 / (1 + float(np.exp(np.mean([np.log(economy.payout) for economy in ECONOMIES]))))
    carried = DP_PHI ** (12 * years)
    error = approximation_slope(years, rho)
    paid = 1 - rho**years * carried - error
    return {
        "excess return": paid,
        "riskless rate": 0.0,
        "dividend growth": 0.0,
        "future log dividend-price ratio": carried,
        "approximation error": error,
        "resolved premium share": paid / (1 - rho**years * carried),
    }


def approximation_slope(years: int, rho: float) -> float:
    """Pooled slope of the approximation error of the log-linear return on log dividend over price."""
    rng = np.random.default_rng(SIMULATION_SEED)
    price, dividend, total_return = (np.log(part) for part in equities(rng, recessions(rng, SIMULATED_MONTHS)))
    ratio, gain = dividend - price, total_return - dividend
    last = len(ratio) - 12 * years
    at = [slice(12 * j, last + 12 * j) for j in range(years + 1)]
    discounted = sum((rho**j * (gain[at[j + 1]] - gain[at[j]]) for j in range(years)), start=np.zeros(1))
    error = ratio[at[0]] - discounted - rho**years * ratio[at[-1]]
    signal = ratio[at[0]] - ratio[at[0]].mean(axis=0)
    return float((signal * error).sum() / (signal**2).sum())


def population() -> list[Slope]:
    """All planted values, in the order of the answer file."""
    return [*_bonds(), *_currencies(), *_equities()]


def _pair(place: tuple[str, str, str], legs: tuple[str, str], group: str, premium: float) -> list[Slope]:
    """The two legs of a two-leg parity whose slopes times weights add up to one; the second weight is its sign."""
    market, parity, horizon = place
    other = premium - 1 if legs[1] == "foreign appreciation" else 1 - premium
    return [
        Slope(market, parity, leg, horizon, group, value, EXACT)
        for leg, value in zip(legs, (premium, other), strict=True)
    ]


def _bonds() -> list[Slope]:
    rows: list[Slope] = []
    for parity, rise in (("forward-spot", "rate rise"), ("yield-spread", "long-rate rise")):
        for group, premium in bond_slopes((24, 36, 60, 120), 12, parity).items():
            rows += _pair((BONDS, parity, "12m"), ("excess return", rise), group, premium)
    return rows


def _currencies() -> list[Slope]:
    rows: list[Slope] = []
    for horizon in TENORS:
        for parity in ("uncovered-interest", "forward-discount"):
            for group, premium in currency_slopes(horizon).items():
                legs = ("excess return", "foreign appreciation")
                rows += _pair((CURRENCIES, parity, f"{horizon}m"), legs, group, premium)
    parts = {"static": STATIC, "dynamic": DYNAMIC, "dollar": DOLLAR}
    planted = [(CURRENCIES, "uncovered-interest", "excess return", "1m", part, slope) for part, slope in parts.items()]
    return rows + [Slope(*row, "planted") for row in planted]


def _equities() -> list[Slope]:
    how = {"excess return": f"exact but for the simulated slope of the approximation error, {SIMULATED_MONTHS} months"}
    how["resolved premium share"] = how["excess return"]
    how["approximation error"] = f"simulated, {SIMULATED_MONTHS} months"
    return [
        Slope(EQUITIES, "dividend-price", leg, f"{12 * years}m", "pooled", value, how.get(leg, EXACT))
        for years in (1, 5)
        for leg, value in equity_slopes(years).items()
    ]
