"""Arrays of the demo world as rows of text: published roundings, LF line ends, the same bytes on every machine."""

from __future__ import annotations

import csv
from collections.abc import Iterable, Sequence
from pathlib import Path

import numpy as np

from carrylab.demo.economies import CLOSED, CLOSED_MONTHS, CODES, ECONOMIES, HOME, Economy
from carrylab.demo.rates import TENORS, Floats, accrual_days
from carrylab.demo.world import Bools, World

Row = tuple[str, ...]
BASIS_DAYS = {"act/360": 360.0, "act/365f": 365.0}
POINTS = {"QNK": 100.0}
OTHER_POINTS = 10000.0
CROSSES = (("QPD", "QQS"), ("QYR", "QNK"))
FOREIGN = tuple(i for i in range(len(CODES)) if i != HOME)


def write_rows(path: Path, header: Sequence[str], rows: Iterable[Sequence[str]]) -> None:
    """Write a CSV file (RFC 4180 quotes) with LF line ends."""
    with path.open("w", encoding="utf-8", newline="") as file:
        csv.writer(file, lineterminator="\n").writerows([header, *rows])


def fixed(value: float, decimals: int) -> str:
    """A number with this many decimals; zero has no sign."""
    return f"{round(value, decimals) + 0.0:.{decimals}f}"


def significant(value: float) -> str:
    """A number with six significant digits."""
    return f"{value:.6g}"


def day(date: np.datetime64) -> str:
    """A date in ISO 8601 form."""
    return str(date.astype("datetime64[D]"))


def listed(world: World) -> Bools:
    """Months in which each economy is in the data, (T, N)."""
    month = world.dates.astype("datetime64[M]")[:, None]
    since = np.array([np.datetime64(economy.since) for economy in ECONOMIES])
    until = np.array([np.datetime64(economy.until) for economy in ECONOMIES])
    return (month >= since) & (month <= until)


def bond_market_open(world: World) -> Bools:
    """Months in which each economy has zero yields, (T, N)."""
    month = world.dates.astype("datetime64[M]")
    first, last = (np.datetime64(edge) for edge in CLOSED_MONTHS)
    traded = listed(world)
    traded[(month >= first) & (month <= last), CLOSED] = False
    return traded


def pair_name(economy: Economy) -> str:
    """The quoted pair, base currency first."""
    home = ECONOMIES[HOME].currency
    return home + economy.currency if economy.base == "home" else economy.currency + home


def points_scale(economy: Economy) -> float:
    """Forward points in one unit of the price."""
    return POINTS.get(economy.currency, OTHER_POINTS)


def zero_rows(world: World, months: Sequence[int]) -> list[Row]:
    """`date, economy` and one yield per maturity: percent, annual compounding, four decimals."""
    percent = 100 * np.expm1(world.zero[:, :, np.array(months) - 1])
    traded = bond_market_open(world)
    return [
        (day(date), code, *(fixed(value, 4) for value in percent[t, i]))
        for t, date in enumerate(world.dates)
        for i, code in enumerate(CODES)
        if traded[t, i]
    ]


def simple_rates(world: World) -> Floats:
    """Deposit rates of 1, 3 and 12 months, (T, N, 3): percent, simple, each currency's own day count."""
    basis = np.array([BASIS_DAYS[economy.day_count] for economy in ECONOMIES])
    accrual = accrual_days(world.dates)[:, None] / basis[:, None]
    percent: Floats = 100 * np.expm1(world.growth) / accrual
    return percent


def deposit_rows(world: World) -> list[Row]:
    """`date, currency` and one rate per tenor."""
    percent = simple_rates(world)
    there = listed(world)
    return [
        (day(date), economy.currency, *(fixed(value, 4) for value in percent[t, i]))
        for t, date in enumerate(world.dates)
        for i, economy in enumerate(ECONOMIES)
        if there[t, i]
    ]


def mid_price(world: World, i: int) -> Floats:
    """Price of the quoted pair of economy i, (T,)."""
    sign = -1.0 if ECONOMIES[i].base == "home" else 1.0
    return np.exp(sign * world.spot[:, i])


def spot_rows(world: World) -> list[Row]:
    """`date, pair, bid, ask` for every currency against home."""
    there = listed(world)
    rows = []
    for i in FOREIGN:
        half, price = ECONOMIES[i].half_spread, mid_price(world, i)
        for t in np.flatnonzero(there[:, i]):
            quote = (significant(price[t] * np.exp(-half)), significant(price[t] * np.exp(half)))
            rows.append((day(world.dates[t]), pair_name(ECONOMIES[i]), *quote))
    return sorted(rows)


def cross_rows(world: World) -> list[Row]:
    """`date, pair, bid, ask` for two pairs without the home currency."""
    currencies = [economy.currency for economy in ECONOMIES]
    rows = []
    for base, other in CROSSES:
        i, j = currencies.index(base), currencies.index(other)
        half = ECONOMIES[i].half_spread + ECONOMIES[j].half_spread
        for t, value in enumerate(world.spot[:, i] - world.spot[:, j]):
            quote = (significant(np.exp(value - half)), significant(np.exp(value + half)))
            rows.append((day(world.dates[t]), base + other, *quote))
    return sorted(rows)


def forward_rows(world: World) -> list[Row]:
    """`date, pair, tenor, bid, ask` in points on the spot price of the pair."""
    there = listed(world)
    rows = []
    for i in FOREIGN:
        economy, price = ECONOMIES[i], mid_price(world, i)
        sign = -1.0 if economy.base == "home" else 1.0
        points = points_scale(economy) * price[:, None] * np.expm1(sign * world.premium[:, i])
        half = points_scale(economy) * price[:, None] * economy.half_spread * np.sqrt(np.array(TENORS) / 12) / 5
        for t in np.flatnonzero(there[:, i]):
            for k, tenor in enumerate(TENORS):
                quote = (fixed(points[t, k] - half[t, k], 3), fixed(points[t, k] + half[t, k], 3))
                rows.append((day(world.dates[t]), pair_name(economy), f"{tenor}m", *quote))
    return sorted(rows)


def index_rows(world: World, values: Floats) -> list[Row]:
    """`date` and one column per economy; an economy that is not in the data yet, or no more, has an empty cell."""
    there = listed(world)
    return [
        (day(date), *(significant(value) if on else "" for value, on in zip(values[t], there[t], strict=True)))
        for t, date in enumerate(world.dates)
    ]


def activity_rows(world: World) -> list[Row]:
    """`date` (a month) and growth over a year in percent, one column per economy."""
    return [
        (day(date)[:7], *(fixed(100 * value, 2) for value in world.activity[t])) for t, date in enumerate(world.dates)
    ]


def recession_rows(world: World) -> list[Row]:
    """`from, until`: first and last month of each recession; the last one may be open."""
    edges = np.diff(np.concatenate([[0], world.recession.astype(int), [0]]))
    first, after = np.flatnonzero(edges == 1), np.flatnonzero(edges == -1)
    return [
        (day(world.dates[a])[:7], day(world.dates[b - 1])[:7] if b < len(world.dates) else "")
        for a, b in zip(first, after, strict=True)
    ]
