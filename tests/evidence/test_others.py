"""Other methods beside the headline: where each is given, and that it is the routine's own number."""

from __future__ import annotations

from pathlib import Path

import pandas as pd
import pytest
import worlds

import carrylab
from carrylab.regression.amihud_hurvich import amihud_hurvich


def others(folder: Path, study: str, files: dict[str, pd.DataFrame]) -> pd.DataFrame:
    found = carrylab.run(carrylab.read_study(worlds.write(folder, study, **files))).findings
    return found[found["section"] == "other methods"]


def test_panels_and_series_get_what_applies(tmp_path: Path) -> None:
    rows = others(tmp_path, worlds.CURRENCIES, worlds.currencies())
    assert set(rows.loc[rows["group"] == "pooled", "term"]) == {
        "IVX instrument",
        "half-panel jackknife",
        "reverse regression",
    }
    assert set(rows.loc[rows["group"] == "BBB", "term"]) == {
        "IVX instrument",
        "half-panel jackknife",
        "reverse regression",
        "IVX, one period ahead",
    }
    assert (rows["std_error"] > 0).all()


def test_one_step_ahead_the_series_is_amihud_and_hurvichs(tmp_path: Path) -> None:
    study = worlds.CURRENCIES.replace('["3m"]', '["1m"]').replace('tenor = "3m"', 'tenor = "1m"')
    rows = others(tmp_path, study, worlds.currencies())
    row = rows[(rows["term"] == "Amihud-Hurvich") & (rows["group"] == "CCC")].iloc[0]
    carrylab.run(carrylab.read_study(tmp_path / "study.toml")).save(tmp_path / "out")
    panel = pd.read_csv(tmp_path / "out" / "panel.csv")
    own = panel[panel["entity"] == "CCC"]
    outcome = own["excess return"].shift(1).to_numpy()
    assert row["estimate"] == pytest.approx(amihud_hurvich(own["signal"].to_numpy(), outcome).slope)


def test_without_one_period_outcomes_there_is_none(tmp_path: Path) -> None:
    assert others(tmp_path, worlds.COLUMNS, worlds.columns()).empty
