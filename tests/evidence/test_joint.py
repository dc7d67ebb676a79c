"""Joint hypotheses on groups: against a Wald statistic worked from the published series, and what is refused."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import worlds
from scipy import stats

import carrylab


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
