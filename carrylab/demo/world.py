"""The demo world as arrays. Every return is made by an exact identity, so that all parities hold to rounding.

Currencies: the expected return has a static, a dynamic and a dollar part of the rate differential (Hassan and
Mano 2019). Equities: the log dividend-price ratio is a first-order autoregression and dividend growth cannot be
forecast from it.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from carrylab.demo.economies import CODES, ECONOMIES, FLOATING, HOME, PEG_BREAKS, PEGGED
from carrylab.demo.rates import BURN, MATURITIES, SHORT, TENORS, Days, Floats, autoregression, curves, deposit_growth

MONTHS = 360
START = np.datetime64("1996-01")
STATIC, DYNAMIC, DOLLAR = 0.7, 1.5, 2.2  # parts of a rate differential that are paid as return
FX_COMMON, FX_OWN = 0.015, 0.018  # sd a month
ENTER, LEAVE = 0.008, 0.07  # chances a month that a recession starts and ends
FX_FALL, EQUITY_FALL = 0.12, 0.12  # log, when one starts: of the currency with the highest rates, of every index
DP_PHI, DP_SHOCK, DP_COMMON = 0.985, 0.04, 0.5
DIVIDEND_SHOCK, REAL_GROWTH = 0.012, 0.015
PEG_FALL = 0.32
AFTER_BREAK, FAR_AHEAD, FADE = 0.21, 0.02, 0.90  # differential of the broken peg: at once, far ahead, decay a month

Bools = npt.NDArray[np.bool_]


@dataclass(frozen=True, eq=False, slots=True)
class World:
    """T months, N economies in the order of `CODES`, M = 120 maturities of 1 to 120 months.

    `dates` (T,): last weekday of each month. `zero` (T, N, M): continuous zero yields. `growth` (T, N, 3): log
    growth of a deposit over 1, 3 and 12 months from its date. `spot` (T, N): log home price of the currency.
    `premium` (T, N, 3): log forward less log spot. `price`, `dividend`, `total_return` (T, N): index, dividends
    of the last 12 months, total return index. `activity` (T, N): output growth over a year, decimal.
    `recession` (T,).
    """

    dates: Days
    zero: Floats
    growth: Floats
    spot: Floats
    premium: Floats
    price: Floats
    dividend: Floats
    total_return: Floats
    activity: Floats
    recession: Bools


def world(seed: int) -> World:
    """Draw the whole world from one seed."""
    rng = np.random.default_rng(seed)
    dates = month_ends(MONTHS)
    recession = recessions(rng, MONTHS)
    zero = curves(rng, MONTHS)
    zero[:, PEGGED] = zero[:, HOME] + peg_differential()
    growth = deposit_growth(zero, dates)
    price, dividend, total_return = equities(rng, recession)
    return World(
        dates=dates,
        zero=zero,
        growth=growth,
        spot=exchange_rates(rng, growth[:, :, 0], recession),
        premium=growth[:, [HOME]] - growth + basis(rng),
        price=price,
        dividend=dividend,
        total_return=total_return,
        activity=activity(rng, recession),
        recession=recession,
    )


def month_ends(months: int) -> Days:
    """Last weekday of each month."""
    after = (START + np.arange(1, months + 1)).astype("datetime64[D]")
    return np.busday_offset(after, -1, roll="forward")


def recessions(rng: np.random.Generator, months: int) -> Bools:
    """A two-state chain that starts outside a recession."""
    draws = rng.random(months)
    state = np.zeros(months, dtype=bool)
    for t in range(1, months):
        state[t] = draws[t] >= LEAVE if state[t - 1] else draws[t] < ENTER
    return state


def surprise_entry(recession: Bools) -> Floats:
    """One where a recession starts, less the chance of it as seen a month before, (T,)."""
    before = np.concatenate([[False], recession[:-1]])
    return np.where(before, 0.0, recession - ENTER)


def peg_differential() -> Floats:
    """Rates of the pegged economy over home, (T, 120): fair odds of a break, then a crisis that fades."""
    breaks = int((np.datetime64(PEG_BREAKS) - START).astype(int))
    ramp = np.clip((np.arange(breaks) - (breaks - 70)) / 69, 0, 1)
    pegged = 0.002 * 12.5**ramp * PEG_FALL * 12  # monthly chance of a break, .2% rising to 2.5%, times the fall
    short = (AFTER_BREAK - FAR_AHEAD) * FADE ** np.arange(MONTHS - breaks)
    average = (1 - FADE**MATURITIES) / (MATURITIES * (1 - FADE))
    return np.vstack([np.repeat(pegged[:, None], 120, axis=1), FAR_AHEAD + np.outer(short, average)])


def exchange_rates(rng: np.random.Generator, growth: Floats, recession: Bools) -> Floats:
    """Log home prices of currencies, (T, N), from one-month deposit growth (T, N)."""
    T, N = growth.shape
    differential = growth - growth[:, [HOME]]
    shock = FX_COMMON * rng.standard_normal((T, 1)) + FX_OWN * rng.standard_normal((T, N))
    falls = -FX_FALL * crash_exposure() * surprise_entry(recession)[:, None]
    change = np.zeros((T, N))
    change[1:] = (expected_return(differential) - differential)[:-1] + (shock + falls)[1:]
    spot = np.log([economy.spot for economy in ECONOMIES]) + np.cumsum(change, axis=0)
    spot[:, PEGGED] = pegged_spot(rng, change[:, PEGGED])
    spot[:, HOME] = 0.0
    return spot


def expected_return(differential: Floats) -> Floats:
    """Expected one-month log return of a currency from the rate differentials (T, N) of all."""
    mean = (SHORT - SHORT[HOME]) / 12
    all_mean = mean[list(FLOATING)].mean()
    dollar = differential[:, list(FLOATING)].mean(axis=1, keepdims=True) - all_mean
    paid: Floats = STATIC * mean + DYNAMIC * (differential - mean - dollar) + DOLLAR * dollar
    return paid


def crash_exposure() -> Floats:
    """Share of the fall at the start of a recession, (N,): one for the highest rates, below zero for the lowest."""
    exposure = np.zeros(len(CODES))
    order = sorted(FLOATING, key=lambda i: SHORT[i])
    exposure[order] = (np.arange(len(order)) - 2) / (len(order) - 3)
    return exposure


def pegged_spot(rng: np.random.Generator, change: Floats) -> Floats:
    """Log price of the pegged currency, (T,): within .5% of the peg, a fall, then free."""
    breaks = int((np.datetime64(PEG_BREAKS) - START).astype(int))
    inside: Floats = np.clip(autoregression(0.8, 0.001 * rng.standard_normal(breaks)), -0.005, 0.005)
    free = change[breaks:].copy()
    free[0] = -PEG_FALL
    spot: Floats = np.log(ECONOMIES[PEGGED].spot) + np.concatenate([inside, np.cumsum(free)])
    return spot


def basis(rng: np.random.Generator) -> Floats:
    """Gap of forwards to covered parity, (T, N, 3): one basis point a year, so that parity holds but for noise."""
    gap: Floats = autoregression(0.9, 0.00005 * rng.standard_normal((MONTHS, len(CODES), 1)))
    gap[:, HOME] = 0.0
    yearly: Floats = gap * np.array(TENORS) / 12
    return yearly


def dividend_months(months: int) -> Floats:
    """Share of a year's dividends that is paid in each month, (months, N); the last one is that of the last date."""
    month = (MONTHS - np.arange(months, 0, -1)) % 12
    season = ((month >= 3) & (month <= 9))[:, None]
    peak = np.array([economy.peak for economy in ECONOMIES])
    share: Floats = np.where(season, peak / 7, (1 - peak) / 5)
    return share


