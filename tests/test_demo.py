"""The demo world: the files equal the generator's output, its identities hold, its planted values are in it."""

import csv
import io
from functools import cache
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from carrylab.demo import SEED, World, world, write_clean, write_dirty
from carrylab.demo.economies import CODES, ECONOMIES, FLOATING, HOME, PEGGED
from carrylab.demo.files import BASIS_DAYS
from carrylab.demo.plants import Plant
from carrylab.demo.population import bond_slopes, currency_slopes, equity_slopes
from carrylab.demo.rates import SHORT, Floats, accrual_days, factors, loadings
from carrylab.demo.world import DOLLAR, DP_PHI, DYNAMIC, STATIC, equities, recessions
from carrylab.study import read_study

DEMO = Path(__file__).resolve().parent.parent / "datasets_demo"
CLEAN, DIRTY = DEMO / "clean", DEMO / "dirty"
WRITERS = {"clean": write_clean, "dirty": write_dirty}


@cache
def demo() -> World:
    return world(SEED)


def table(name: str, folder: Path = DIRTY) -> pd.DataFrame:
    return pd.read_csv(folder / name, keep_default_na=False, na_values=[""])


def mid(name: str, pair: str, folder: Path = DIRTY) -> pd.Series:
    """Log mid price of a pair, by date."""
    rows = table(name, folder).query("pair == @pair").set_index("date")
    return np.log((rows["bid"] + rows["ask"]) / 2)


def pooled_slope(x: Floats, y: Floats) -> float:
    """Least squares with an intercept per column."""
    x = x - x.mean(axis=0)
    return float((x * y).sum() / (x * x).sum())


@pytest.mark.parametrize("part", WRITERS)
def test_the_shipped_files_are_what_the_generator_writes(part: str, tmp_path: Path) -> None:
    WRITERS[part](demo(), tmp_path)
    made = {path.name: path.read_bytes() for path in tmp_path.iterdir()}
    shipped = {path.name: path.read_bytes() for path in (DEMO / part).iterdir()}
    assert sorted(made) == sorted(shipped)
    assert [name for name in made if made[name] != shipped[name]] == []
    assert not any(b"\r" in content for content in made.values())


def test_the_set_is_small_enough_for_the_repository() -> None:
    assert sum(path.stat().st_size for path in DEMO.rglob("*") if path.is_file()) < 8_000_000


def test_the_seed_makes_the_world() -> None:
    again, other = world(SEED), world(SEED + 1)
    assert np.array_equal(demo().spot, again.spot)
    assert not np.array_equal(demo().spot, other.spot)


def test_codes_are_free_for_invented_data() -> None:
    # ISO 3166-1: QM to QZ are user-assigned. From memory: no ISO 4217 code starts with Q but QAR.
    for economy in ECONOMIES:
        assert economy.code[0] == "Q"
        assert "M" <= economy.code[1] <= "Z"
        assert economy.code not in ("QO", "QU")
        assert economy.currency[:2] == economy.code
        assert len(economy.currency) == 3
    assert len({economy.currency for economy in ECONOMIES}) == len(ECONOMIES) == 11


def test_zero_yields_stand_for_every_month_of_maturity() -> None:
    yields = table("zero_yields.csv", CLEAN)
    assert list(yields.columns) == ["date", "economy", *(f"{n}m" for n in range(1, 121))]
    assert yields["date"].nunique() == 360
    shut = yields.query("economy == 'QT'")["date"].str[:7]
    assert len(shut) == 360 - 14
    assert not shut.between("2008-10", "2009-11").any()
    row = yields.query("economy == 'QM' and date == '1996-01-31'").iloc[0]
    assert row["24m"] == pytest.approx(100 * np.expm1(demo().zero[0, HOME, 23]), abs=5.1e-5)


def test_economies_enter_and_leave() -> None:
    spot = table("fx_spot.csv", CLEAN)
    span = spot.groupby("pair")["date"].agg(["min", "max"])
    assert span.loc["QVPQMT", "min"] == "2004-01-30"
    assert span.loc["QWEQMT", "max"] == "2011-06-30"
    prices = table("equity_price.csv", CLEAN).set_index("date")
    assert prices["QV"].first_valid_index() == "2004-01-30"
    assert prices["QW"].last_valid_index() == "2011-06-30"


