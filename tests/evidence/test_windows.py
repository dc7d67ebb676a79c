"""Windows, periods, breaks and years through a study file, against least squares on their own dates."""

from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import worlds

import carrylab
from carrylab.errors import StudyError
from carrylab.results import Results

ASKED = """
[evidence]
windows = { rolling = "60m", expanding = "48m", every = "12m" }
breaks = {}
years = true
[[period]]
name = "early"
until = "2004-12"
[[period]]
name = "late"
from = "2005-01"
"""


@pytest.fixture(scope="module")
def results(tmp_path_factory: pytest.TempPathFactory) -> Results:
    return run(tmp_path_factory.mktemp("windows"), ASKED)


def run(folder: Path, more: str) -> Results:
    return carrylab.run(carrylab.read_study(worlds.write(folder, worlds.COLUMNS + more, **worlds.columns())))


def slope(results: Results, first: str, last: str) -> float:
    panel = results.panel().dropna()
    own = panel[panel["date"].between(first, last)]
    x, y = (own[name] - own.groupby("entity")[name].transform("mean") for name in ("signal", "excess return"))
    return float((x * y).sum() / (x * x).sum())


def rows(results: Results, section: str) -> pd.DataFrame:
    found = results.findings
    return found[(found["section"] == section) & (found["term"] == "signal") & (found["role"] == "return")]


def test_windows_are_regressions_on_their_dates(results: Results) -> None:
    found = rows(results, "windows")
    rolled = found[found["sample"].str.startswith("rolling 60m to")]
    assert len(rolled) == 6
    assert set(rolled["n_dates"]) == {60.0}
    for row in found.to_dict("records"):
        assert row["estimate"] == pytest.approx(slope(results, row["first"], row["last"])), row["sample"]
    grown = found[found["sample"].str.startswith("expanding to")]
    assert set(grown["first"]) == {"2000-01"}
    assert grown["n_dates"].is_monotonic_increasing


def test_every_period_has_a_window_of_its_own(results: Results) -> None:
    found = results.findings
    every = found[(found["section"] == "windows") & (found["sample"] == "rolling, every period")]
    assert len(every) == 120 - 60 + 1
    for row in every.iloc[::15].to_dict("records"):
        assert row["estimate"] == pytest.approx(slope(results, row["first"], row["last"]))


def test_periods_and_their_equality(results: Results) -> None:
    found = rows(results, "periods").set_index("sample")["estimate"]
    assert found["early"] == pytest.approx(slope(results, "2000-01", "2004-12"))
    assert found["late"] == pytest.approx(slope(results, "2005-01", "2009-12"))
    equal = results.findings[results.findings["term"] == "equal in early, late"].iloc[0]
    assert 0 < equal["p_value"] < 1
    assert equal["note"] == "outcomes that start in one period may end in the next"


def test_each_year_is_left_out_in_turn(results: Results) -> None:
    found = rows(results, "years").set_index("sample")["estimate"]
    panel = results.panel().dropna()
    own = panel[~panel["date"].str.startswith("2003")]
    x, y = (own[name] - own.groupby("entity")[name].transform("mean") for name in ("signal", "excess return"))
    assert found["without 2003"] == pytest.approx(float((x * y).sum() / (x * x).sum()))
    assert len(found) == 10


def test_a_planted_break_is_found_and_named_as_the_last_of_the_old(tmp_path: Path) -> None:
    panel = worlds.columns()["panel"].reset_index(drop=True)
    late = panel["date"] > "2005-06-30"
    noise = 0.3 * np.random.default_rng(1).standard_normal(len(panel))
    panel["rx"] = np.where(late, 1.5, 0.0) * panel["spread"] + noise
    panel["dy"] = panel["spread"] - panel["rx"]
    study = worlds.COLUMNS.replace('["3m"]', '["1m"]') + "[evidence]\nbreaks = {}\n"
    results = carrylab.run(carrylab.read_study(worlds.write(tmp_path, study, panel=panel)))
    found = results.findings[results.findings["section"] == "breaks"].set_index("term").loc["slope"]
    assert found["last"] == "2005-06"
    assert found["estimate"] == pytest.approx(1.5, abs=0.1)
    assert found["p_value"] < 0.001
    assert "95% interval of the date" in found["note"]
    assert "old regime to 2005-06" in results.report()


def test_with_overlap_there_is_no_interval_of_the_date(results: Results) -> None:
    found = results.findings[results.findings["section"] == "breaks"]
    assert found["note"].str.contains("no interval of the date").all()


@pytest.mark.parametrize("key", ["rolling", "expanding"])
def test_a_window_longer_than_the_sample_is_one_line(tmp_path: Path, key: str) -> None:
    with pytest.raises(StudyError, match=rf"windows, key {key}: '240m' is longer than the sample of market 'Own'"):
        run(tmp_path, f'[evidence]\nwindows = {{ {key} = "240m" }}\n')


def test_the_report_says_it_in_words(results: Results) -> None:
    report = " ".join(results.report().split())
    assert "The premium's interval lies above zero in" in report
    assert "Excess return equal in early, late: p" in report
    assert "one break in the slope of excess return: largest Wald" in report
    assert "without 20" in report
