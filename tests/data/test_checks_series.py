"""Checks on single series: one small table that fires, one that must not."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import worlds

from carrylab.data.checks import Check
from carrylab.runner import build
from carrylab.study import read_study

CODES = ("BBB", "CCC", "DDD", "EEE", "FFF")
STUDY = worlds.CURRENCIES.replace('by = "currency"', "")


def market(seed: int = 21) -> dict[str, pd.DataFrame]:
    """Five currencies with a common shock, so that they are each other's peers."""
    rng = np.random.default_rng(seed)
    files = worlds.currencies(seed, CODES)
    common = 0.03 * rng.standard_normal(len(worlds.MONTHS))
    spot = [
        pd.DataFrame(
            {
                "date": worlds.DATES,
                "currency": code,
                "value": np.exp(np.cumsum(common + 0.02 * rng.standard_normal(len(common)))),
            }
        )
        for code in CODES
    ]
    return files | {"spot": pd.concat(spot, ignore_index=True)}


def seen(folder: Path, files: dict[str, pd.DataFrame], study: str = STUDY) -> list[Check]:
    whole = read_study(worlds.write(folder, study, **files))
    return [one for one in build(whole.markets[0], whole.economies).checks if one.id != "I1"]


def changed(files: dict[str, pd.DataFrame], change: Callable[[pd.DataFrame], pd.DataFrame]) -> dict[str, pd.DataFrame]:
    """The market with CCC's spot rates changed."""
    spot = files["spot"]
    own = spot["currency"] == "CCC"
    return files | {"spot": pd.concat([spot[~own], change(spot[own].reset_index(drop=True))])}


def at(rows: slice | int, value: Callable[[pd.Series], object]) -> Callable[[pd.DataFrame], pd.DataFrame]:
    def change(own: pd.DataFrame) -> pd.DataFrame:
        own.loc[own.index[rows], "value"] = value(own["value"])
        return own

    return change


def test_a_clean_market_is_quiet(tmp_path: Path) -> None:
    assert [one.line() for one in seen(tmp_path, market())] == []


def averaged(own: pd.DataFrame) -> pd.DataFrame:
    """Averages of the month from twenty-one daily values (Working 1960: autocorrelation .25)."""
    rng = np.random.default_rng(5)
    daily = np.cumsum(0.01 * rng.standard_normal((len(own), 21)).ravel()).reshape(len(own), 21)
    return own.assign(value=np.exp(daily.mean(axis=1)))


FIRES = {
    "D2 hole": (lambda own: own.drop(index=[10, 11]), ("D2", "note", "2000-11", "2000-12")),
    "D2 long hole": (lambda own: own.drop(index=range(10, 24)), ("D2", "warning", "2000-11", "2001-12")),
    "D3 stale": (at(slice(30, 34), lambda v: v[29]), ("D3", "warning", "2002-07", "2002-10")),
    "D4 late": (lambda own: own.assign(value=own["value"].shift(1).bfill()), ("D4", "warning", "2000-01", "2009-12")),
    "D4 other days": (lambda own: own.assign(date=own["date"].str[:8] + "12"), ("D4", "warning", "2000-01", "2009-12")),
    "D5 averages": (averaged, ("D5", "warning", "2000-01", "2009-12")),
    "D6 splice": (at(slice(60, None), lambda v: v[60:] * 1.6), ("D6", "warning", "2005-01", "2005-01")),
    "D7 new money": (at(slice(60, None), lambda v: v[60:] / 100), ("D7", "warning", "2005-01", "2005-01")),
    "D8 slip": (at(60, lambda v: v[60] * 1.5), ("D8", "note", "2005-01", "2005-01")),
    "S1 leaves": (lambda own: own.iloc[:80], ("S1", "warning", "2006-08", "2006-08")),
    "S1 begins": (lambda own: own.iloc[24:], ("S1", "note", "2002-01", "2002-01")),
    "D1 twice": (lambda own: pd.concat([own, own.iloc[[5]]]), ("D1", "note", "", "")),
}


@pytest.mark.parametrize("what", list(FIRES))
def test_what_fires(tmp_path: Path, what: str) -> None:
    change, (name, level, first, last) = FIRES[what]
    found = seen(tmp_path, changed(market(), change))
    own = [one for one in found if one.id == name]
    assert [(one.level, one.series, one.first, one.last) for one in own] == [(level, "CCC", first, last)]
    assert own[0].file == "spot.csv"
    assert own[0].line().startswith(f"{level} {name} spot.csv CCC")


def test_a_declared_peg_may_stand_still(tmp_path: Path) -> None:
    files = changed(market(), at(slice(30, 60), lambda v: v[29]))
    declared = STUDY.replace("[market.data]", 'pegs = ["CCC"]\n[market.data]')
    assert "D3" not in {one.id for one in seen(tmp_path, files, declared)}


def test_a_declared_average_is_no_surprise(tmp_path: Path) -> None:
    files = changed(market(), averaged)
    declared = STUDY.replace('quote = "home per foreign"', 'quote = "home per foreign", timing = "average"')
    found = seen(tmp_path, files, declared)
    assert ("D5", "CCC") not in {(one.id, one.series) for one in found}
    # The others are month ends: the .25 of an average is not in their changes.
    assert {one.level for one in found if one.id == "D5"} == {"note"}


