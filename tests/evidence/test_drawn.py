"""Draws under the null as findings: opt-in, seeded, and beside the headline as a second opinion."""

from __future__ import annotations

from pathlib import Path

import pandas as pd
import pytest
import worlds

import carrylab
from carrylab.findings import KEY

DRAWS = 199


def findings(folder: Path, study: str, files: dict[str, pd.DataFrame], inference: str = "") -> pd.DataFrame:
    text = f"[inference]\n{inference}\n" if inference else ""
    return carrylab.run(carrylab.read_study(worlds.write(folder, study + text, **files))).findings


def of(found: pd.DataFrame, section: str, term: str, group: str = "pooled") -> pd.Series:
    rows = found[(found["section"] == section) & (found["term"] == term) & (found["group"] == group)]
    return rows[rows["rank"].isin(["", "second opinion"])].iloc[0]


def test_without_draws_the_second_opinion_is_the_instrument(tmp_path: Path) -> None:
    found = findings(tmp_path, worlds.CURRENCIES, worlds.currencies())
    assert "instrument" in of(found, "shares", "nothing paid")["method"]
    assert not (found["section"] == "draws").any()


def test_draws_are_the_second_opinion_of_a_series_and_stand_beside_a_panel(tmp_path: Path) -> None:
    found = findings(tmp_path, worlds.CURRENCIES, worlds.currencies(), f"draws = {DRAWS}\nseed = 3")
    assert not found.duplicated(list(KEY)).any()
    assert "IVX instrument" in of(found, "shares", "nothing paid")["method"]
    for group in ("pooled", "BBB", "CCC"):
        second = of(found, "draws" if group == "pooled" else "shares", "nothing paid", group)
        assert "equal-tailed p of the one-period t, 199 draws" in second["method"]
        assert 2 / (DRAWS + 1) <= second["p_value"] <= 1
        whole = second["p_value"] * (DRAWS + 1) / 2
        assert whole == pytest.approx(round(whole))
        band = of(found, "draws", "slope by chance", group)
        assert band["lower"] < band["upper"]
        assert 0 < of(found, "draws", "R2 by chance", group)["estimate"] < 1
        assert of(found, "draws", "stepdown", group)["p_value"] >= second["p_value"] - 1e-12


def test_few_draws_are_said_aloud(tmp_path: Path) -> None:
    found = findings(tmp_path, worlds.CURRENCIES, worlds.currencies(), f"draws = {DRAWS}")
    warnings = found.loc[found["section"] == "warning", "note"]
    assert warnings.str.contains("199 draws").any()


def test_the_statistic_is_the_headline_t(tmp_path: Path) -> None:
    found = findings(tmp_path, worlds.CURRENCIES, worlds.currencies(), f"draws = {DRAWS}")
    rows = found[(found["term"] == "nothing paid") & (found["group"] == "BBB") & (found["section"] == "shares")]
    rows = rows.set_index("rank")
    assert rows.loc["second opinion", "statistic"] == pytest.approx(rows.loc["headline", "statistic"], rel=1e-9)
    assert rows.loc["second opinion", "estimate"] == pytest.approx(rows.loc["headline", "estimate"])


def paid(found: pd.DataFrame) -> pd.DataFrame:
    keep = (found["term"] == "nothing paid") & (found["group"] == "pooled") & (found["section"] == "shares")
    rows = found[keep]
    return rows[rows["parity"] == rows["parity"].iloc[-1]].set_index("rank")


def test_a_series_whose_slope_is_biased_is_drawn_without_being_asked(tmp_path: Path) -> None:
    found = findings(tmp_path, worlds.EQUITIES, worlds.equities())
    rows = paid(found)
    ratio = found[(found["term"] == "bias ratio") & (found["parity"] == rows["parity"].iloc[0])]["estimate"].iloc[0]
    assert abs(ratio) >= 0.3
    assert "IVX instrument with one-period scores" in rows.loc["headline", "method"]
    assert rows.loc["headline", "method"].endswith(f"chosen because bias is {ratio:+.2f} standard errors")
    assert "999 draws under the null" in rows.loc["second opinion", "method"]


def test_a_panel_whose_slope_is_biased_is_judged_by_draws(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("carrylab.regression.choice.LARGE_BIAS", 0.0)
    found = findings(tmp_path, worlds.CURRENCIES, worlds.currencies())
    rows = paid(found)
    assert "999 draws under the null" in rows.loc["headline", "method"]
    assert "chosen because bias is" in rows.loc["headline", "method"]
    assert "IVX instrument with one-period scores" in rows.loc["second opinion", "method"]
    slope = found[(found["term"] == "signal") & (found["group"] == "pooled") & (found["role"] == "return")].iloc[0]
    assert rows.loc["headline", "estimate"] == pytest.approx(slope["weight"] * slope["estimate"])
    assert not found.duplicated(list(KEY)).any()


def test_no_draws_leave_the_instrument_alone(tmp_path: Path) -> None:
    found = findings(tmp_path, worlds.EQUITIES, worlds.equities(), "draws = 0")
    rows = paid(found)
    assert "IVX instrument with one-period scores" in rows.loc["headline", "method"]
    assert "IVX instrument with equal-weighted cosines" in rows.loc["second opinion", "method"]
    assert not (found["section"] == "draws").any()


def test_the_same_seed_gives_the_same_findings_and_another_seed_others(tmp_path: Path) -> None:
    first, again, other = (
        findings(tmp_path, worlds.EQUITIES, worlds.equities(), f"draws = {DRAWS}\nseed = {seed}") for seed in (1, 1, 2)
    )
    pd.testing.assert_frame_equal(first, again)
    assert not first["p_value"].equals(other["p_value"])


def test_bonds_keep_cosines_as_their_monthly_returns_have_no_simple_null(tmp_path: Path) -> None:
    found = findings(tmp_path, worlds.BONDS, worlds.bonds(), f"draws = {DRAWS}")
    assert not (found["section"] == "draws").any()


def test_the_report_says_what_both_opinions_say_together(tmp_path: Path) -> None:
    text = f"{worlds.CURRENCIES}[inference]\ndraws = {DRAWS}\n"
    results = carrylab.run(carrylab.read_study(worlds.write(tmp_path, text, **worlds.currencies())))
    assert results.table().loc["  at 5%, a premium is", "FX"] == "not seen"
    assert "  least squares, bias out" in results.table().index
    assert "199 draws under the null" in results.report()


def test_a_panel_that_cannot_be_drawn_keeps_the_instrument_and_says_why(tmp_path: Path) -> None:
    files = worlds.currencies()
    spot = files["spot"]
    young = (spot["currency"] == "CCC") & (spot["date"] < "2009-03")
    found = findings(tmp_path, worlds.CURRENCIES, files | {"spot": spot[~young]}, f"draws = {DRAWS}")
    assert "instrument" in of(found, "shares", "nothing paid")["method"]
    assert found.loc[found["section"] == "warning", "note"].str.contains("no draws under the null: .*CCC").any()
