"""From files to findings: the contract, the identities, and what must not change a number."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import worlds

import carrylab
from carrylab.findings import COLUMNS, KEY

NUMBERS = ["estimate", "std_error", "statistic", "p_value", "lower", "upper", "share", "r2", "n_obs"]
WORLDS = {
    "bonds": (worlds.BONDS, worlds.bonds),
    "currencies": (worlds.CURRENCIES, worlds.currencies),
    "equities": (worlds.EQUITIES, worlds.equities),
    "columns": (worlds.COLUMNS, worlds.columns),
}


def findings_of(path: Path) -> pd.DataFrame:
    return carrylab.run(carrylab.read_study(path)).findings


def shares_of(path: Path) -> pd.DataFrame:
    found = findings_of(path)
    return found[found["section"].isin(["shares", "summary"])].set_index(list(KEY))


def assert_same(left: pd.DataFrame, right: pd.DataFrame, rtol: float = 1e-9) -> None:
    assert list(left.index) == list(right.index)
    for name in NUMBERS:
        np.testing.assert_allclose(left[name], right[name], rtol=rtol, atol=1e-12, err_msg=name)


@pytest.fixture(params=list(WORLDS))
def world(request: pytest.FixtureRequest, tmp_path: Path) -> tuple[Path, str, dict[str, pd.DataFrame]]:
    study, make = WORLDS[request.param]
    return tmp_path, study, make()


def test_the_contract(world: tuple[Path, str, dict[str, pd.DataFrame]]) -> None:
    folder, study, files = world
    found = findings_of(worlds.write(folder, study, **files))
    assert tuple(found.columns) == COLUMNS
    assert not found.duplicated(list(KEY)).any()
    slopes = found[(found["section"] == "shares") & (found["term"] == "signal") & (found["rank"] == "headline")]
    assert (slopes["std_error"] > 0).all()
    assert slopes["r2"].between(0, 1).all()
    assert (slopes["method"] != "").all()
    assert (slopes["group"] == "pooled").any()


@pytest.mark.parametrize("effects", ["none", "entity", "time", "both"])
@pytest.mark.parametrize("kind", ["bonds", "currencies", "columns"])
def test_shares_sum_to_one_under_every_effect_and_holes(tmp_path: Path, kind: str, effects: str) -> None:
    study, make = WORLDS[kind]
    files = make()
    rng = np.random.default_rng(5)
    name = next(iter(files))
    files[name] = files[name][rng.random(len(files[name])) > 0.05]
    by = {'by = "currency"': "", 'by = "maturity"': "", 'by = "entity"': ""}
    for old, new in by.items():
        study = study.replace(old, new + f'effects = "{effects}"')
    found = findings_of(worlds.write(tmp_path, study, **files))
    sums = found[found["term"] == "sum of shares"]
    assert len(sums) >= 1
    np.testing.assert_allclose(sums["estimate"], 1.0, atol=1e-9)


def test_equity_shares_sum_to_one(tmp_path: Path) -> None:
    found = findings_of(worlds.write(tmp_path, worlds.EQUITIES, **worlds.equities()))
    np.testing.assert_allclose(found.loc[found["term"] == "sum of shares", "estimate"], 1.0, atol=1e-9)
    resolved = found[(found["term"] == "resolved premium share") & (found["parity"] == "dividend-price")]
    assert set(resolved["sample"]) == {"all", "rho -0.02", "rho +0.02"}


def test_the_order_of_rows_changes_nothing(world: tuple[Path, str, dict[str, pd.DataFrame]]) -> None:
    folder, study, files = world
    before = shares_of(worlds.write(folder, study, **files))
    shuffled = {name: frame.sample(frac=1, random_state=6) for name, frame in files.items()}
    assert_same(before, shares_of(worlds.write(folder, study, **shuffled)), rtol=0)


def test_a_turned_quote_changes_nothing(tmp_path: Path) -> None:
    files = worlds.currencies()
    before = shares_of(worlds.write(tmp_path, worlds.CURRENCIES, **files))
    files["spot"] = files["spot"].assign(value=1 / files["spot"]["value"])
    turned = worlds.CURRENCIES.replace("home per foreign", "foreign per home")
    assert_same(before, shares_of(worlds.write(tmp_path, turned, **files)))
    pairs = files["spot"].assign(pair="AAA" + files["spot"]["currency"]).drop(columns="currency")
    as_pairs = worlds.CURRENCIES.replace("home per foreign", "pair")
    assert_same(before, shares_of(worlds.write(tmp_path, as_pairs, **(files | {"spot": pairs}))))


@pytest.mark.parametrize(("unit", "factor"), [("decimal", 0.01), ("basis points", 100.0)])
def test_another_unit_changes_nothing(tmp_path: Path, unit: str, factor: float) -> None:
    files = worlds.bonds()
    before = shares_of(worlds.write(tmp_path, worlds.BONDS, **files))
    files["yields"] = files["yields"].assign(value=files["yields"]["value"] * factor)
    assert_same(before, shares_of(worlds.write(tmp_path, worlds.BONDS.replace("percent", unit), **files)), rtol=1e-7)


def test_the_numeraire_of_a_pair_changes_no_slope(tmp_path: Path) -> None:
    files = worlds.currencies(codes=("BBB",))
    before = shares_of(worlds.write(tmp_path, worlds.CURRENCIES, **files))
    other = files["spot"].assign(currency="AAA", value=1 / files["spot"]["value"])
    swapped = worlds.CURRENCIES.replace('home = "AAA"', 'home = "BBB"')
    after = shares_of(worlds.write(tmp_path, swapped, **(files | {"spot": other})))
    keep = before.index.get_level_values("term").isin(["signal"]) & (before.index.get_level_values("group") == "pooled")
    same = after.index.get_level_values("term").isin(["signal"]) & (after.index.get_level_values("group") == "pooled")
    for name in ("estimate", "std_error", "p_value", "r2"):
        np.testing.assert_allclose(before.loc[keep, name], after.loc[same, name], rtol=1e-9)


def test_what_comes_after_until_changes_nothing(world: tuple[Path, str, dict[str, pd.DataFrame]]) -> None:
    folder, study, files = world
    bounded = 'until = "2007-06"\n' + study
    before = shares_of(worlds.write(folder, bounded, **files))
    moved = {}
    for name, frame in files.items():
        values = [c for c in frame.columns if pd.api.types.is_float_dtype(frame[c])]
        late = (frame["date"] > "2007-06-30").to_numpy()
        frame = frame.copy()
        frame.loc[late, values] = frame.loc[late, values].abs() * 1.7 + 0.1
        moved[name] = frame
    assert_same(before, shares_of(worlds.write(folder, bounded, **moved)), rtol=0)


def test_hand_worked_columns(tmp_path: Path) -> None:
    # One entity, spread 0 1 2 3, rx 1 1 2 4: slope = sum (x - 1.5) y / sum (x - 1.5)^2 = 5 / 5 = 1, constant 0.5;
    # dy = spread - rx has slope 0. Residuals .5 -.5 -.5 .5, R2 = 1 - 1/6 = 5/6. White without factor:
    # sum (x - 1.5)^2 e^2 / 25 = (2.25 + .25 + .25 + 2.25) / 4 / 25 = .05.
    panel = pd.DataFrame({"date": ["2001-01", "2001-02", "2001-03", "2001-04"], "country": "EA"})
    panel["spread"], panel["rx"] = [0.0, 1, 2, 3], [1.0, 1, 2, 4]
    panel["dy"] = panel["spread"] - panel["rx"]
    study = worlds.COLUMNS.replace('["3m"]', '["1m"]').replace('by = "entity"', 'errors = "robust"\nfactor = "none"')
    found = findings_of(worlds.write(tmp_path, study, panel=panel))
    rows = found[(found["section"] == "shares") & (found["term"] == "signal")].set_index("leg")
    assert rows.at["excess return", "estimate"] == pytest.approx(1.0)
    assert rows.at["rate rise", "estimate"] == pytest.approx(0.0, abs=1e-12)
    assert rows.at["excess return", "std_error"] == pytest.approx(0.05**0.5)
    assert rows.at["excess return", "r2"] == pytest.approx(5 / 6)
    const = found[(found["term"] == "const") & (found["leg"] == "excess return")]
    assert const["estimate"].iloc[0] == pytest.approx(-0.5 + 1.0)


def test_the_same_run_twice_gives_the_same_bytes(tmp_path: Path) -> None:
    path = worlds.write(tmp_path, worlds.CURRENCIES, **worlds.currencies())
    for name in ("first", "second"):
        carrylab.run(carrylab.read_study(path)).save(tmp_path / name, parquet=True)
    names = {entry.name for entry in (tmp_path / "first").iterdir()}
    assert names == {"report.txt", "report.html", "findings.csv", "findings.parquet", "panel.csv", "run.json"}
    for name in names - {"run.json"}:
        assert (tmp_path / "first" / name).read_bytes() == (tmp_path / "second" / name).read_bytes(), name


def test_the_panel_file_lets_anyone_fit_again(tmp_path: Path) -> None:
    path = worlds.write(tmp_path, worlds.COLUMNS, **worlds.columns())
    results = carrylab.run(carrylab.read_study(path))
    results.save(tmp_path / "out")
    panel = pd.read_csv(tmp_path / "out" / "panel.csv")
    within = panel[["signal", "excess return"]] - panel.groupby("entity")[["signal", "excess return"]].transform("mean")
    slope = (within["signal"] * within["excess return"]).sum() / (within["signal"] ** 2).sum()
    found = results.findings
    pooled = found[(found["term"] == "signal") & (found["group"] == "pooled") & (found["leg"] == "excess return")]
    assert pooled["estimate"].iloc[0] == pytest.approx(slope, rel=1e-9)


def test_markets_of_one_horizon_are_compared(tmp_path: Path) -> None:
    both = (
        worlds.BONDS.replace('["12m"]', '["3m"]')
        .replace(
            'parities = ["forward-spot", "yield-spread", "carry"]',
            'parities = ["carry"]\nmissing_maturity = "linear in yield"',
        )
        .replace('["2y", "3y"]', '["2y"]')
    )
    fx = worlds.CURRENCIES.split("[[market]]")[1].replace("uncovered-interest", "carry")
    study = 'home = "AAA"\n' + both + "[[market]]" + fx
    yields = worlds.bonds()["yields"]
    short = yields[yields["maturity"] == "1y"].assign(maturity="3m")
    path = worlds.write(tmp_path, study, yields=pd.concat([yields, short]), **worlds.currencies())
    found = findings_of(path)
    joint = found[(found["section"] == "joint") & (found["group"] == "pooled")]
    assert "Bonds less FX" in set(joint["term"])
    slopes = found[(found["term"] == "resolved premium share") & (found["group"] == "pooled")].set_index("market")
    expected = slopes.at["Bonds", "estimate"] - slopes.at["FX", "estimate"]
    assert joint["estimate"].iloc[0] == pytest.approx(expected)


def test_an_averaged_price_overlaps_by_one_more_and_loses_one_period_errors(tmp_path: Path) -> None:
    study = worlds.CURRENCIES.replace('quote = "home per foreign"', 'quote = "home per foreign", timing = "average"')
    found = findings_of(worlds.write(tmp_path, study, **worlds.currencies()))
    signal = found[(found["term"] == "signal") & (found["section"] == "shares")]
    assert signal["method"].str.contains("cosines").all()
    windows = found[(found["term"] == "independent windows") & (found["group"] == "pooled")]
    assert windows["estimate"].iloc[0] == pytest.approx(117 / 4)
    assert found.loc[found["section"] == "warning", "note"].str.contains("period averages").any()


def test_an_error_kind_without_lags_is_refused_under_overlap(tmp_path: Path) -> None:
    study = worlds.CURRENCIES.replace('by = "currency"', 'errors = "robust"')
    path = worlds.write(tmp_path, study, **worlds.currencies())
    with pytest.raises(carrylab.CarrylabError, match="has no lags"):
        carrylab.run(carrylab.read_study(path))
