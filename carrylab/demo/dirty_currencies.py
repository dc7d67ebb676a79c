"""Planted mistakes in spot rates, forwards and deposits."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from carrylab.demo.files import Row, cross_rows, fixed, significant
from carrylab.demo.plants import (
    ALWAYS,
    QUOTE,
    Case,
    File,
    Plant,
    averaged,
    deposits,
    edited,
    forwards,
    lagged,
    scaled,
    spots,
)
from carrylab.demo.studies import DAY_COUNT
from carrylab.demo.world import World

PEERS = ("QPDQMT", "QMTQQS", "QTNQMT", "QYRQMT")
SPOT = '{ file = "spot.csv", quote = "pair" }'
POINTS = '{ file = "forwards.csv", quote = "points", scale = 10000, tenor = "1m" }'
RATES = f'{{ file = "deposits.csv", tenor = "1m", unit = "percent", compounding = "simple", day_count = {DAY_COUNT} }}'


def currency_cases(world: World) -> list[Case]:
    """One case per market, in the order of the answer key."""
    right = {
        "spot.csv": File(QUOTE, spots(world, PEERS)),
        "forwards.csv": File(QUOTE, forwards(world, PEERS)),
        "deposits.csv": File(("date", "currency", "value"), deposits(world)),
    }
    return [*_parity(world, right), *_quotes(world), *_series(world), *_regimes(world)]


def currencies(market: str, data: Mapping[str, str], *extra: str) -> str:
    """A currency market of a study file; `data` maps a role to its table."""
    roles = {"spot": SPOT, "deposits": RATES, **data}
    lines = [
        "[[market]]",
        f'name = "{market}"',
        'kind = "currencies"',
        'parities = ["uncovered-interest"]',
        'horizons = ["1m"]',
        *extra,
        "[market.data]",
        *(f"{role} = {table}" for role, table in roles.items()),
    ]
    return "\n".join(lines) + "\n"


def case(market: str, data: Mapping[str, str], files: Mapping[str, File], *key: Plant) -> Case:
    """A case of the main dirty study."""
    return Case("study.toml", market, currencies(market, data), files, key)


def spot_case(market: str, rows: Sequence[Row], *key: Plant) -> Case:
    """A case whose only wrong file is the spot file the key names."""
    name = key[0].file
    return case(market, {"spot": f'{{ file = "{name}", quote = "pair" }}'}, {name: File(QUOTE, rows)}, *key)


def _parity(world: World, right: Mapping[str, File]) -> list[Case]:
    """Mistakes that covered parity shows: rates, direction, tenor, scale."""
    rates = list(right["deposits.csv"].rows)
    swap = {"QPD": "QMT", "QMT": "QPD"}
    swapped = sorted((row[0], swap[row[1]], row[2]) for row in rates if row[1] in swap)
    monthly = edited(rates, "QYR", ALWAYS, lambda row: [(*row[:2], fixed(float(row[2]) / 12, 4))])
    tenor = edited(forwards(world, PEERS, "1m"), "QTNQMT", ALWAYS, lambda _: [])
    tenor = sorted(tenor + forwards(world, ("QTNQMT",), "3m"))
    outright = _outright(world)
    return [
        case(
            "Rates not annualised",
            {"forwards": POINTS, "deposits": RATES.replace("deposits.csv", "deposits_monthly.csv")},
            {**right, "deposits_monthly.csv": File(("date", "currency", "value"), monthly)},
            Plant("P1", "error", "deposits_monthly.csv", "QYR", *ALWAYS, "rates of QYR are per month, not per year"),
        ),
        case(
            "Rates swapped",
            {
                "spot": SPOT.replace("spot.csv", "spot_one.csv"),
                "forwards": POINTS.replace("forwards.csv", "forwards_one.csv"),
                "deposits": RATES.replace("deposits.csv", "deposits_swapped.csv"),
            },
            {
                "spot_one.csv": File(QUOTE, spots(world, ("QPDQMT",))),
                "forwards_one.csv": File(QUOTE, forwards(world, ("QPDQMT",))),
                "deposits_swapped.csv": File(("date", "currency", "value"), swapped),
            },
            Plant(
                "P1",
                "error",
                "deposits_swapped.csv",
                "QPD",
                *ALWAYS,
                "the rates of QPD and QMT stand in each other's place",
            ),
        ),
        case(
            "Quotes turned round",
            {
                "spot": '{ file = "spot_home.csv", quote = "foreign per home" }',
                "forwards": '{ file = "forwards_home.csv", quote = "foreign per home", tenor = "1m" }',
            },
            {name: File(("date", "currency", "value"), rows) for name, rows in outright.items()},
            Plant("P1", "error", "spot_home.csv", "", *ALWAYS, "home per foreign is declared as foreign per home"),
        ),
        case(
            "Wrong tenor",
            {"forwards": POINTS.replace("forwards.csv", "forwards_tenor.csv")},
            {"forwards_tenor.csv": File(QUOTE, tenor)},
            Plant(
                "P1",
                "error",
                "forwards_tenor.csv",
                "QTNQMT",
                *ALWAYS,
                "three-month points of QTN declared as one month",
            ),
        ),
        case(
            "Points scale",
            {"forwards": POINTS.replace("10000", "100")},
            {},
            Plant("P4", "error", "forwards.csv", "", *ALWAYS, "points are divided by 100 where 10000 is right", "P1"),
        ),
    ]


def _outright(world: World) -> dict[str, list[Row]]:
    """Right mid prices, home per foreign, of two currencies: spot and one-month outright forward."""
    made: dict[str, list[Row]] = {"spot_home.csv": [], "forwards_home.csv": []}
    pairs = ("QPDQMT", "QYRQMT")
    for spot, points in zip(spots(world, pairs), forwards(world, pairs), strict=True):
        price, ahead = ((float(row[2]) + float(row[3])) / 2 for row in (spot, points))
        made["spot_home.csv"].append((spot[0], spot[1][:3], f"{price:.8g}"))
        made["forwards_home.csv"].append((spot[0], spot[1][:3], f"{price + ahead / 10000:.8g}"))
    return made


def _quotes(world: World) -> list[Case]:
    """Mistakes inside quotes: a cross turned round, bid above ask, a wide spread."""
    crosses = [row for row in cross_rows(world) if row[1] == "QPDQQS"]
    year = ("2015-01", "2015-12")
    turned = edited(
        crosses,
        "QPDQQS",
        year,
        lambda row: [(*row[:2], significant(1 / float(row[3])), significant(1 / float(row[2])))],
    )
    right = spots(world, PEERS)
    crossed = edited(right, "QYRQMT", ("2007-05", "2007-05"), lambda row: [(*row[:2], row[3], row[2])])
    wide = edited(right, "QPDQMT", ("2011-09", "2011-09"), _widen)
    return [
        case(
            "Cross turned round",
            {"spot": f'[ {SPOT}, {{ file = "crosses_turned.csv", quote = "pair" }} ]'},
            {"crosses_turned.csv": File(QUOTE, turned)},
            Plant("P2", "error", "crosses_turned.csv", "QPDQQS", *year, "the cross is quoted the other way round"),
        ),
        spot_case(
            "Bid above ask",
            crossed,
            Plant("P3", "error", "spot_bid_ask.csv", "QYRQMT", "2007-05", "2007-05", "bid and ask exchanged"),
        ),
        spot_case(
            "Wide quote",
            wide,
            Plant(
                "P3", "warning", "spot_wide.csv", "QPDQMT", "2011-09", "2011-09", "spread thirty times its usual size"
            ),
        ),
    ]


def _widen(row: Row) -> list[Row]:
    bid, ask = float(row[2]), float(row[3])
    middle, half = (bid + ask) / 2, 15 * (ask - bid)
    return [(*row[:2], significant(middle - half), significant(middle + half))]


def _series(world: World) -> list[Case]:
    """Mistakes inside one spot series: holes, stale, misaligned, lagged, averaged, extreme."""
    right = spots(world, PEERS)
    stale = next(row for row in right if row[1] == "QTNQMT" and row[0][:7] == "2012-03")
    hole, frozen, slip = ("2003-03", "2003-05"), ("2012-04", "2012-06"), ("2018-08", "2018-08")
    average_pairs = (*PEERS, "QXMQMT")
    average = "spot_average.csv"
    return [
        spot_case(
            "Hole",
            edited(right, "QYRQMT", hole, lambda _: []),
            Plant("D2", "note", "spot_hole.csv", "QYRQMT", *hole, "three months are missing"),
        ),
        spot_case(
            "Stale price",
            edited(right, "QTNQMT", frozen, lambda row: [(*row[:2], *stale[2:])]),
            Plant(
                "D3",
                "warning",
                "spot_stale.csv",
                "QTNQMT",
                *frozen,
                "the quote of 2012-03 stands for three more months",
            ),
        ),
        spot_case(
            "Middle of the month",
            edited(right, "QMTQQS", ALWAYS, lambda row: [(row[0][:8] + "15", *row[1:])]),
            Plant(
                "D4", "warning", "spot_middle.csv", "QMTQQS", *ALWAYS, "observed on the 15th, all others at month end"
            ),
        ),
        spot_case(
            "One month late",
            lagged(right, "QTNQMT"),
            Plant("D4", "warning", "spot_late.csv", "QTNQMT", *ALWAYS, "every value stands one month late"),
        ),
        Case(
            "study.toml",
            "Monthly averages",
            currencies("Monthly averages", {"spot": f'{{ file = "{average}", quote = "pair" }}'}, 'until = "2004-12"'),
            {average: File(QUOTE, averaged(spots(world, average_pairs), "QXMQMT", "2004-12"))},
            (
                Plant(
                    "D5",
                    "warning",
                    average,
                    "QXMQMT",
                    "1996-01",
                    "2004-12",
                    "averages of the month declared as month ends",
                ),
            ),
        ),
        spot_case(
            "Slip of the pen",
            edited(right, "QYRQMT", slip, scaled(1.4)),
            Plant("D8", "note", "spot_extreme.csv", "QYRQMT", *slip, "one value is 40 percent too high"),
        ),
    ]


def _regimes(world: World) -> list[Case]:
    """Breaks: two sources joined, new money, a peg nobody declared."""
    before_splice, before_reform = ("1996-01", "2004-12"), ("1996-01", "2005-12")
    spliced = edited(spots(world, (*PEERS, "QXMQMT")), "QXMQMT", before_splice, scaled(0.72))
    pairs = (*PEERS, "QRLQMT")
    old_spot = edited(spots(world, pairs), "QRLQMT", before_reform, scaled(0.001))
    old_points = edited(forwards(world, pairs), "QRLQMT", before_reform, scaled(0.001))
    return [
        spot_case(
            "Two sources",
            spliced,
            Plant(
                "D6",
                "warning",
                "spot_splice.csv",
                "QXMQMT",
                "2005-01",
                "2005-01",
                "until 2004-12 from a source 28 percent lower",
            ),
        ),
        case(
            "New money",
            {
                "spot": SPOT.replace("spot.csv", "spot_reform.csv"),
                "forwards": POINTS.replace("forwards.csv", "forwards_reform.csv"),
            },
            {"spot_reform.csv": File(QUOTE, old_spot), "forwards_reform.csv": File(QUOTE, old_points)},
            Plant(
                "D7",
                "warning",
                "spot_reform.csv",
                "QRLQMT",
                "2006-01",
                "2006-01",
                "until 2005-12 in old money, 1000 to 1",
            ),
        ),
        spot_case(
            "Undeclared peg",
            spots(world, (*PEERS, "QMTQSG")),
            Plant("S2", "note", "spot_peg.csv", "QMTQSG", "1996-01", "2013-09", "the peg is not declared"),
        ),
    ]