def test_the_peg_holds_and_breaks() -> None:
    spot = np.exp(-mid("fx_spot.csv", "QMTQSG", CLEAN))
    before = spot[spot.index < "2013-10"]
    assert (before / 0.25 - 1).abs().max() < 0.006
    assert np.log(spot["2013-10-31"] / spot["2013-09-30"]) == pytest.approx(-0.32, abs=0.006)
    rates = table("deposit_rates.csv", CLEAN).set_index(["currency", "date"])["1m"]
    assert rates["QSG", "2013-10-31"] - rates["QMT", "2013-10-31"] == pytest.approx(20.7, abs=0.7)
    assert rates["QSG", "2000-01-31"] - rates["QMT", "2000-01-31"] == pytest.approx(0.77, abs=0.02)


def test_the_world_is_plausible() -> None:
    made = demo()
    funding = made.zero[:, CODES.index("QN"), 2]
    assert 0.3 < (funding < 0).mean() < 0.7
    assert made.zero.min() > -0.03
    assert made.zero[:, CODES.index("QR"), 2].mean() > 0.07
    floating = np.diff(made.spot[:, list(FLOATING)], axis=0)
    assert (floating.std(axis=0) * np.sqrt(12)).mean() == pytest.approx(0.085, abs=0.01)
    returns = np.diff(np.log(made.total_return), axis=0)
    assert (returns.std(axis=0) * np.sqrt(12)).mean() == pytest.approx(0.15, abs=0.02)
    payout = made.dividend / made.price
    assert payout.min() > 0.01
    assert payout.max() < 0.09
    assert 0.02 < made.recession.mean() < 0.25


def test_total_return_is_price_and_dividends() -> None:
    # From the published files: the month's dividend is what the total return adds to the price return; twelve of
    # them make the published sum. The last column pays from April to October only.
    price, back, dividend = (
        table(f"equity_{name}.csv", CLEAN).set_index("date") for name in ("price", "total_return", "dividend")
    )
    paid = price.shift() * (back / back.shift() - price / price.shift())
    year = paid.rolling(12).sum()
    assert ((year / dividend - 1).abs().max() < 0.005).all()
    winter = pd.to_datetime(paid.index).month.isin([1, 2, 3, 11, 12])
    assert paid.loc[winter, "QY"].abs().max() < 1e-3 * dividend["QY"].max()


def covered_parity(pair: str, tenor: str) -> tuple[float, float]:
    """Slope and R2 of the forward premium on the rate differential, both per year in logs, from the clean files."""
    home = pair[3:] == "QMT"
    foreign = pair[:3] if home else pair[3:]
    points = table("fx_forwards.csv", CLEAN).query("pair == @pair and tenor == @tenor").set_index("date")
    spot = np.exp(mid("fx_spot.csv", pair, CLEAN))
    premium = np.log(1 + (points["bid"] + points["ask"]) / 2 / (100 if foreign == "QNK" else 10000) / spot)
    rates = table("deposit_rates.csv", CLEAN).pivot_table(index="date", columns="currency", values=tenor)
    days = pd.Series(accrual_days(demo().dates)[:, ["1m", "3m", "12m"].index(tenor)], rates.index)
    counts = {economy.currency: BASIS_DAYS[economy.day_count] for economy in ECONOMIES}
    growth = {code: np.log1p(rates[code] / 100 * days / counts[code]) for code in ("QMT", foreign)}
    differential = (growth["QMT"] - growth[foreign]) * (1 if home else -1)
    x, y = ((series * 365.25 / days).reindex(points.index) for series in (differential, premium))
    return float(np.cov(x, y)[0, 1] / x.var()), float(np.corrcoef(x, y)[0, 1] ** 2)


@pytest.mark.parametrize("tenor", ["1m", "3m", "12m"])
@pytest.mark.parametrize("pair", ["QMTQNK", "QMTQQS", "QMTQSG", "QPDQMT", "QRLQMT", "QVPQMT", "QWEQMT", "QYRQMT"])
def test_covered_parity_holds_in_the_published_files(pair: str, tenor: str) -> None:
    slope, r2 = covered_parity(pair, tenor)
    assert slope == pytest.approx(1, abs=0.01)
    assert r2 > 0.999


def test_crosses_close_the_triangle() -> None:
    cross = mid("fx_crosses.csv", "QPDQQS", CLEAN)
    legs = mid("fx_spot.csv", "QPDQMT", CLEAN) + mid("fx_spot.csv", "QMTQQS", CLEAN)
    assert (cross - legs).abs().max() < 2e-5
    cross = mid("fx_crosses.csv", "QYRQNK", CLEAN)
    legs = mid("fx_spot.csv", "QYRQMT", CLEAN) + mid("fx_spot.csv", "QMTQNK", CLEAN)
    assert (cross - legs).abs().max() < 2e-5


