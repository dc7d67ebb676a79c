"""What a dirty demo file is made of: right rows, one mistake put into them, and the line of the answer key."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from carrylab.demo.economies import CODES
from carrylab.demo.files import Row, deposit_rows, forward_rows, significant, spot_rows, zero_rows
from carrylab.demo.rates import Floats
from carrylab.demo.world import World

BRIDGE_SEED, TRADING_DAYS = 21, 21
ALWAYS = ("1996-01", "2025-12")
QUOTE = ("date", "pair", "bid", "ask")


@dataclass(frozen=True, slots=True)
class File:
    """One data file: its header and rows."""

    header: Sequence[str]
    rows: Sequence[Row]


@dataclass(frozen=True, slots=True)
class Plant:
    """One line of the answer key, but for the study and the market it stands in.

    `series` is the code of the series, empty where the whole file is wrong; `first` and `last` bound the mistake.
    `also` names checks that the same mistake sets off rightly.
    """

    check: str
    level: str
    file: str
    series: str
    first: str
    last: str
    planted: str
    also: str = ""


@dataclass(frozen=True, slots=True)
class Case:
    """One market with one mistake: the study it stands in, its part of the study file, its files and its key lines."""

    study: str
    market: str
    toml: str
    files: Mapping[str, File]
    key: tuple[Plant, ...]


def month(row: Row) -> str:
    """The month of a row whose first cell is a date."""
    return row[0][:7]


def edited(rows: Iterable[Row], series: str, span: tuple[str, str], change: Callable[[Row], list[Row]]) -> list[Row]:
    """Rows with `change` applied to one series (second cell) from the first to the last month of `span`."""
    made = []
    for row in rows:
        hit = row[1] == series and span[0] <= month(row) <= span[1]
        made += change(row) if hit else [row]
    return made


def scaled(factor: float, keys: int = 2) -> Callable[[Row], list[Row]]:
    """Multiply every number of a row after its key cells."""
    return lambda row: [(*row[:keys], *(significant(float(cell) * factor) for cell in row[keys:]))]


def value_of_month(rows: Iterable[Row], series: str) -> dict[str, Row]:
    """Cells after the two keys, by month, of one series."""
    return {month(row): row[2:] for row in rows if row[1] == series}


def month_before(label: str) -> str:
    """The month before a month."""
    return str(np.datetime64(label) - 1)


def lagged(rows: list[Row], series: str) -> list[Row]:
    """One series with every value standing a month late; its first month has none."""
    values = value_of_month(rows, series)
    return edited(
        rows,
        series,
        ALWAYS,
        lambda row: [(*row[:2], *values[before])] if (before := month_before(month(row))) in values else [],
    )


def averaged(rows: list[Row], series: str, until: str) -> list[Row]:
    """One series as averages over the days of each month, up to `until`, from a path that ends where it should."""
    values = value_of_month(rows, series)
    logs = np.log([[float(cell) for cell in cells] for cells in values.values()])
    means = dict(zip(values, monthly_average(logs), strict=True))
    after_first = str(np.datetime64(min(values)) + 1)
    return edited(
        rows, series, (after_first, until), lambda row: [(*row[:2], *(significant(v) for v in means[month(row)]))]
    )


def monthly_average(logs: Floats) -> Floats:
    """Mean daily price of each month, (T, K), on random paths through the month-end logs (T, K)."""
    rng = np.random.default_rng(BRIDGE_SEED)
    change = np.diff(logs[:, 0], prepend=logs[0, 0])
    steps = change[1:].std() / np.sqrt(TRADING_DAYS) * rng.standard_normal((len(logs), TRADING_DAYS))
    walk = np.cumsum(steps, axis=1)
    share = np.arange(1, TRADING_DAYS + 1) / TRADING_DAYS
    path = walk + share * (change - walk[:, -1])[:, None] - change[:, None]  # log distance to the month's end
    mean: Floats = np.exp(logs) * np.exp(path).mean(axis=1)[:, None]
    return mean


def spots(world: World, pairs: Sequence[str]) -> list[Row]:
    """Right spot quotes of some pairs."""
    return [row for row in spot_rows(world) if row[1] in pairs]


def forwards(world: World, pairs: Sequence[str], tenor: str = "1m") -> list[Row]:
    """Right forward points of some pairs at one tenor: `date, pair, bid, ask`."""
    return [(*row[:2], *row[3:]) for row in forward_rows(world) if row[1] in pairs and row[2] == tenor]


def deposits(world: World) -> list[Row]:
    """Right one-month deposit rates: `date, currency, value`."""
    return [row[:3] for row in deposit_rows(world)]


def curves(world: World, economies: Sequence[str]) -> list[Row]:
    """Right zero yields of some economies at 12, 24, 36 and 60 months."""
    return [row for row in zero_rows(world, [12, 24, 36, 60]) if row[1] in economies]


def indices(rows: list[Row], economies: Sequence[str]) -> list[Row]:
    """Wide index rows turned long, `date, economy, value`, for some economies; empty cells are left out."""
    return [
        (row[0], code, cell)
        for row in rows
        for code, cell in zip(CODES, row[1:], strict=True)
        if code in economies and cell
    ]