def equities(rng: np.random.Generator, recession: Bools) -> tuple[Floats, Floats, Floats]:
    """Price, dividends of the last 12 months and total return index, (T, N) each.

    Exact: total_return grows by (price + dividend of the month) / price of the month before.
    """
    T, N = len(recession), len(CODES)
    payout = np.array([economy.payout for economy in ECONOMIES])
    draws = np.sqrt(DP_COMMON) * rng.standard_normal((BURN + T, 1))
    draws = DP_SHOCK * (draws + np.sqrt(1 - DP_COMMON) * rng.standard_normal((BURN + T, N)))
    draws[BURN:] += EQUITY_FALL * surprise_entry(recession)[:, None]
    ratio = payout * np.exp(autoregression(DP_PHI, draws)[BURN:])
    news = np.sqrt(0.5) * (rng.standard_normal((T + 11, 1)) + rng.standard_normal((T + 11, N)))
    rate: Floats = 1000 * payout * np.exp(np.cumsum((SHORT + REAL_GROWTH) / 12 + DIVIDEND_SHOCK * news, axis=0))
    paid = rate * dividend_months(T + 11)
    dividend: Floats = np.lib.stride_tricks.sliding_window_view(paid, 12, axis=0).sum(axis=-1)
    price: Floats = dividend / ratio
    total_return = np.full((T, N), 1000.0)
    total_return[1:] *= np.cumprod((price[1:] + paid[12:]) / price[:-1], axis=0)
    return price, dividend, total_return


def activity(rng: np.random.Generator, recession: Bools) -> Floats:
    """Output growth over a year, (T, N): persistent, and pulled down month by month in a recession."""
    T, N = len(recession), len(CODES)
    noise = np.sqrt(0.5) * (rng.standard_normal((T, 1)) + rng.standard_normal((T, N)))
    push = 0.0035 * noise - 0.006 * recession[:, None]
    return 0.027 + autoregression(0.92, push)