def test_bond_population_slopes_are_those_of_a_long_sample() -> None:
    state = factors(np.random.default_rng(11), 40_000)
    short, long, rest = (state @ loadings([months])[0] for months in (12, 60, 48))
    spread = 5 * long - 4 * rest - short
    excess = 5 * long[:-12] - 4 * rest[12:] - short[:-12]
    assert pooled_slope(spread[:-12], excess) == pytest.approx(bond_slopes((60,), 12, "forward-spot")["60m"], abs=0.04)
    steep = (long - short) / 4
    assert pooled_slope(steep[:-12], excess / 4) == pytest.approx(
        bond_slopes((60,), 12, "yield-spread")["60m"], abs=0.06
    )


def test_bond_slopes_rise_with_maturity() -> None:
    slopes = bond_slopes((24, 36, 60, 120), 12, "forward-spot")
    assert 0.8 < slopes["24m"] < slopes["36m"] < slopes["60m"] < 1.2 < slopes["120m"]


@pytest.mark.parametrize(("horizon", "months"), [(1, 1), (12, 12)])
def test_currency_population_slopes_are_those_of_a_long_sample(horizon: int, months: int) -> None:
    # Only the forecast of the return is simulated: what a currency pays is known given the rates.
    state = factors(np.random.default_rng(12), 40_000)
    month = state @ loadings([1])[0] / 12
    month = month - month[:, [HOME]]
    mean = month[:, list(FLOATING)].mean(axis=1, keepdims=True)
    rise = DYNAMIC * (month - mean) + DOLLAR * mean - month
    rolled = np.lib.stride_tricks.sliding_window_view(rise, months, axis=0).sum(axis=-1)
    signal = state @ loadings([horizon])[0] * horizon / 12
    signal = (signal - signal[:, [HOME]])[: len(rolled)]
    floating = list(FLOATING)
    found = pooled_slope(signal[:, floating], (signal + rolled)[:, floating])
    assert found == pytest.approx(currency_slopes(horizon)["pooled"], abs=0.05)


def test_equity_population_slopes_are_those_of_a_long_sample() -> None:
    rng = np.random.default_rng(13)
    price, dividend, back = (np.log(part) for part in equities(rng, recessions(rng, 36_000)))
    ratio = dividend - price
    for years in (1, 5):
        h, planted = 12 * years, equity_slopes(years)
        assert pooled_slope(ratio[:-h], ratio[h:]) == pytest.approx(DP_PHI**h, abs=0.03)
        assert pooled_slope(ratio[:-h], dividend[h:] - dividend[:-h]) == pytest.approx(0, abs=0.03)
        if years == 1:
            found = pooled_slope(ratio[:-h], back[h:] - back[:-h])
            assert found == pytest.approx(planted["excess return"], abs=0.03)
    one, five = equity_slopes(1), equity_slopes(5)
    assert one["excess return"] == pytest.approx(0.2, abs=0.02)
    assert five["excess return"] == pytest.approx(0.67, abs=0.02)


def test_planted_currency_parts_are_found_over_many_worlds() -> None:
    # Each world's regression on the three parts about their true means is unbiased but for Stambaugh's term, which
    # is small where return news and rate news are drawn apart: the mean of many worlds is the planted slope.
    floating = list(FLOATING)
    mean = ((SHORT - SHORT[HOME]) / 12)[floating]
    found = []
    for seed in range(60):
        made = world(seed)
        x = (made.growth[:, :, 0] - made.growth[:, [HOME], 0])[:, floating]
        excess = made.spot[1:, floating] - made.spot[:-1, floating] + x[:-1]
        dollar = x.mean(axis=1, keepdims=True) - mean.mean()
        parts = np.broadcast_arrays(mean - mean.mean(), x - mean - dollar, dollar, np.ones_like(x))
        regressors = np.stack([part[:-1].ravel() for part in parts], axis=1)
        found.append(np.linalg.lstsq(regressors, excess.ravel(), rcond=None)[0][:3])
    error = np.std(found, axis=0, ddof=1) / np.sqrt(len(found))
    assert np.abs((np.mean(found, axis=0) - [STATIC, DYNAMIC, DOLLAR]) / error).max() < 3
    assert error.max() < 0.25


def test_the_answer_file_adds_up() -> None:
    answers = table("population.csv", CLEAN)
    assert list(answers.columns) == ["market", "parity", "leg", "horizon", "group", "value", "how"]
    assert not answers.duplicated(["market", "parity", "leg", "horizon", "group"]).any()
    by_leg = answers.pivot_table(index=["market", "parity", "horizon", "group"], columns="leg", values="value")
    bonds = by_leg.loc["Sovereign bonds"]
    assert np.allclose(bonds[["excess return", "rate rise", "long-rate rise"]].sum(axis=1), 1, atol=2e-4)
    currencies = by_leg.loc["Currencies"].dropna(subset=["foreign appreciation"])
    assert np.allclose(currencies["excess return"] - currencies["foreign appreciation"], 1, atol=2e-4)


