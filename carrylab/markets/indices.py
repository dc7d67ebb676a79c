"""Equity indices as arrays: prices, dividends, total returns, bill rates, and the money they are in."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from carrylab.data.calendar import MONTHS_IN, Floats, Tenor
from carrylab.data.panel import Curves, Panel, curves, levels
from carrylab.data.read import MarketData
from carrylab.errors import DataError, StudyError
from carrylab.markets.currencies import Currencies, forward_price, read_currencies
from carrylab.markets.tenors import STEP_TENORS
from carrylab.options import Market

YEAR = Tenor(months=12)


@dataclass(frozen=True, eq=False, slots=True)
class Equities:
    """Indices with price, trailing dividends, one-period log total return and log gain on money (T, N).

    `price` and `dividend` are local; `total`, `money` and the bill `rates` (T, N, M) are in the study's currency, and
    `money` is zero in local currency. `own` is each index's currency; `quoted` the exchange rates, where needed.
    `notes` say how dividends and returns were made.
    """

    codes: tuple[str, ...]
    own: tuple[str, ...]
    price: Floats
    dividend: Floats
    total: Floats
    money: Floats
    rates: Curves
    quoted: Currencies | None
    notes: tuple[str, ...]


def read_equities(data: MarketData, economies: Mapping[str, str]) -> Equities:
    """Prices, dividends, returns and bill rates as dense arrays, in the currency the study asks for."""
    key = "index" if "index" in data.tables["prices"][0].keys else "economy"
    prices = levels(data.tables["prices"], data.calendar, key)
    own = tuple(_currency(data.market, economies, code) for code in prices.codes)
    quoted = None if data.market.currency == "local" else _exchange_rates(data)
    money, money_notes = (np.zeros_like(prices.values), ()) if quoted is None else _money(data, quoted, own)
    dividend, dividend_notes = _dividends(data, prices, key)
    total, total_notes = _total(data, prices, key)
    return Equities(
        codes=prices.codes,
        own=own,
        price=prices.values,
        dividend=dividend,
        total=total + money,
        money=money,
        rates=_rates(data, prices.codes, own),
        quoted=quoted,
        notes=(*dividend_notes, *total_notes, *money_notes),
    )


def _currency(market: Market, economies: Mapping[str, str], code: str) -> str:
    """The currency of an index's economy, or the economy's own code where the study names none."""
    economy = market.index_economy.get(code, code)
    return economies.get(economy, economy)


def _dividends(data: MarketData, prices: Panel, key: str) -> tuple[Floats, tuple[str, ...]]:
    """Dividends of the last twelve months (T, N), a hole where they are not above zero, and how they were made."""
    a_year = periods_in(data, YEAR)
    if "dividends" in data.tables:
        per_period, declared = _per_period(data), _declared(data, prices, key)
        return _positive(trailing(declared, a_year) if per_period else declared), ()
    index = levels(data.tables["total_return"], data.calendar, key).pick(prices.codes)
    beyond = index / before(index) - prices.values / before(prices.values)
    note = "dividends are price times the difference of total and price return, summed over twelve months"
    return _positive(trailing(before(prices.values) * beyond, a_year)), (note,)


def _total(data: MarketData, prices: Panel, key: str) -> tuple[Floats, tuple[str, ...]]:
    """One-period log total returns (T, N) in local currency, and how they were made."""
    if "total_return" in data.tables:
        index = levels(data.tables["total_return"], data.calendar, key).pick(prices.codes)
        return np.log(index / before(index)), ()
    paid, a_year = _declared(data, prices, key), periods_in(data, YEAR)
    notes: tuple[str, ...] = ()
    if not _per_period(data):
        paid = paid / a_year
        notes = (f"one period's dividend is 1/{a_year} of the trailing twelve months'",)
    return np.log(_positive(prices.values + paid) / before(prices.values)), notes


def _declared(data: MarketData, prices: Panel, key: str) -> Floats:
    return levels(data.tables["dividends"], data.calendar, key).pick(prices.codes)


def _per_period(data: MarketData) -> bool:
    """Whether the dividends are those of one period; every file of a market must have the same basis."""
    first, *others = [table.source for table in data.tables["dividends"]]
    for source in others:
        if source.basis != first.basis:
            raise DataError(
                f"{source.file}: dividends are {source.basis!r} here and {first.basis!r} in {first.file}; allowed is "
                "one basis a market"
            )
    return first.basis == "per period"


def before(values: Floats) -> Floats:
    """The value one period before."""
    return np.concatenate([np.full_like(values[:1], np.nan), values[:-1]])


def _positive(values: Floats) -> Floats:
    return np.where(values > 0, values, np.nan)


def trailing(paid: Floats, periods: int) -> Floats:
    """Sum of the last `periods` values, NaN where one is missing."""
    found = np.full_like(paid, np.nan)
    if len(paid) >= periods:
        windows = np.lib.stride_tricks.sliding_window_view(paid, periods, axis=0)
        found[periods - 1 :] = windows.sum(axis=2)
    return found


def _rates(data: MarketData, codes: tuple[str, ...], own: tuple[str, ...]) -> Curves:
    """Bill rates (T, N, M) in each index's own currency, or in the home currency where returns are."""
    quoted = curves(data.tables["deposits"], data.calendar, "currency", "tenor")
    wanted = own if data.market.currency == "local" else (str(data.market.home),) * len(own)
    for code, currency in zip(codes, wanted, strict=True):
        if currency not in quoted.codes:
            known = ", ".join(quoted.codes)
            raise DataError(
                f"market {data.market.name!r}: no deposits in {currency!r}, the currency of {code}; found {known}; add "
                "them, or map the economy under [economies] and the index under indices"
            )
    return Curves(codes, quoted.tenors, quoted.values[:, [quoted.codes.index(currency) for currency in wanted]])


