"""Every horizon through a study file: the same numbers as the headline's, bands around them, and what is not built."""

from pathlib import Path

import pandas as pd
import pytest
import worlds

import carrylab

ASKED = '[evidence]\nhorizons = { until = "6m", every = "1m", common_sample = true }\n[inference]\ndraws = 99\n'


@pytest.fixture(scope="module")
def results(tmp_path_factory: pytest.TempPathFactory):
    folder = tmp_path_factory.mktemp("horizons")
    text = worlds.CURRENCIES.replace('kind = "currencies"', 'kind = "currencies"\nmissing_tenor = "nearest"') + ASKED
    return carrylab.run(carrylab.read_study(worlds.write(folder, text, **worlds.currencies())))


def at(found: pd.DataFrame, horizon: str, term: str, sample: str = "all", role: str = "return") -> pd.Series:
    keep = (found["horizon"] == horizon) & (found["term"] == term) & (found["sample"] == sample)
    return found[keep & (found["role"] == role) & (found["section"] == "horizons")].iloc[0]


def test_the_horizon_of_the_study_is_the_headline_again(results) -> None:
    found = results.findings
    keep = (found["section"] == "shares") & (found["term"] == "signal") & (found["group"] == "pooled")
    headline = found[keep & (found["rank"] == "headline") & (found["role"] == "return")].iloc[0]
    own = at(found[found["parity"] == headline["parity"]], headline["horizon"], "signal")
    for field in ("estimate", "std_error", "p_value", "r2", "n_obs"):
        assert own[field] == pytest.approx(headline[field]), field


def test_every_horizon_stands_with_both_bands_and_the_nulls_own(results) -> None:
    found = results.findings
    parity = found[found["section"] == "horizons"]["parity"].iloc[0]
    own = found[found["parity"] == parity]
    for months in range(1, 7):
        slope, band = at(own, f"{months}m", "signal"), at(own, f"{months}m", "signal, all horizons at once")
        assert band["lower"] < slope["estimate"] < band["upper"]
        # One critical value for all horizons, above the one for a single horizon.
        assert band["statistic"] > 1.96
        assert band["upper"] - band["lower"] > 2 * 1.96 * slope["std_error"]
        chance = at(own, f"{months}m", "slope by chance")
        assert chance["lower"] < chance["upper"]
    r2 = [at(own, f"{months}m", "R2 by chance")["estimate"] for months in (1, 6)]
    assert r2[1] > r2[0]


def test_common_origins_are_the_same_for_all(results) -> None:
    found = results.findings
    parity = found[found["section"] == "horizons"]["parity"].iloc[0]
    own = found[found["parity"] == parity]
    counts = {at(own, f"{months}m", "signal", "common origins")["n_obs"] for months in range(1, 7)}
    assert counts == {at(own, "6m", "signal")["n_obs"]}
    assert at(own, "1m", "signal")["n_obs"] > counts.pop()


def test_all_horizons_are_tested_together(results) -> None:
    found = results.findings
    joint = found[(found["section"] == "horizons") & found["term"].str.startswith("nothing paid at any horizon")]
    assert joint["p_value"].between(0, 1).all()
    assert len(joint) >= 2
    stepped = found[(found["section"] == "horizons") & (found["term"] == "nothing paid, stepped down")]
    drawn = joint[joint["term"].str.endswith("by draws")].iloc[0]
    assert drawn["p_value"] == stepped[stepped["parity"] == drawn["parity"]]["p_value"].min()


def test_what_has_no_quotes_is_said(tmp_path: Path) -> None:
    text = worlds.CURRENCIES + '[evidence]\nhorizons = { until = "4m" }\n'
    results = carrylab.run(carrylab.read_study(worlds.write(tmp_path, text, **worlds.currencies())))
    found = results.findings
    refused = found[(found["section"] == "horizons") & (found["term"] == "not built")]
    assert set(refused["horizon"]) == {"1m", "2m", "4m"}
    assert refused["note"].str.contains("missing_tenor").all()


def test_the_report_says_where_one_half_is_passed(results) -> None:
    report = " ".join(results.report().split())
    assert "by horizon" in report
    assert "The expectation share" in report
    assert "one half" in report


def test_rolled_over_needs_no_quotes_and_starts_at_one_period(tmp_path: Path) -> None:
    """At one month the slope of the month's excess return on the signal, at six months that of six added up."""
    text = worlds.CURRENCIES.replace('["3m"]', '["1m"]').replace('tenor = "3m"', 'tenor = "1m"')
    text += '[evidence]\nhorizons = { until = "6m" }\n'
    results = carrylab.run(carrylab.read_study(worlds.write(tmp_path, text, **worlds.currencies())))
    rolled = results.findings.query("section == 'horizons' and sample == 'rolled over'").set_index("horizon")
    panel = results.panel().pivot_table(index="date", columns="entity", values=["signal", "excess return"])
    for months in (1, 6):
        paid = sum(panel["excess return"].shift(-step) for step in range(months)).dropna()
        signal = panel["signal"].loc[paid.index]
        x, y = signal - signal.mean(), paid - paid.mean()
        slope = (x * y).to_numpy().sum() / (x * x).to_numpy().sum()
        assert rolled.loc[f"{months}m", "estimate"] == pytest.approx(slope)
    assert list(rolled.index) == [f"{months}m" for months in range(1, 7)]
