"""Rows of findings against numbers worked another way: levels, the level share, newest signals, comparisons."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import worlds

import carrylab

HALF_MILLION = 500_000  # a signal level that no slope depends on


def one_entity(folder: Path, *, shift: float = 0.0, extra: str = "") -> tuple[pd.DataFrame, pd.DataFrame]:
    """Findings of a one-country panel and the panel itself, the signal and its rise moved up by `shift`."""
    panel = worlds.columns()["panel"]
    panel = panel[panel["country"] == "EA"].copy()
    panel["spread"] += shift
    panel["dy"] += shift
    study = worlds.COLUMNS.replace('by = "entity"', extra)
    return carrylab.run(carrylab.read_study(worlds.write(folder, study, panel=panel))).findings, panel


def number(found: pd.DataFrame, section: str, term: str, field: str = "estimate") -> float:
    rows = found[(found["section"] == section) & (found["term"] == term) & (found["sample"] == "all")]
    return float(rows[field].iloc[0])


def test_means_and_their_errors(tmp_path: Path) -> None:
    found, panel = one_entity(tmp_path)
    assert number(found, "summary", "mean signal") == pytest.approx(panel["spread"].mean())
    assert number(found, "summary", "mean excess return") == pytest.approx(panel["rx"].mean())
    # Cosines by hand: nu = floor(.4 x 120^(2/3)) = 9, at most 120 / 3; V(mean) = mean of squared loads / n.
    n, nu = 120, 9
    steps = (np.arange(n) + 0.5) / n
    loads = [np.sqrt(2 / n) * (panel["rx"].to_numpy() * np.cos(np.pi * j * steps)).sum() for j in range(1, nu + 1)]
    by_hand = np.sqrt(np.mean(np.square(loads)) / n)
    assert number(found, "summary", "mean excess return", "std_error") == pytest.approx(by_hand)
    assert number(found, "summary", "mean excess return", "df") == nu


def test_the_level_share_stands_only_where_the_mean_signal_is_clear(tmp_path: Path) -> None:
    found, panel = one_entity(tmp_path, shift=10.0)
    assert number(found, "summary", "level share") == pytest.approx(panel["rx"].mean() / panel["spread"].mean())
    centred, _ = one_entity(tmp_path, shift=-float(worlds.columns()["panel"]["spread"].iloc[:120].mean()))
    assert np.isnan(number(centred, "summary", "level share"))


def test_the_level_of_the_signal_moves_no_slope(tmp_path: Path) -> None:
    low, _ = one_entity(tmp_path)
    high, _ = one_entity(tmp_path, shift=HALF_MILLION)
    for field in ("estimate", "std_error"):
        assert number(high, "shares", "signal", field) == pytest.approx(
            number(low, "shares", "signal", field), rel=1e-7
        )


def test_two_legs_have_one_error_and_one_test(tmp_path: Path) -> None:
    found, _ = one_entity(tmp_path)
    rows = found[(found["section"] == "shares") & (found["term"] == "signal")]
    rows = rows[rows["rank"] == "headline"]
    paid, true = rows.to_dict("records")
    assert paid["std_error"] == pytest.approx(true["std_error"])
    assert paid["p_value"] == pytest.approx(true["p_value"])
    assert paid["estimate"] + true["estimate"] == pytest.approx(1.0)
    assert number(found, "shares", "nothing paid", "p_value") == pytest.approx(paid["p_value"])
    assert number(found, "shares", "all paid") == pytest.approx(true["estimate"])
    assert number(found, "shares", "resolved premium share") == pytest.approx(paid["estimate"])


def test_the_newest_signal(tmp_path: Path) -> None:
    found, panel = one_entity(tmp_path)
    signal, returns = panel["spread"].to_numpy(), panel["rx"].to_numpy()
    slope, constant = np.polyfit(signal, returns, 1)
    assert number(found, "latest", "signal") == pytest.approx(signal[-1])
    assert number(found, "latest", "fitted premium") == pytest.approx(constant + slope * signal[-1])
    assert number(found, "latest", "percentile") == pytest.approx((signal <= signal[-1]).mean())


def test_a_forced_short_lag_is_said_aloud(tmp_path: Path) -> None:
    found, _ = one_entity(tmp_path, extra='errors = "robust"\nlags = 0')
    warnings = found.loc[found["section"] == "warning", "note"]
    assert warnings.str.contains("ignore an overlap of 2 periods").any()


def test_few_windows_are_said_aloud(tmp_path: Path) -> None:
    study = worlds.COLUMNS.replace('["3m"]', '["12m"]').replace('by = "entity"', "")
    path = worlds.write(tmp_path, study, **worlds.columns())
    found = carrylab.run(carrylab.read_study(path)).findings
    warnings = found.loc[found["section"] == "warning", "note"]
    assert warnings.str.contains("only 10 independent windows").any()


def test_the_ledgers_add_up(tmp_path: Path) -> None:
    found, panel = one_entity(tmp_path)
    ledger = found[(found["section"] == "ledger") & (found["parity"] == "")].set_index("term")["estimate"]
    assert ledger["read"] == ledger.drop("read").sum()
    used = found[(found["section"] == "ledger") & (found["parity"] == "columns") & (found["term"] == "used")]
    assert used["estimate"].iloc[0] == len(panel)