def _exchange_rates(data: MarketData) -> Currencies:
    market = data.market
    if market.home is None:
        raise StudyError(f"market {market.name!r}: the key home is missing; currency = {market.currency!r} needs it")
    if "spot" not in data.tables:
        raise DataError(
            f"market {market.name!r}: currency = {market.currency!r} needs spot rates; declare them as spot"
        )
    return read_currencies(data)


def _money(data: MarketData, quoted: Currencies, own: tuple[str, ...]) -> tuple[Floats, tuple[str, ...]]:
    """Log gain of each period (T, N) on the money of an index, its appreciation or with a hedge its discount; notes."""
    if data.market.currency == "home unhedged":
        gains = _of_index(data, quoted, own, quoted.spot - before(quoted.spot))
        return gains, ("returns in home currency, unhedged, over the home bill rate",)
    discount, notes = hedge(data, quoted, own, STEP_TENORS[data.calendar.interval])
    return before(discount), ("returns in home currency, hedged period by period, over the home bill rate", *notes)


def hedge(data: MarketData, quoted: Currencies, own: tuple[str, ...], length: Tenor) -> tuple[Floats, tuple[str, ...]]:
    """Log gain f - s (T, N), known today, of selling the money of each index forward; and notes on the lengths used."""
    forward, notes = forward_price(data, quoted, length, by_rates=quoted.forwards is None)
    return _of_index(data, quoted, own, forward - quoted.spot), notes


def _of_index(data: MarketData, quoted: Currencies, own: tuple[str, ...], gains: Floats) -> Floats:
    """Gains by currency handed to the indices; none at home."""
    home, panel = data.market.home, Panel(quoted.codes, gains)
    missing = [code for code in own if code not in (*quoted.codes, home)]
    if missing:
        known = ", ".join(quoted.codes)
        raise DataError(f"market {data.market.name!r}: no spot rate of {missing[0]!r} against {home}; found {known}")
    return np.stack([np.zeros(len(gains)) if code == home else panel.column(code) for code in own], axis=1)


def periods_in(data: MarketData, length: Tenor) -> int:
    """Periods of the market's calendar in a length of whole months."""
    return length.months // MONTHS_IN[data.calendar.interval]
