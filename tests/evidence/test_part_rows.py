"""Rows of the parts of the slope through a study file, and what the report says of them."""

from pathlib import Path

import pytest
import worlds

import carrylab


def test_parts_are_rows_and_a_table(tmp_path: Path) -> None:
    study = worlds.CURRENCIES + "[evidence]\nparts = true\n"
    results = carrylab.run(carrylab.read_study(worlds.write(tmp_path, study, **worlds.currencies())))
    found = results.findings[results.findings["section"] == "parts"]
    own = found[(found["sample"] == "all") & (found["role"] == "return")].set_index("term")
    shares = found[(found["sample"] == "all") & (found["leg"] == "")].set_index("term")["estimate"]
    slopes = [own.loc[part, "estimate"] for part in ("static", "dynamic", "common")]
    weights = [shares[f"{part}, share of variance"] for part in ("static", "dynamic", "common")]
    assert sum(w * s for w, s in zip(weights, slopes, strict=True)) == pytest.approx(
        own.loc["pooled, no effects", "estimate"]
    )
    assert 0 <= own.loc["all parts equal", "p_value"] <= 1
    based = found[found["sample"] == "home as zeros"]
    assert set(based["n_entities"]) == {own["n_entities"].iloc[0] + 1}
    report = " ".join(results.report().split())
    assert "parts of the slope" in report
    assert "whatever the home" in report


def test_nothing_is_added_where_nothing_is_asked(tmp_path: Path) -> None:
    results = carrylab.run(carrylab.read_study(worlds.write(tmp_path, worlds.CURRENCIES, **worlds.currencies())))
    assert not (results.findings["section"] == "parts").any()


def test_one_entity_says_why_it_has_no_parts(tmp_path: Path) -> None:
    study = worlds.EQUITIES + "[evidence]\nparts = true\n"
    results = carrylab.run(carrylab.read_study(worlds.write(tmp_path, study, **worlds.equities())))
    found = results.findings[results.findings["section"] == "parts"]
    assert found["note"].str.contains("one entity has no static and no dynamic part").all()
