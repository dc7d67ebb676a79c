"""Equity indices: the dividend-price ratio with its five legs, and carry.

P is the price, D the dividends of the last twelve months, dp = ln(D/P), steps are years. From the exact identity
r = dp + dd' + ln(1 + e^{-dp'}) (primes one year on), with rho = 1/(1 + e^{mean dp}),
    dp = sum_j rho^{j-1} [excess return + riskless rate - dividend growth + approximation]_j + rho^H dp_{t+H}
(Campbell and Shiller 1988, RFS 1:195). The return is the sum of the year's monthly log total returns; what this and
the log-linear form leave out is the approximation leg, computed on its own:
    a_j = [ln((P' + D')/P) - r_j] - [ln(1 + e^{-dp'}) + rho dp'].
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np

from carrylab.data.calendar import MONTHS_IN, Floats, Tenor, horizon_years, lead, window
from carrylab.data.panel import Curves, Panel, curves, levels
from carrylab.data.read import MarketData
from carrylab.errors import DataError, StudyError
from carrylab.markets.currencies import Currencies, forward_price, read_currencies
from carrylab.markets.parity import Entity, Leg, Parity
from carrylab.markets.tenors import rates_at, same_length, step_tenor

YEAR = Tenor(months=12)
APPROXIMATION_BOUND = 0.05


@dataclass(frozen=True, eq=False, slots=True)
class Equities:
    """Prices, trailing dividends, one-period log total returns (T, N), and the bill rates of each index's currency.

    `rates` (T, N, M) per index. `notes` say how dividends and returns were made.
    """

    codes: tuple[str, ...]
    price: Floats
    dividend: Floats
    total: Floats
    rates: Curves
    notes: tuple[str, ...]
    averaged: bool


def parities(data: MarketData, economies: Mapping[str, str]) -> list[Parity]:
    """Every equity parity of the study, one for each horizon."""
    if data.calendar.interval not in MONTHS_IN:
        raise StudyError(
            f"market {data.market.name!r}, key interval: {data.calendar.interval!r} is not allowed for equities; "
            "allowed are month, quarter and year, as dividends are those of twelve months"
        )
    world = read_equities(data, economies)
    entities = tuple(_entity(code, data, economies) for code in world.codes)
    build = {"dividend-price": dividend_price, "carry": carry}
    return [build[name](data, world, entities, h) for name in data.market.parities for h in data.market.horizons]


def _entity(code: str, data: MarketData, economies: Mapping[str, str]) -> Entity:
    economy = data.market.index_economy.get(code, code)
    return Entity(code, economy, economies.get(economy, ""), index=code)


def read_equities(data: MarketData, economies: Mapping[str, str]) -> Equities:
    """Prices, dividends, returns and bill rates as dense arrays, in the currency the study asks for."""
    key = "index" if "index" in data.tables["prices"][0].keys else "economy"
    prices = levels(data.tables["prices"], data.calendar, key)
    price = prices.values
    dividend, total, notes = _dividends_and_returns(data, Panel(prices.codes, price), key)
    rates = _rates(data, economies, prices.codes)
    averaged = any(table.source.timing == "average" for table in data.tables["prices"])
    world = Equities(prices.codes, price, dividend, total, rates, notes, averaged)
    return _in_currency(data, economies, world)


def _dividends_and_returns(data: MarketData, prices: Panel, key: str) -> tuple[Floats, Floats, tuple[str, ...]]:
    """Trailing twelve-month dividends and one-period log total returns (T, N)."""
    calendar, price = data.calendar, prices.values
    a_year = 12 // MONTHS_IN[calendar.interval]
    relative = np.full_like(price, np.nan)
    relative[1:] = price[1:] / price[:-1]
    paid = trailing = None
    notes: tuple[str, ...] = ()
    if "total_return" in data.tables:
        index = levels(data.tables["total_return"], calendar, key).pick(prices.codes)
        gross = np.full_like(price, np.nan)
        gross[1:] = index[1:] / index[:-1]
        paid = np.full_like(price, np.nan)
        paid[1:] = price[:-1] * (gross - relative)[1:]
    if "dividends" in data.tables:
        declared = levels(data.tables["dividends"], calendar, key).pick(prices.codes)
        if data.tables["dividends"][0].source.basis == "per period":
            paid = declared if paid is None else paid
            trailing = _trailing(declared, a_year)
        else:
            trailing = declared
    if trailing is None and paid is not None:
        trailing = _trailing(paid, a_year)
        notes = ("dividends are price times the difference of total and price return, summed over twelve months",)
    if paid is None and trailing is not None:
        paid = trailing / a_year
        notes = (f"one period's dividend is 1/{a_year} of the trailing twelve months'",)
    assert trailing is not None
    assert paid is not None
    total = np.full_like(price, np.nan)
    total[1:] = np.log((price[1:] + paid[1:]) / price[:-1])
    return np.where(trailing > 0, trailing, np.nan), total, notes


def _trailing(paid: Floats, periods: int) -> Floats:
    """Sum of the last `periods` values, NaN where one is missing."""
    found = np.full_like(paid, np.nan)
    if len(paid) >= periods:
        windows = np.lib.stride_tricks.sliding_window_view(paid, periods, axis=0)
        found[periods - 1 :] = windows.sum(axis=2)
    return found


def _rates(data: MarketData, economies: Mapping[str, str], codes: tuple[str, ...]) -> Curves:
    """Bill rates of each index's own currency (T, N, M)."""
    quoted = curves(data.tables["deposits"], data.calendar, "currency", "tenor")
    values = np.full((len(data.calendar), len(codes), len(quoted.tenors)), np.nan)
    for at, code in enumerate(codes):
        economy = data.market.index_economy.get(code, code)
        currency = economies.get(economy, economy)
        if currency not in quoted.codes:
            known = ", ".join(quoted.codes)
            raise DataError(
                f"market {data.market.name!r}: no deposits in {currency!r}, the currency of {code}; found {known}; map "
                "the economy under [economies] or the index under indices"
            )
        values[:, at] = quoted.values[:, quoted.codes.index(currency)]
    return Curves(codes, quoted.tenors, values)


