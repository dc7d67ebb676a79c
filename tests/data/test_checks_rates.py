"""Checks on rates, curves and equity indices, and on overlapping outcomes: one that fires, one that must not."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import worlds

from carrylab.data.checks import Check, check_market
from carrylab.data.read import read_market
from carrylab.study import read_study


def seen(folder: Path, study: str, files: dict[str, pd.DataFrame]) -> list[Check]:
    (market,) = read_study(worlds.write(folder, study, **files)).markets
    return check_market(read_market(market))


def found(checks: list[Check], name: str) -> list[tuple[str, str, str]]:
    return [(one.level, one.file, one.series) for one in checks if one.id == name]


def test_clean_curves_are_quiet(tmp_path: Path) -> None:
    assert seen(tmp_path, worlds.BONDS, worlds.bonds()) == []


# Rates of about 3 to 4 percent: as they stand in the file, the declared unit, and what the line says.
UNITS = {
    "percent for decimal": (1.0, "decimal", "error", "percent?"),
    "decimal for percent": (0.01, "percent", "warning", "decimals?"),
    "basis points for percent": (100.0, "percent", "error", "basis points?"),
    "percent for basis points": (1.0, "basis points", "warning", "percent?"),
}


@pytest.mark.parametrize("what", list(UNITS))
def test_a_wrong_unit(tmp_path: Path, what: str) -> None:
    factor, unit, level, said = UNITS[what]
    files = worlds.bonds()
    files["yields"]["value"] *= factor
    checks = seen(tmp_path, worlds.BONDS.replace('"percent"', f'"{unit}"'), files)
    assert found(checks, "U1") == [(level, "yields.csv", "")]
    (line,) = [one.line() for one in checks if one.id == "U1"]
    assert line.startswith(f"{level} U1 yields.csv 2000-01 to 2009-12: declared {unit}, but the median rate is ")
    assert said in line


@pytest.mark.parametrize(("factor", "unit"), [(0.01, "decimal"), (100.0, "basis points")])
def test_a_right_unit(tmp_path: Path, factor: float, unit: str) -> None:
    files = worlds.bonds()
    files["yields"]["value"] *= factor
    assert found(seen(tmp_path, worlds.BONDS.replace('"percent"', f'"{unit}"'), files), "U1") == []


def test_discount_factors_have_no_unit_to_doubt(tmp_path: Path) -> None:
    files = worlds.bonds()
    years = files["yields"]["maturity"].str[:-1].astype(float)
    files["yields"]["value"] = np.exp(-years * files["yields"]["value"] / 100)
    study = worlds.BONDS.replace('"percent", compounding = "annual"', '"decimal", compounding = "discount factor"')
    assert seen(tmp_path, study, files) == []


def at(files: dict[str, pd.DataFrame], economy: str, maturity: str) -> int:
    frame = files["yields"] = files["yields"].reset_index(drop=True)
    here = (frame["economy"] == economy) & (frame["maturity"] == maturity) & (frame["date"] == "2005-06-30")
    return int(frame.index[here][0])


def test_a_slipped_yield_in_the_middle_of_a_curve(tmp_path: Path) -> None:
    files = worlds.bonds()
    row = at(files, "EB", "2y")
    files["yields"].loc[row, "value"] *= 10
    (one,) = [one for one in seen(tmp_path, worlds.BONDS, files) if one.id == "R2"]
    assert (one.level, one.file, one.series, one.first, one.last) == (
        ("warning", "yields.csv", "EB 24m", "2005-06", "2005-06")
    )


def test_negative_yields_are_no_impossible_curve(tmp_path: Path) -> None:
    # Prices above one that rise with maturity: legal, as the yields are below zero too.
    files = worlds.bonds()
    files["yields"]["value"] = -0.6 + 0.01 * files["yields"]["value"]
    assert found(seen(tmp_path, worlds.BONDS, files), "R2") == []


INDICES = worlds.EQUITIES.replace(
    'dividends = { file = "dividends.csv", economy = "EA", basis = "trailing 12 months" }',
    'total_return = { file = "total.csv", economy = "EA" }',
)


def indices() -> dict[str, pd.DataFrame]:
    """A price, and the total return that a dividend of .25% of the price a month gives."""
    files = worlds.equities()
    price = files["prices"]["value"].to_numpy()
    growth = (price[1:] + 0.0025 * price[:-1]) / price[:-1]
    total = 100 * np.concatenate([[1.0], np.cumprod(growth)])
    return {name: files[name] for name in ("prices", "deposits")} | {"total": files["prices"].assign(value=total)}


def test_clean_indices_are_quiet(tmp_path: Path) -> None:
    assert found(seen(tmp_path, worlds.EQUITIES, worlds.equities()), "Q1") == []
    assert found(seen(tmp_path, INDICES, indices()), "Q1") == []


@pytest.mark.parametrize("factor", [100.0, 0.01])
def test_dividends_of_another_unit(tmp_path: Path, factor: float) -> None:
    files = worlds.equities()
    files["dividends"]["value"] *= factor
    checks = seen(tmp_path, worlds.EQUITIES, files)
    assert found(checks, "Q1") == [("warning", "dividends.csv", "EA")]


def test_a_trailing_dividend_declared_per_period(tmp_path: Path) -> None:
    # A yield of e^-3.3 = 3.7% a year, taken twelve times, is 44%.
    study = worlds.EQUITIES.replace("trailing 12 months", "per period")
    (one,) = [one for one in seen(tmp_path, study, worlds.equities()) if one.id == "Q1"]
    assert "unit and basis" in one.advice


def test_price_and_total_return_in_each_others_place(tmp_path: Path) -> None:
    files = indices()
    swapped = files | {"prices": files["total"], "total": files["prices"]}
    (one,) = [one for one in seen(tmp_path, INDICES, swapped) if one.id == "Q1"]
    assert (one.level, one.file, one.series) == ("warning", "total.csv", "EA")
    assert "each other's place" in one.advice


def test_a_total_return_of_other_days(tmp_path: Path) -> None:
    files = indices()
    files["total"]["value"] = files["total"]["value"].shift(1).bfill()
    checks = seen(tmp_path, INDICES, files)
    assert found(checks, "Q1") == [("warning", "total.csv", "EA")]
    assert found(checks, "D4") == [("warning", "total.csv", "EA")]
    assert "one period late" in next(one.advice for one in checks if one.id == "D4")


def inference(study: str, declared: str) -> str:
    return study.replace("[market.data]", f"{declared}\n[market.data]")


def test_errors_without_lags_on_overlapping_outcomes(tmp_path: Path) -> None:
    checks = seen(tmp_path, inference(worlds.BONDS, 'errors = "clustered: date"'), worlds.bonds())
    assert found(checks, "H1") == [("error", "yields.csv", "")]
    assert "12 months" in next(one.seen for one in checks if one.id == "H1")


@pytest.mark.parametrize("declared", ['errors = "cosine"', 'errors = "robust"\nlags = 0', 'errors = "bartlett"'])
def test_errors_with_lags_or_forced(tmp_path: Path, declared: str) -> None:
    assert found(seen(tmp_path, inference(worlds.BONDS, declared), worlds.bonds()), "H1") == []


def test_errors_without_lags_on_outcomes_of_one_step(tmp_path: Path) -> None:
    study = (
        inference(worlds.CURRENCIES, 'errors = "robust"')
        .replace('"3m"]', '"1m"]')
        .replace('tenor = "3m"', 'tenor = "1m"')
    )
    assert found(seen(tmp_path, study, worlds.currencies()), "H1") == []
