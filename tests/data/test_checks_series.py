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