def _in_currency(data: MarketData, economies: Mapping[str, str], world: Equities) -> Equities:
    """Prices and returns in local currency, or in the home currency without or with a hedge."""
    market = data.market
    if market.currency == "local":
        return world
    home = str(market.home)
    own = [economies.get(market.index_economy.get(code, code), code) for code in world.codes]
    if "spot" not in data.tables:
        raise DataError(f"market {market.name!r}: currency = {market.currency!r} needs spot rates; declare them")
    quoted = read_currencies(data)
    if market.currency == "home unhedged":
        money, words = Panel(quoted.codes, quoted.spot), "unhedged"
    else:
        money, words = _hedge(data, quoted), "hedged period by period"
    log_money = np.stack([_money(money, code, home) for code in own], axis=1)
    total = world.total.copy()
    total[1:] += log_money[1:] - log_money[:-1]
    level = np.exp(np.nan_to_num(log_money))
    return replace(
        world,
        price=world.price * level,
        dividend=world.dividend * level,
        total=total,
        rates=_home_rates(data, world, home),
        notes=(*world.notes, f"returns in home currency, {words}, over the home bill rate"),
    )


def _money(money: Panel, code: str, home: str) -> Floats:
    return np.zeros(len(money.values)) if code == home else money.column(code)


def _hedge(data: MarketData, quoted: Currencies) -> Panel:
    """Cumulated log gain of selling each currency forward one period at a time; a hole stays a hole."""
    step = step_tenor(data.calendar)
    assert step is not None
    price, _ = forward_price(data, quoted, step, by_rates=quoted.forwards is None)
    gains = np.zeros_like(price)
    gains[1:] = (price - quoted.spot)[:-1]
    level = np.cumsum(np.nan_to_num(gains), axis=0)
    return Panel(quoted.codes, np.where(np.isnan(gains), np.nan, level))


def _home_rates(data: MarketData, world: Equities, home: str) -> Curves:
    quoted = curves(data.tables["deposits"], data.calendar, "currency", "tenor")
    if home not in quoted.codes:
        raise DataError(f"market {data.market.name!r}: no deposits of the home currency {home!r}")
    own = quoted.values[:, [quoted.codes.index(home)]]
    return Curves(world.codes, quoted.tenors, np.repeat(own, len(world.codes), axis=1))


def dividend_price(data: MarketData, world: Equities, entities: tuple[Entity, ...], horizon: Tenor) -> Parity:
    """Log dividend-price ratio against discounted sums of returns, rates and growth, and the future ratio."""
    years = horizon.months // 12
    dp = np.log(world.dividend) - np.log(world.price)
    rho = data.market.rho if data.market.rho is not None else 1.0 / (1.0 + math.exp(float(np.nanmean(dp))))
    riskless, riskless_name, rate_notes = _riskless_year(data, world)
    parts = [_year(data, world, (dp, rho), riskless, j) for j in range(years)]
    sums = {name: sum(rho**j * part[name] for j, part in enumerate(parts)) for name in parts[0]}
    at = window(data.calendar, horizon)
    notes = (f"rho = {rho:.4f}" + ("" if data.market.rho else ", from the sample mean"), *world.notes, *rate_notes)
    steps, weights = _one_period(data, world), rho ** (np.arange(_periods(data, horizon)) // _periods(data, YEAR))
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
            Leg("excess return", "return", sums["excess"], 1.0, 0.0, steps, None if steps is None else weights),
            Leg(riskless_name, "fundamental", sums["riskless"], 1.0),
            Leg("dividend growth", "fundamental", sums["growth"], -1.0),
            Leg("future dividend-price ratio", "carried over", lead(dp, at), rho**years),
            Leg("approximation", "approximation", sums["approximation"], 1.0),
        ),
        approximation_bound=(data.market.tolerance or APPROXIMATION_BOUND) * sum(rho**j for j in range(years)),
        rho=rho,
        notes=notes,
    )