def test_a_move_all_make_is_no_splice(tmp_path: Path) -> None:
    files = market()
    late = files["spot"]["date"] >= "2005-01"
    files["spot"].loc[late, "value"] *= 1.6
    assert "D6" not in {one.id for one in seen(tmp_path, files)}


def test_an_added_predictor_without_a_lag_is_a_note(tmp_path: Path) -> None:
    growth = pd.DataFrame({"date": worlds.DATES, "value": np.random.default_rng(1).standard_normal(len(worlds.DATES))})
    study = STUDY.replace("[market.data]", 'controls = [ { name = "growth", file = "growth.csv" } ]\n[market.data]')
    assert [(one.id, one.level) for one in seen(tmp_path, market() | {"growth": growth}, study)] == [("L1", "note")]
    lagged = study.replace('"growth.csv"', '"growth.csv", known_after = "2m"')
    assert seen(tmp_path, market() | {"growth": growth}, lagged) == []


def test_a_power_of_ten_that_does_not_last_is_a_slip(tmp_path: Path) -> None:
    found = seen(tmp_path, changed(market(), at(60, lambda v: v[60] * 10)))
    assert [(one.id, one.level, one.series) for one in found] == [("D8", "note", "CCC")]


def test_a_float_after_a_peg_is_one_break(tmp_path: Path) -> None:
    rng = np.random.default_rng(8)
    calm, wild = 0.0005 * rng.standard_normal(60), 0.03 * rng.standard_normal(60)
    calm[0], wild[0] = 0.0, 0.4
    found = seen(tmp_path, changed(market(), lambda own: own.assign(value=np.exp(np.cumsum([*calm, *wild])))))
    assert [(one.series, one.first) for one in found if one.id == "D6"] == [("CCC", "2005-01")]
    assert [one.series for one in found if one.id == "D8"] == ["CCC"]


def test_a_declared_peg_that_breaks_is_no_splice(tmp_path: Path) -> None:
    files = changed(market(), at(slice(60, None), lambda v: v[60:] * 1.6))
    declared = STUDY.replace("[market.data]", 'pegs = ["CCC"]\n[market.data]')
    found = [one for one in seen(tmp_path, files, declared) if one.series == "CCC"]
    assert [(one.id, one.level) for one in found] == [("D8", "note")]


TWO_FILES = STUDY.replace(
    'spot = { file = "spot.csv", quote = "home per foreign" }',
    'spot = [ { file = "old.csv", quote = "home per foreign" }, { file = "spot.csv", quote = "home per foreign" } ]',
)


@pytest.mark.parametrize(("factor", "expected"), [(1.0, []), (2.0, [("spot.csv", "CCC", "2005-01")])])
def test_files_that_join_at_another_level(tmp_path: Path, factor: float, expected: list[tuple[str, str, str]]) -> None:
    spot = market()["spot"]
    early = spot["date"] < "2005-01"
    old = spot[early].assign(value=spot["value"].where(spot["currency"] != "CCC", spot["value"] / factor))
    found = seen(tmp_path, market() | {"old": old, "spot": spot[~early]}, TWO_FILES)
    joins = [one for one in found if one.id == "D6"]
    assert [(one.file, one.series, one.first) for one in joins] == expected
    assert all("takes over from old.csv" in one.seen and "times 2" in one.advice for one in joins)


def first_of_month(files: dict[str, pd.DataFrame]) -> dict[str, pd.DataFrame]:
    return {name: frame.assign(date=frame["date"].str[:8] + "01") for name, frame in files.items()}


def test_dates_at_the_start_of_the_period(tmp_path: Path) -> None:
    found = seen(tmp_path, first_of_month(market()))
    early = [one for one in found if one.id == "D4"]
    assert {(one.level, one.file, one.series) for one in early} == {
        ("warning", "spot.csv", ""),
        ("warning", "deposits.csv", ""),
    }
    assert all('timing = "average"' in one.advice for one in early)


def test_last_business_days_before_a_weekend_are_the_end(tmp_path: Path) -> None:
    ends = [str((month.end_time - pd.offsets.BDay(0) - pd.offsets.BDay(1)).date()) for month in worlds.MONTHS]
    day = dict(zip(worlds.DATES, ends, strict=True))
    files = {name: frame.assign(date=frame["date"].map(day)) for name, frame in market().items()}
    assert [one.line() for one in seen(tmp_path, files)] == []


def test_stale_prices_of_one_series_are_one_line(tmp_path: Path) -> None:
    def twice(own: pd.DataFrame) -> pd.DataFrame:
        own.loc[own.index[30:34], "value"] = own["value"][29]
        own.loc[own.index[70:75], "value"] = own["value"][69]
        return own

    (one,) = [one for one in seen(tmp_path, changed(market(), twice)) if one.id == "D3"]
    assert (one.first, one.last, one.seen) == ("2005-11", "2006-03", "price unchanged for 5 periods")
    assert one.advice.startswith("1 more such runs")


def test_deposits_may_stand_still(tmp_path: Path) -> None:
    files = market()
    files["deposits"] = files["deposits"].reset_index(drop=True)
    files["deposits"].loc[10:30, "value"] = 2.0
    assert "D3" not in {one.id for one in seen(tmp_path, files)}