@pytest.mark.parametrize("path", sorted(DEMO.rglob("*.toml")), ids=lambda path: f"{path.parent.name}/{path.name}")
def test_demo_studies_can_be_read_and_their_files_exist(path: Path) -> None:
    study = read_study(path)
    for market in study.markets:
        for source in [*sum(market.sources.values(), ()), *market.controls]:
            assert source.path.is_file()


def key() -> list[dict[str, str]]:
    return list(csv.DictReader(io.StringIO((DIRTY / "key.csv").read_text(encoding="utf-8"))))


def test_the_answer_key_names_markets_files_and_levels() -> None:
    markets = {path.name: read_study(path).markets for path in DIRTY.glob("*.toml")}
    named = {(line["study"], line["market"]) for line in key()}
    assert named == {(study, market.name) for study, found in markets.items() for market in found}
    for line in key():
        assert line["level"] in ("error", "warning", "note")
        assert (DIRTY / line["file"]).is_file()
        assert line["first"] <= line["last"]
    assert set(Plant.__dataclass_fields__) < set(key()[0])


def test_every_rule_for_such_data_is_broken_once() -> None:
    rules = ["U1", "P1", "P2", "P3", "P4", *(f"D{n}" for n in range(1, 9)), "R2", "Q1", "S1", "S2", "H1", "I1"]
    assert {line["check"] for line in key()} == set(rules)


# The size of each planted mistake, against the rule it breaks.
def test_rates_per_month_bend_covered_parity() -> None:
    right, wrong = (
        table(name).set_index(["currency", "date"])["value"] for name in ("deposits.csv", "deposits_monthly.csv")
    )
    assert (wrong["QYR"] * 12 - right["QYR"]).abs().max() < 1e-3
    kept = right.index.get_level_values("currency") != "QYR"
    assert wrong[kept].equals(right[kept])


def test_swapped_rates_turn_the_slope() -> None:
    rates = table("deposits_swapped.csv").pivot_table(index="date", columns="currency", values="value")
    points = table("forwards_one.csv").set_index("date")
    premium = (points["bid"] + points["ask"]) / 2 / 10000 / np.exp(mid("spot_one.csv", "QPDQMT"))
    slope = np.polyfit((rates["QMT"] - rates["QPD"]) / 100, 12 * premium, 1)[0]
    assert slope == pytest.approx(-1, abs=0.05)


def test_three_month_points_are_three_times_as_large() -> None:
    right, wrong = (
        table(name).query("pair == 'QTNQMT'").set_index("date")["bid"]
        for name in ("forwards.csv", "forwards_tenor.csv")
    )
    assert np.polyfit(right, wrong, 1)[0] == pytest.approx(3, abs=0.2)


def test_unscaled_points_are_beyond_belief() -> None:
    points = table("forwards.csv").query("pair == 'QPDQMT'").set_index("date")
    premium = np.log1p((points["bid"] + points["ask"]) / 2 / 100 / np.exp(mid("spot.csv", "QPDQMT"))) * 12
    assert premium.abs().max() > 1


def test_a_turned_cross_misses_the_triangle_by_twice_itself() -> None:
    gap = mid("crosses_turned.csv", "QPDQQS") - mid("spot.csv", "QPDQMT") - mid("spot.csv", "QMTQQS")
    wrong = gap[gap.abs() > 0.001]
    assert (wrong.index.min(), wrong.index.max()) == ("2015-01-30", "2015-12-31")
    right = mid("fx_crosses.csv", "QPDQQS", CLEAN).reindex(wrong.index)
    assert np.allclose(wrong, -2 * right, atol=1e-4)


def test_quotes_are_crossed_or_wide_in_one_month_only() -> None:
    quotes = table("spot_bid_ask.csv")
    crossed = quotes[quotes["bid"] > quotes["ask"]]
    assert crossed[["date", "pair"]].to_numpy().tolist() == [["2007-05-31", "QYRQMT"]]
    wide = table("spot_wide.csv").query("pair == 'QPDQMT'").set_index("date")
    spread = (wide["ask"] - wide["bid"]) / wide["bid"]
    assert spread["2011-09-30"] > 25 * spread.median()
    assert (spread > 10 * spread.median()).sum() == 1


