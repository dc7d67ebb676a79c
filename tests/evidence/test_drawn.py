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
    assert "Draws under the null, pooled: by chance alone" in results.report()
    below = list(results.table().index).index("all is paid") + 1
    assert results.table().index[below] == "  by draws"
    assert 0 < float(results.table()["FX"].iloc[below]) <= 1


def young(codes: tuple[str, ...]) -> dict[str, pd.DataFrame]:
    """Currencies some of which have prices from 2009-03 on alone: ten months with a horizon inside the sample."""
    files = worlds.currencies()
    spot = files["spot"]
    return files | {"spot": spot[~(spot["currency"].isin(codes) & (spot["date"] < "2009-03"))]}


def test_a_market_that_cannot_be_drawn_keeps_the_instrument_and_says_why(tmp_path: Path) -> None:
    found = findings(tmp_path, worlds.CURRENCIES, young(("BBB", "CCC")), f"draws = {DRAWS}")
    assert "instrument" in of(found, "shares", "nothing paid")["method"]
    assert found.loc[found["section"] == "warning", "note"].str.contains("no draws under the null: .*BBB").any()
    assert not (found["section"] == "draws").any()


def test_a_short_entity_is_left_out_of_the_draws_alone(tmp_path: Path) -> None:
    """What is left of the pooled panel is the other currency, whose own test it is; the short one keeps its own."""
    found = findings(tmp_path, worlds.CURRENCIES, young(("CCC",)), f"draws = {DRAWS}")
    warnings = found.loc[found["section"] == "warning", "note"]
    assert warnings.str.contains("CCC left out of the draws, with fewer than 12 dates").any()
    drawn = found[(found["section"] == "draws") & (found["term"] == "nothing paid")].set_index("group")
    assert set(drawn.index) == {"pooled", "BBB"}
    for field in ("estimate", "statistic", "p_value"):
        assert drawn.loc["pooled", field] == pytest.approx(drawn.loc["BBB", field], rel=1e-9)
    assert drawn.loc["pooled", "note"] == "without CCC"
    assert drawn.loc["BBB", "note"] == ""
    kept = found[(found["group"] == "CCC") & (found["term"] == "nothing paid") & (found["rank"] == "second opinion")]
    assert "instrument" in kept["method"].iloc[0]
    slope = found[(found["section"] == "shares") & (found["group"] == "pooled") & (found["term"] == "nothing paid")]
    assert slope["n_entities"].iloc[0] == 2


def test_the_interval_by_inversion_leaves_out_what_the_cosine_t_rejects(tmp_path: Path) -> None:
    found = findings(tmp_path, worlds.CURRENCIES, worlds.currencies(), f"draws = {DRAWS}")
    row = of(found, "draws", "slope by inversion")
    assert row["lower"] < row["estimate"] < row["upper"]
    assert row["estimate"] == pytest.approx(of(found, "draws", "nothing paid")["estimate"])


def test_all_paid_is_drawn_where_it_is_true(tmp_path: Path) -> None:
    """The share that comes true, its cosine t against none, and a p-value a few draws at most from that of the tables.

    On the demo's currencies and here shocks of rates and prices go apart, so tables and draws agree.
    """
    found = findings(tmp_path, worlds.CURRENCIES, worlds.currencies(), "draws = 999")
    for group in ("pooled", "BBB", "CCC"):
        drawn, tables = (
            of(found, "draws", "all paid", group),
            found[(found["section"] == "shares") & (found["term"] == "all paid") & (found["group"] == group)].iloc[0],
        )
        assert drawn["estimate"] == pytest.approx(tables["estimate"], rel=1e-9)
        assert abs(drawn["statistic"]) == pytest.approx(abs(tables["statistic"]), rel=1e-6)
        assert abs(drawn["p_value"] - tables["p_value"]) < 0.25
        assert "nothing comes true" in drawn["method"]


def test_three_legs_are_drawn_under_one_null_only(tmp_path: Path) -> None:
    found = findings(tmp_path, worlds.EQUITIES, worlds.equities(), f"draws = {DRAWS}")
    drawn = found[found["section"] == "draws"]
    assert (drawn["term"] == "nothing paid").any()
    assert not (drawn["term"] == "all paid").any()
