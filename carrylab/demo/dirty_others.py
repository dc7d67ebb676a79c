"""Planted mistakes in zero yields, equity indices and ready-made columns."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace

import numpy as np

from carrylab.demo.dirty_currencies import RATES
from carrylab.demo.economies import CODES
from carrylab.demo.files import Row, day, deposit_rows, fixed, index_rows
from carrylab.demo.plants import ALWAYS, Case, File, Plant, curves, edited, indices, lagged, scaled
from carrylab.demo.world import World

CURVE = ("date", "economy", "12m", "24m", "36m", "60m")
LONG = ("date", "economy", "value")
BONDS = ("QM", "QP", "QT", "QY")
STOCKS = ("QM", "QT", "QX", "QY")


def bonds(market: str, file: str, unit: str = "percent", *extra: str) -> str:
    """A bond market of a study file."""
    lines = [
        "[[market]]",
        f'name = "{market}"',
        'kind = "bonds"',
        'parities = ["forward-spot"]',
        'maturities = ["2y", "3y"]',
        *extra,
        "[market.data]",
        f'zero_yields = {{ file = "{file}", spread = "maturity", unit = "{unit}", compounding = "annual" }}',
    ]
    return "\n".join(lines) + "\n"


def bond_case(study: str, market: str, rows: Sequence[Row], plant: Plant, unit: str = "percent") -> Case:
    """A case whose file is the one the key line names."""
    return Case(study, market, bonds(market, plant.file, unit), {plant.file: File(CURVE, rows)}, (plant,))


def bond_cases(world: World) -> list[Case]:
    """Units, a curve that cannot be, months that stand twice, errors without lags."""
    right = curves(world, BONDS)
    decimal = [(*row[:2], *(fixed(float(cell) / 100, 6) for cell in row[2:])) for row in right]
    twice, slip = ("2010-06", "2010-06"), ("2014-07", "2014-07")
    bent = edited(right, "QP", slip, lambda row: [(*row[:4], fixed(float(row[4]) / 10, 4), row[5])])
    same = edited(right, "QT", twice, lambda row: [row, row])
    differ = edited(right, "QT", twice, lambda row: [row, *scaled(1.1)(row)])
    overlap = "zero_overlap.csv"
    return [
        bond_case(
            "study.toml",
            "Percent declared decimal",
            right,
            Plant("U1", "error", "zero_percent.csv", "", *ALWAYS, "percent declared as decimal"),
            "decimal",
        ),
        bond_case(
            "study.toml",
            "Decimal declared percent",
            decimal,
            Plant("U1", "warning", "zero_decimal.csv", "", *ALWAYS, "decimals declared as percent"),
        ),
        bond_case(
            "study.toml",
            "Impossible curve",
            bent,
            Plant("R2", "warning", "zero_curve.csv", "QP 36m", *slip, "the decimal point of one yield slipped", "D8"),
        ),
        bond_case(
            "study.toml",
            "Month twice",
            same,
            Plant("D1", "note", "zero_twice.csv", "QT", *twice, "a month stands twice with the same values"),
        ),
        bond_case(
            "duplicates.toml",
            "Month twice, other values",
            differ,
            Plant("D1", "error", "zero_two_values.csv", "QT", *twice, "a month stands twice with different values"),
        ),
        Case(
            "overlap.toml",
            "Errors without lags",
            bonds("Errors without lags", overlap, "percent", 'errors = "robust"'),
            {overlap: File(CURVE, right)},
            (
                Plant(
                    "H1", "error", overlap, "", *ALWAYS, "a year ahead, month by month, with errors that know no lags"
                ),
            ),
        ),
    ]


def equities(market: str, data: Mapping[str, str]) -> str:
    """An equity market of a study file; `data` maps a role to its file."""
    basis = {"dividends": ', basis = "trailing 12 months"'}
    rates = RATES.replace("deposits.csv", "deposits_year.csv").replace('"1m"', '"12m"')
    lines = [
        "[[market]]",
        f'name = "{market}"',
        'kind = "equities"',
        'parities = ["dividend-price"]',
        "[market.data]",
        *(f'{role} = {{ file = "{file}"{basis.get(role, "")} }}' for role, file in data.items()),
        f"deposits = {rates}",
    ]
    return "\n".join(lines) + "\n"


def equity_cases(world: World) -> list[Case]:
    """Dividends that cannot be, and an index that leaves; all share the right rates of `deposits_year.csv`."""
    year = File(("date", "currency", "value"), [(*row[:2], row[4]) for row in deposit_rows(world)])
    return [replace(case, files={**case.files, "deposits_year.csv": year}) for case in _equity_cases(world)]


def _equity_cases(world: World) -> list[Case]:
    price, dividend, back = (
        indices(index_rows(world, values), STOCKS) for values in (world.price, world.dividend, world.total_return)
    )
    leaving = indices(index_rows(world, world.price), ("QM", "QW", "QY"))
    hundredths = edited(dividend, "QX", ALWAYS, scaled(100))
    return [
        _equity(
            "Dividends in hundredths",
            {"prices": ("price.csv", price), "dividends": ("dividend_unit.csv", hundredths)},
            Plant(
                "Q1", "warning", "dividend_unit.csv", "QX", *ALWAYS, "dividends in hundredths of the price's unit", "I1"
            ),
        ),
        _equity(
            "Total return a month late",
            {"prices": ("price.csv", price), "total_return": ("total_return_late.csv", lagged(back, "QT"))},
            Plant(
                "Q1", "warning", "total_return_late.csv", "QT", *ALWAYS, "total return stands one month late", "D4 I1"
            ),
        ),
        _equity(
            "Price and total return swapped",
            {
                "prices": ("price_swapped.csv", _mixed(price, back)),
                "total_return": ("total_return_swapped.csv", _mixed(back, price)),
            },
            Plant(
                "Q1",
                "warning",
                "total_return_swapped.csv",
                "QX",
                *ALWAYS,
                "price and total return stand in each other's place",
            ),
        ),
        _equity(
            "Index that leaves",
            {
                "prices": ("price_leaving.csv", leaving),
                "dividends": ("dividend_leaving.csv", indices(index_rows(world, world.dividend), ("QM", "QW", "QY"))),
            },
            Plant("S1", "warning", "price_leaving.csv", "QW", "2011-06", "2011-06", "leaves without a reason"),
        ),
    ]


def _mixed(rows: list[Row], others: list[Row]) -> list[Row]:
    """Rows with those of QX taken from the other list."""
    return [other if row[1] == "QX" else row for row, other in zip(rows, others, strict=True)]


def _equity(market: str, data: Mapping[str, tuple[str, Sequence[Row]]], plant: Plant) -> Case:
    toml = equities(market, {role: name for role, (name, _) in data.items()})
    return Case("study.toml", market, toml, {name: File(LONG, rows) for name, rows in data.values()}, (plant,))


COLUMNS = """\
[[market]]
name = "Legs that do not add up"
kind = "columns"
by = "entity"
[market.data]
panel = { file = "panel.csv", entity = "economy", signal = "spread", legs = [
  { name = "excess return", column = "rx", weight = 1, null = 0, role = "return" },
  { name = "rate rise", column = "dy", weight = 1, null = 1, role = "fundamental" } ] }
"""


def column_cases(world: World) -> list[Case]:
    """A ready-made spread of two-year bonds whose legs miss it in one row."""
    y1, y2 = world.zero[:, :, 11], world.zero[:, :, 23]
    excess, rise = 2 * y2[:-12] - y1[12:] - y1[:-12], y1[12:] - y1[:-12]
    columns = np.stack([2 * y2[:-12] - 2 * y1[:-12], excess, rise], axis=-1)
    rows: list[Row] = [
        (day(world.dates[t]), code, *(fixed(value, 10) for value in columns[t, CODES.index(code)]))
        for t in range(len(columns))
        for code in ("QM", "QY")
    ]
    off = edited(rows, "QY", ("2010-03", "2010-03"), lambda row: [(*row[:3], fixed(float(row[3]) + 0.01, 10), row[4])])
    plant = Plant("I1", "error", "panel.csv", "QY", "2010-03", "2010-03", "one excess return is one percent too high")
    header = ("date", "economy", "spread", "rx", "dy")
    return [Case("identity.toml", "Legs that do not add up", COLUMNS, {"panel.csv": File(header, off)}, (plant,))]