def test_holes_and_stale_prices_are_where_the_key_says() -> None:
    missing = set(mid("spot.csv", "QYRQMT").index) - set(mid("spot_hole.csv", "QYRQMT").index)
    assert sorted(missing) == ["2003-03-31", "2003-04-30", "2003-05-30"]
    change = mid("spot_stale.csv", "QTNQMT").diff()
    assert change[change == 0].index.tolist() == ["2012-04-30", "2012-05-31", "2012-06-29"]


def test_misaligned_series_are_late() -> None:
    assert set(mid("spot_middle.csv", "QMTQQS").index.str[8:]) == {"15"}
    late, peer = mid("spot_late.csv", "QTNQMT").diff(), mid("spot.csv", "QYRQMT").diff()
    assert late.corr(peer.shift()) > 0.3
    assert abs(late.corr(peer)) < 0.15


def test_averages_have_autocorrelated_changes() -> None:
    # Working (1960): first autocorrelation of changes of averages of a random walk, (m^2 - 1) / (2 (2 m^2 + 1)).
    change = mid("spot_average.csv", "QXMQMT").loc[:"2004-12-31"].diff().dropna()
    assert change.autocorr() == pytest.approx(0.249, abs=0.1)
    assert change.autocorr() > max(0.15, 2 / np.sqrt(len(change)))


def test_jumps_are_of_the_planted_size() -> None:
    splice = mid("spot_splice.csv", "QXMQMT").diff() - mid("fx_spot.csv", "QXMQMT", CLEAN).diff()
    assert splice["2005-01-31"] == pytest.approx(-np.log(0.72), abs=1e-4)
    reform = mid("spot_reform.csv", "QRLQMT").diff() - mid("fx_spot.csv", "QRLQMT", CLEAN).diff()
    assert reform["2006-01-31"] == pytest.approx(3 * np.log(10), abs=1e-4)
    slip = mid("spot_extreme.csv", "QYRQMT") - mid("spot.csv", "QYRQMT")
    assert slip[slip.abs() > 1e-4].to_dict() == {"2018-08-31": pytest.approx(np.log(1.4), abs=1e-4)}


def test_the_bent_curve_has_discount_factors_that_rise() -> None:
    row = table("zero_curve.csv").query("economy == 'QP' and date == '2014-07-31'").iloc[0]
    assert 3 * row["36m"] < 2 * row["24m"] - 5


def test_equity_mistakes_are_beyond_belief() -> None:
    price, unit = (table(name).set_index(["economy", "date"])["value"] for name in ("price.csv", "dividend_unit.csv"))
    assert (unit["QX"] / price["QX"]).min() > 0.2
    for economy in ("QM", "QT", "QY"):
        assert (unit[economy] / price[economy]).max() < 0.2
    late = table("total_return_late.csv").set_index(["economy", "date"])["value"]
    assert ((late["QT"] / price["QT"]).diff().dropna() < 0).mean() > 0.3
    back, swapped = (
        table(name).set_index(["economy", "date"])["value"]
        for name in ("total_return_swapped.csv", "price_swapped.csv")
    )
    assert ((back["QX"] / swapped["QX"]).diff().dropna() < 0).all()
    assert table("price_leaving.csv").query("economy == 'QW'")["date"].max() == "2011-06-30"


def test_legs_miss_the_spread_in_one_row() -> None:
    panel = table("panel.csv")
    gap = (panel["spread"] - panel["rx"] - panel["dy"]).abs()
    assert panel.loc[gap > 1e-8, ["date", "economy"]].to_numpy().tolist() == [["2010-03-31", "QY"]]
    assert gap.max() == pytest.approx(0.01, abs=1e-8)


def test_a_doubled_month_stands_twice() -> None:
    for name, distinct in (("zero_twice.csv", 1), ("zero_two_values.csv", 2)):
        rows = table(name)
        twice = rows[rows.duplicated(["date", "economy"], keep=False)]
        assert twice[["date", "economy"]].drop_duplicates().to_numpy().tolist() == [["2010-06-30", "QT"]]
        assert len(twice.drop_duplicates()) == distinct


def test_the_undeclared_peg_earns_more_than_a_percent() -> None:
    rates = table("deposits.csv").pivot_table(index="date", columns="currency", values="value")
    extra = (rates["QSG"] - rates["QMT"]).loc[:"2013-09-30"]
    calm = mid("spot_peg.csv", "QMTQSG").diff().rolling(12).std().loc[:"2013-09-30"]
    assert ((extra > 1) & (calm < 0.003)).sum() > 24
    assert PEGGED not in FLOATING
