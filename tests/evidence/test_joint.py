"""Joint hypotheses on groups: against a Wald statistic worked from the published series, and what is refused."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import worlds
from scipy import stats

import carrylab
import carrylab.results


def joint(folder: Path, study: str, files: dict[str, pd.DataFrame]) -> pd.DataFrame:
    found = carrylab.run(carrylab.read_study(worlds.write(folder, study, **files))).findings
    rows = found[(found["section"] == "joint") & (found["group"] == "all groups")]
    return rows.set_index("term")


def test_no_premium_in_one_step_returns_is_the_white_wald_test(tmp_path: Path) -> None:
    # With one step and one entity a group, 1B is White's covariance at the null: scores x~ (y - mean y).
    study = worlds.CURRENCIES.replace('["3m"]', '["1m"]').replace('tenor = "3m"', 'tenor = "1m"')
    rows = joint(tmp_path, study, worlds.currencies())
    path = tmp_path / "out"
    carrylab.run(carrylab.read_study(tmp_path / "study.toml")).save(path)
    panel = pd.read_csv(path / "panel.csv").dropna()
    slopes, series = [], []
    for _, own in panel.groupby("entity"):
        x, y = own["signal"] - own["signal"].mean(), own["excess return"] - own["excess return"].mean()
        slopes.append(float((x * y).sum() / (x**2).sum()))
        series.append((x * y / (x**2).sum()).to_numpy())
    scores = np.stack(series, axis=1)
    statistic = float(np.array(slopes) @ np.linalg.solve(scores.T @ scores, np.array(slopes)))
    zero = rows.loc["all premium shares zero"]
    assert zero["statistic"] == pytest.approx(statistic, rel=1e-9)
    assert zero["p_value"] == pytest.approx(stats.chi2.sf(statistic, 2), rel=1e-9)
    assert "1B" in zero["method"]


def test_equality_of_two_groups_is_their_difference(tmp_path: Path) -> None:
    rows = joint(tmp_path, worlds.BONDS, worlds.bonds())
    equal = rows.loc["all premium shares equal"].iloc[0]
    assert equal["method"].startswith("F(1, ")
    assert 0 < equal["p_value"] < 1


def test_more_restrictions_than_the_sample_carries_are_refused_in_words(tmp_path: Path) -> None:
    codes = ("BBB", "CCC", "DDD", "EEE", "FFF", "GGG")
    study = worlds.CURRENCIES.replace('["3m"]', '["12m"]').replace('tenor = "3m"', 'tenor = "12m"')
    rows = joint(tmp_path, study, worlds.currencies(codes=codes))
    equal = rows.loc["all premium shares equal"]
    assert np.isnan(equal["p_value"])
    assert "restrictions exceed the" in equal["note"]


def together(results: carrylab.results.Results, group: str) -> pd.DataFrame:
    found = results.findings
    return found[(found["section"] == "joint") & (found["group"] == group)]


def run(folder: Path, study: str, files: dict[str, pd.DataFrame]) -> carrylab.results.Results:
    return carrylab.run(carrylab.read_study(worlds.write(folder, study, **files)))


def test_parities_that_say_the_same_count_once_and_are_named(tmp_path: Path) -> None:
    """On a zero-coupon curve carry is the forward-spot spread."""
    rows = together(run(tmp_path, worlds.BONDS, worlds.bonds()), "everything")
    assert rows["estimate"].tolist() == [2.0]
    assert rows["note"].iloc[0] == "Bonds carry says the same as Bonds forward-spot"


def test_horizons_are_held_together_with_one_number_of_cosines(tmp_path: Path) -> None:
    study = worlds.CURRENCIES.replace('["3m"]', '["1m", "3m"]').replace(
        'kind = "cur', 'missing_tenor = "nearest"\nkind = "cur'
    )
    rows = together(run(tmp_path, study, worlds.currencies()), "all horizons").set_index("term")
    zero, equal = rows.loc["all premium shares zero"], rows.loc["all premium shares equal"]
    assert zero["estimate"] == 2
    assert "overlap 2" in zero["method"]
    assert equal["method"].startswith("F(1, ")
    assert equal["method"].endswith("overlap 2")


def test_draws_give_one_p_for_any_set_from_the_same_draws(tmp_path: Path) -> None:
    study = worlds.CURRENCIES + "[inference]\ndraws = 199\n"
    found = run(tmp_path, study, worlds.currencies()).findings
    joint_p = found[(found["term"] == "all premium shares zero, by draws") & (found["group"] == "all of the market")]
    stepped = found[(found["section"] == "draws") & (found["term"] == "stepdown")]["p_value"]
    assert joint_p["p_value"].iloc[0] == pytest.approx(stepped.min())


def test_bartlett_and_chi_squared_come_only_on_request_and_say_what_they_do(tmp_path: Path) -> None:
    plain = run(tmp_path, worlds.BONDS, worlds.bonds()).findings
    assert not plain.loc[plain["section"] == "joint", "method"].str.contains("Bartlett").any()
    asked = run(tmp_path, worlds.BONDS + '[inference]\njoint = "bartlett"\n', worlds.bonds()).findings
    rows = asked[(asked["section"] == "joint") & (asked["group"] == "all groups")]
    assert rows["method"].str.fullmatch(r"chi-squared\(\d\), Bartlett lag 11").all()
    assert rows["note"].str.contains("reject 31 to 77% of true nulls").all()


def test_the_report_says_that_two_legs_are_one_fact(tmp_path: Path) -> None:
    report = " ".join(run(tmp_path, worlds.CURRENCIES, worlds.currencies()).report().split())
    assert "are one fact, not two" in report


def test_a_biased_slope_takes_cosines_marked_as_fallback(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("carrylab.evidence.stack.LARGE_BIAS", 0.0)
    found = run(tmp_path, worlds.CURRENCIES, worlds.currencies()).findings
    row = found[(found["section"] == "joint") & (found["term"] == "all premium shares zero")].iloc[0]
    assert row["rank"] == "fallback"
    assert "cosines" in row["method"]
