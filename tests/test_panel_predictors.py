"""Further predictors that stand in the user's own panel join the signal on the right-hand side."""

from pathlib import Path

import numpy as np
import pandas as pd
import pytest

import carrylab

STUDY = """
[[market]]
name = "Mine"
kind = "columns"
interval = "month"
horizons = ["1m"]
effects = "entity"
{leave_out}
[market.data.panel]
file = "panel.csv"
entity = "country"
signal = "spread"
controls = ["growth"]
legs = [ {{ name = "outcome", column = "dy", role = "other" }} ]
"""


@pytest.fixture(scope="module")
def panel() -> pd.DataFrame:
    rng = np.random.default_rng(5)
    dates = pd.period_range("2001-01", periods=60, freq="M").astype(str)
    frame = pd.DataFrame([(date, code) for date in dates for code in ("BB", "AA", "CC")], columns=["date", "country"])
    frame["spread"] = rng.standard_normal(len(frame))
    frame["growth"] = 0.6 * frame["spread"] + rng.standard_normal(len(frame))
    frame["dy"] = 0.3 * frame["spread"] - 0.8 * frame["growth"] + rng.standard_normal(len(frame))
    return frame


def within(panel: pd.DataFrame) -> np.ndarray:
    """Least squares of dy on spread and growth, each less its country's mean."""
    demeaned = panel.groupby("country")[["spread", "growth", "dy"]].transform(lambda column: column - column.mean())
    return np.linalg.lstsq(demeaned[["spread", "growth"]].to_numpy(), demeaned["dy"].to_numpy(), rcond=None)[0]


@pytest.mark.parametrize("left_out", [(), ("BB",)])
def test_panel_controls_are_regressors(tmp_path: Path, panel, left_out) -> None:
    panel.to_csv(tmp_path / "panel.csv", index=False)
    path = tmp_path / "study.toml"
    names = ", ".join(f'"{code}"' for code in left_out)
    path.write_text(STUDY.format(leave_out=f"leave_out = [{names}]" if left_out else ""), encoding="utf-8")
    found = carrylab.run(carrylab.read_study(path)).findings
    rows = found[(found["section"] == "shares") & (found["rank"] == "headline") & (found["leg"] == "outcome")]
    by_term = rows.set_index("term")["estimate"]
    expected = within(panel[~panel["country"].isin(left_out)])
    np.testing.assert_allclose(by_term[["signal", "growth"]], expected, rtol=1e-10)
