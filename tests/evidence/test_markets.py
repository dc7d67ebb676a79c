"""All signals against all returns, one common factor, and adjusted p-values in the findings."""

from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import worlds

import carrylab
from carrylab.evidence.many import adjust

MARKET = """
[[market]]
name = "{name}"
kind = "columns"
horizons = ["3m"]
[market.data]
panel = {{ file = "{file}.csv", entity = "country", signal = "spread", legs = [
  {{ name = "excess return", column = "rx", weight = 1, null = 0, role = "return" }},
  {{ name = "rate rise", column = "dy", weight = 1, null = 1, role = "fundamental" }} ] }}
"""


def three(folder: Path, panels: dict[str, pd.DataFrame]) -> pd.DataFrame:
    markets = "".join(MARKET.format(name=name, file=name) for name in panels)
    study = 'interval = "month"\n[evidence]\nacross = true\n' + markets
    results = carrylab.run(carrylab.read_study(worlds.write(folder, study, **panels)))
    assert "every signal against every return" in results.report()
    return results.findings


def mean(panel: pd.DataFrame, column: str) -> pd.Series:
    return panel.groupby("date")[column].mean()


def test_cells_are_regressions_of_market_averages(tmp_path: Path) -> None:
    panels = {name: worlds.columns(seed)["panel"] for name, seed in (("A", 1), ("B", 2), ("C", 3))}
    found = three(tmp_path, panels)
    cells = found[(found["section"] == "across") & (found["term"] == "signal")]
    assert len(cells) == 9
    for row in cells.to_dict("records"):
        x, y = mean(panels[row["market"]], "spread"), mean(panels[row["leg"]], "rx")
        slope, _ = np.polyfit(x, y, 1)
        assert row["estimate"] == pytest.approx(slope)
        assert row["r2"] == pytest.approx(np.corrcoef(x, y)[0, 1] ** 2)
        assert row["p_holm"] >= row["p_value"]
        assert row["n_tests"] == 9
    pair = found[(found["term"] == "correlation of fitted premia") & (found["market"] == "A") & (found["leg"] == "B")]
    a, b = mean(panels["A"], "spread"), mean(panels["B"], "spread")
    paid = found[(found["section"] == "shares") & (found["term"] == "signal") & (found["role"] == "return")]
    signs = np.sign(paid[paid["rank"] == "headline"].set_index("market")["estimate"])
    assert pair["estimate"].iloc[0] == pytest.approx(np.corrcoef(a, b)[0, 1] * signs["A"] * signs["B"])


def test_one_factor_is_kept_where_there_is_one_and_refused_where_there_are_two(tmp_path: Path) -> None:
    rng = np.random.default_rng(9)
    panels = {name: worlds.columns(seed)["panel"].copy() for name, seed in (("A", 1), ("B", 2), ("C", 3))}
    signals = {name: panel["spread"].to_numpy() for name, panel in panels.items()}
    one = sum(signals.values())
    for name, loading in (("A", 0.5), ("B", 1.0), ("C", 1.5)):
        panels[name]["rx"] = loading * one + rng.standard_normal(len(one))
        panels[name]["dy"] = panels[name]["spread"] - panels[name]["rx"]
    (tmp_path / "one").mkdir()
    found = three(tmp_path / "one", panels)
    assert found[found["term"] == "one factor carries all premia"]["p_value"].iloc[0] > 0.05
    loadings = found[found["term"] == "loading on one factor"].set_index("market")["estimate"]
    assert loadings["A"] == pytest.approx(0.5, abs=0.1)
    assert loadings["C"] == pytest.approx(1.5, abs=0.1)
    for name, panel in panels.items():
        panel["rx"] = 2.0 * signals[name] + rng.standard_normal(len(one))
        panel["dy"] = panel["spread"] - panel["rx"]
    (tmp_path / "two").mkdir()
    again = three(tmp_path / "two", panels)
    assert again[again["term"] == "one factor carries all premia"]["p_value"].iloc[0] < 0.01


def test_a_family_is_all_tests_of_one_kind() -> None:
    rows = [
        {"section": "shares", "rank": "headline", "role": "return", "term": "nothing paid", "p_value": p, "market": m}
        for m, p in (("A", 0.01), ("B", 0.04), ("C", 0.03))
    ]
    rows.append({"section": "summary", "term": "mean signal", "p_value": 0.5})
    rows.append({"section": "draws", "term": "stepdown", "p_value": 0.02, "market": "A"})
    found = adjust(rows)
    assert [row.get("p_holm") for row in found] == [0.03, 0.06, 0.06, 0.5, None]
    assert [row.get("n_tests") for row in found] == [3, 3, 3, 1, None]
    assert found[0]["p_stepdown"] == 0.02


def test_adjusted_values_stand_beside_every_p_value(tmp_path: Path) -> None:
    results = carrylab.run(carrylab.read_study(worlds.write(tmp_path, worlds.COLUMNS, **worlds.columns())))
    found = results.findings
    tested = found[found["p_value"].notna() & (found["term"] != "stepdown")]
    assert (tested["p_holm"] >= tested["p_fdr"] - 1e-15).all()
    assert (tested["p_fdr"] >= tested["p_value"] - 1e-15).all()
    assert (tested["n_tests"] >= 1).all()
    assert "This study tests" in " ".join(results.report().split())