def _year(
    data: MarketData, world: Equities, ratio: tuple[Floats, float], riskless: Floats, j: int
) -> dict[str, Floats]:
    """The legs of year j + 1, standing at the origin t."""
    dp, rho = ratio
    start, end = window(data.calendar, YEAR.times(j)), window(data.calendar, YEAR.times(j + 1))

    def from_to(values: Floats) -> tuple[Floats, Floats]:
        return (lead(values, start) if j else values), lead(values, end)

    price, later = from_to(world.price)
    dividend, paid = from_to(world.dividend)
    ratio_later = lead(dp, end)
    total = lead(_trailing(world.total, _periods(data, YEAR)), end)
    bills = from_to(riskless)[0]
    left_out = (np.log((later + paid) / price) - total) - (np.log1p(np.exp(-ratio_later)) + rho * ratio_later)
    return {
        "excess": total - bills,
        "riskless": bills,
        "growth": np.log(paid) - np.log(dividend),
        "approximation": left_out,
    }


def _riskless_year(data: MarketData, world: Equities) -> tuple[Floats, str, tuple[str, ...]]:
    """Log riskless return of the year from t: the twelve-month bill, or shorter bills rolled where it is not quoted."""
    step = step_tenor(data.calendar)
    shorter = [tenor for tenor in world.rates.tenors if tenor.years < YEAR.years]
    if same_length(world.rates, YEAR) is None and len(shorter) == len(world.rates.tenors):
        roll = step if step is not None and same_length(world.rates, step) else shorter[-1]
        rate, _ = rates_at(world.rates, roll, data.market, "deposits")
        per_period = rate * horizon_years(step or roll, data.calendar.interval)
        periods = _periods(data, YEAR)
        rolled = lead(_trailing(per_period, periods), window(data.calendar, YEAR - (step or roll)))
        return rolled, "riskless rate beyond today's", (f"the riskless year rolls {roll} bills",)
    rate, notes = rates_at(world.rates, YEAR, data.market, "deposits")
    return rate, "riskless rate", notes


def _periods(data: MarketData, length: Tenor) -> int:
    return length.months // MONTHS_IN[data.calendar.interval]


def _one_period(data: MarketData, world: Equities) -> Floats | None:
    """One-period log excess returns in the row of the period in which they fall; None for averaged prices."""
    step = step_tenor(data.calendar)
    if world.averaged or step is None:
        return None
    quoted = same_length(world.rates, step)
    wanted = step if quoted else world.rates.tenors[0]
    rate, _ = rates_at(world.rates, wanted, data.market, "deposits")
    found = np.full_like(world.total, np.nan)
    found[1:] = world.total[1:] - (rate * step.years)[:-1]
    return found


def carry(data: MarketData, world: Equities, entities: tuple[Entity, ...], horizon: Tenor) -> Parity:
    """ln(1 + hD/P) - h y = excess return - price change - change of ln(1 + hD/P), D the trailing dividends a year."""
    h = horizon_years(horizon, data.calendar.interval)
    at = window(data.calendar, horizon)
    rate, rate_notes = rates_at(world.rates, horizon, data.market, "deposits")
    price, later = world.price, lead(world.price, at)
    dividend, paid = h * world.dividend, h * lead(world.dividend, at)
    income, income_later = np.log1p(dividend / price), np.log1p(paid / later)
    return Parity(
        market=data.market.name,
        name="carry",
        horizon=horizon,
        calendar=data.calendar,
        window=at,
        entities=entities,
        signal_name="carry (dividend yield over the bill rate)",
        signal=income - h * rate,
        legs=(
            Leg("excess return", "return", np.log((later + paid) / price) - h * rate, 1.0, 0.0, _one_period(data, world)),
            Leg("price change beyond the carry", "fundamental", np.log(later) - np.log(price), -1.0),
            Leg("change of the dividend yield", "fundamental", income_later - income, -1.0),
        ),
        notes=(
            *world.notes,
            *rate_notes,
            f"dividends over {horizon} are {h:g} years of the trailing twelve months'",
            *(("prices are period averages, so there are no one-period errors",) if world.averaged else ()),
        ),
    )
