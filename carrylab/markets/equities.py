"""Equity indices: the dividend-price ratio with its five legs, and carry.

P is the price, D the dividends of the last twelve months, dp = ln(D/P), steps are years. From the exact identity
r = dp + dd' + ln(1 + e^{-dp'}) (primes one year on), with rho = 1/(1 + e^{mean dp}),
    dp = sum_j rho^{j-1} [excess return + riskless rate - dividend growth + approximation]_j + rho^H dp_{t+H}
(Campbell and Shiller 1988, RFS 1:195). The return is the sum of the year's monthly log total returns; what this and
the log-linear form leave out is the approximation leg, computed on its own:
    a_j = [ln((P' + D')/P) - r_j] - [ln(1 + e^{-dp'}) + rho dp'].
In home currency the log gain on the money of an index belongs to its return and to the growth of its dividends; with a
hedge it is the forward discount, earned period by period. The ratio itself has no currency.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import replace

import numpy as np

from carrylab.data.calendar import MONTHS_IN, Floats, Tenor, Window, lead, window
from carrylab.data.panel import Curves
from carrylab.data.read import MarketData
from carrylab.errors import DataError, StudyError
from carrylab.markets.indices import YEAR, Equities, before, hedge, periods_in, read_equities, trailing
from carrylab.markets.parity import Entity, Leg, Parity
from carrylab.markets.tenors import SAME, STEP_TENORS, rates_at
from carrylab.options import Market

APPROXIMATION_BOUND = 0.05


def parities(data: MarketData, economies: Mapping[str, str]) -> list[Parity]:
    """Every equity parity of the study, one for each horizon.

    Raises StudyError for an interval that cannot hold a year's dividends, DataError for a missing rate or currency.
    """
    if data.calendar.interval not in MONTHS_IN:
        raise StudyError(
            f"market {data.market.name!r}, key interval: {data.calendar.interval!r} is not allowed for equities; "
            "allowed are month, quarter and year, as dividends are those of twelve months"
        )
    world = read_equities(data, economies)
    entities = tuple(_entity(code, data.market, economies) for code in world.codes)
    build = {"dividend-price": dividend_price, "carry": carry}
    return [build[name](data, world, entities, h) for name in data.market.parities for h in data.market.horizons]


def _entity(code: str, market: Market, economies: Mapping[str, str]) -> Entity:
    economy = market.index_economy.get(code, code)
    return Entity(code, economy, economies.get(economy, ""), index=code)


def dividend_price(data: MarketData, world: Equities, entities: tuple[Entity, ...], horizon: Tenor) -> Parity:
    """Log dividend-price ratio against discounted sums of returns, rates and growth, and the future ratio."""
    years = horizon.months // 12
    bound = APPROXIMATION_BOUND if data.market.tolerance is None else data.market.tolerance
    dp = np.log(world.dividend) - np.log(world.price)
    rho = _rho(data.market, entities, dp)
    riskless, riskless_name, rate_notes = _riskless_year(data, world)
    parts = [_year(data, world, (dp, rho), riskless, j) for j in range(years)]
    sums = {name: np.sum([rho**j * part[name] for j, part in enumerate(parts)], axis=0) for name in parts[0]}
    at = window(data.calendar, horizon)
    steps, step_notes = _one_period(data, world)
    discounts = rho ** (np.arange(periods_in(data, horizon)) // periods_in(data, YEAR)).astype(np.float64)
    rho_note = f"rho = {rho:.4f}" + ("" if data.market.rho is not None else ", from the sample mean")
    return Parity(
        market=data.market.name,
        name="dividend-price",
        horizon=horizon,
        calendar=data.calendar,
        window=at,
        entities=entities,
        signal_name="log dividend-price ratio",
        signal=dp,
        legs=(
            Leg("excess return", "return", sums["excess"], 1.0, 0.0, steps, None if steps is None else discounts),
            Leg(riskless_name, "fundamental", sums["riskless"], 1.0),
            Leg("dividend growth", "fundamental", sums["growth"], -1.0),
            Leg("future dividend-price ratio", "carried over", lead(dp, at), rho**years),
            Leg("approximation", "approximation", sums["approximation"], 1.0),
        ),
        approximation_bound=bound * sum(rho**j for j in range(years)),
        rho=rho,
        notes=(rho_note, *world.notes, *rate_notes, *step_notes),
    )


def _rho(market: Market, entities: tuple[Entity, ...], dp: Floats) -> float:
    """The study's rho, or 1 / (1 + e^{mean dp}) of the market's indices that are not left out."""
    if market.rho is not None:
        return market.rho
    out = set(market.leave_out)
    dp = dp[:, [not out & {one.name, one.economy, one.currency, one.index} for one in entities]]
    if not np.isfinite(dp).any():
        raise DataError(
            f"market {market.name!r}: on no date do a price and a dividend above zero stand together; check that "
            "codes, dates and dividends fit"
        )
    return 1.0 / (1.0 + math.exp(float(np.nanmean(dp))))


def _year(
    data: MarketData, world: Equities, ratio: tuple[Floats, float], riskless: Floats, j: int
) -> dict[str, Floats]:
    """The legs of year j + 1, standing at the origin t."""
    dp, rho = ratio
    start, end = window(data.calendar, YEAR.times(j)), window(data.calendar, YEAR.times(j + 1))

    def at_start(values: Floats) -> Floats:
        return lead(values, start) if j else values

    price, later = at_start(world.price), lead(world.price, end)
    dividend, paid = at_start(world.dividend), lead(world.dividend, end)
    ratio_later = lead(dp, end)
    total, money = _over(data, world.total, YEAR, end), _over(data, world.money, YEAR, end)
    bills = at_start(riskless)
    exact, log_linear = np.log((later + paid) / price) + money, np.log1p(np.exp(-ratio_later)) + rho * ratio_later
    return {
        "excess": total - bills,
        "riskless": bills,
        "growth": np.log(paid) - np.log(dividend) + money,
        "approximation": exact - total - log_linear,
    }


def _over(data: MarketData, changes: Floats, length: Tenor, end: Window) -> Floats:
    """Sum of the one-period changes of the time of `length` that ends in `end`."""
    return lead(trailing(changes, periods_in(data, length)), end)


def _riskless_year(data: MarketData, world: Equities) -> tuple[Floats, str, tuple[str, ...]]:
    """Log riskless return of the year from t: the twelve-month bill, or shorter bills rolled where none is as long."""
    longest = max(tenor.years for tenor in world.rates.tenors)
    roll = _roll(data, world.rates) if longest < YEAR.years - SAME else None
    if roll is None:
        rate, notes = rates_at(world.rates, YEAR, data.market, "deposits")
        return rate, "riskless rate", notes
    rate, notes = rates_at(world.rates, roll, data.market, "deposits")
    bills = [rate] + [lead(rate, window(data.calendar, roll.times(i))) for i in range(1, 12 // roll.months)]
    return (
        np.sum(bills, axis=0) * roll.years,
        "riskless rate beyond today's",
        (f"the riskless year rolls {roll} bills", *notes),
    )


def _roll(data: MarketData, rates: Curves) -> Tenor | None:
    """The bill to roll through a year: of one period where quoted, else the longest that fills it in whole periods."""
    size = MONTHS_IN[data.calendar.interval]
    fits = [n for n in rates.tenors if n.months and not n.days and 12 % n.months == 0 and n.months % size == 0]
    one_period = [n for n in fits if n.months == size]
    return next(iter(one_period or fits[::-1]), None)


def _one_period(data: MarketData, world: Equities) -> tuple[Floats | None, tuple[str, ...]]:
    """One-period log excess returns (T, N), each in the row of its own period; None for averaged prices; and notes."""
    if any(table.source.timing == "average" for table in data.tables["prices"]):
        return None, ("prices are period averages, so there are no one-period errors",)
    step, nearest = STEP_TENORS[data.calendar.interval], replace(data.market, missing_tenor="nearest")
    rate, notes = rates_at(world.rates, step, nearest, "deposits")
    return world.total - before(rate) * step.years, tuple(f"in one-period excess returns {note}" for note in notes)


def carry(data: MarketData, world: Equities, entities: tuple[Entity, ...], horizon: Tenor) -> Parity:
    """Return on an unchanged price against the return, and the changes of price and dividend yield.

    ln(1 + hD/P) - h y = excess return - price change - change of ln(1 + hD/P), D the trailing dividends a year. In home
    currency the price moves with the money; a hedge over h adds its f - s, known today, to signal and return.
    """
    h, at = horizon.years, window(data.calendar, horizon)
    rate, rate_notes = rates_at(world.rates, horizon, data.market, "deposits")
    later = lead(world.price, at)
    dividend, paid = h * world.dividend, h * lead(world.dividend, at)
    income, income_later = np.log1p(dividend / world.price), np.log1p(paid / later)
    sure, open_gain = np.zeros_like(rate), _over(data, world.money, horizon, at)
    hedge_notes: tuple[str, ...] = ()
    if world.quoted is not None and data.market.currency == "home hedged":
        sure, hedge_notes = hedge(data, world.quoted, world.own, horizon)
        open_gain, hedge_notes = np.zeros_like(rate), (f"carry is hedged over {horizon} at once", *hedge_notes)
    excess = np.log((later + paid) / world.price) + sure + open_gain - h * rate
    steps, step_notes = _one_period(data, world)
    return Parity(
        market=data.market.name,
        name="carry",
        horizon=horizon,
        calendar=data.calendar,
        window=at,
        entities=entities,
        signal_name="carry (dividend yield over the bill rate)",
        signal=income + sure - h * rate,
        legs=(
            Leg("excess return", "return", excess, 1.0, 0.0, steps),
            Leg("price change beyond the carry", "fundamental", np.log(later / world.price) + open_gain, -1.0),
            Leg("change of the dividend yield", "fundamental", income_later - income, -1.0),
        ),
        notes=(
            *world.notes,
            *rate_notes,
            *hedge_notes,
            *step_notes,
            f"dividends over {horizon} are {h:g} years of the trailing twelve months'",
        ),
    )
