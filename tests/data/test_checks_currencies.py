"""Checks on currencies on small invented markets: the marks of each mistake, and when they must be silent."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import worlds

from carrylab.data.checks import Check
from carrylab.runner import build
from carrylab.study import read_study

STUDY = """
home = "AAA"
interval = "month"
horizons = ["3m"]
[[market]]
name = "FX"
kind = "currencies"
parities = ["uncovered-interest"]
[market.data]
spot = { file = "spot.csv", quote = "home per foreign" }
forwards = { file = "forwards.csv", quote = "home per foreign", tenor = "3m" }
deposits = { file = "deposits.csv", unit = "percent", compounding = "continuous", tenor = "3m" }
"""


def market(codes: tuple[str, ...] = ("BBB", "CCC"), basis: float = 0.0) -> dict[str, pd.DataFrame]:
    """Spot, deposits, and the three-month forwards that covered parity gives, plus a basis a year."""
    files = worlds.currencies(seed=11, codes=codes)
    wide = files["deposits"].pivot_table(index="date", columns="currency", values="value") / 100
    forwards = files["spot"].copy()
    differential = [
        wide.at[date, code] - wide.at[date, "AAA"]
        for date, code in zip(forwards["date"], forwards["currency"], strict=True)
    ]
    forwards["value"] *= np.exp(-0.25 * (np.array(differential) + basis))
    return files | {"forwards": forwards}


def seen(folder: Path, files: dict[str, pd.DataFrame], study: str = STUDY) -> list[Check]:
    whole = read_study(worlds.write(folder, study, **files))
    return list(build(whole.markets[0], whole.economies).checks)


def ids(found: list[Check], level: str) -> list[tuple[str, str]]:
    return [(one.id, one.series) for one in found if one.level == level]


def test_a_right_market_is_quiet(tmp_path: Path) -> None:
    found = seen(tmp_path, market(basis=-0.0015))
    assert ids(found, "error") == []
    assert ids(found, "warning") == []


# One line for each mistake of a currency's own rate or forward: what is done to CCC, and what the line must say.
MISTAKES = {
    "rates of the wrong sign": ("deposits", lambda v: 6.0 - v, "deposits.csv"),
    "a rate a quarter taken for a year": ("deposits", lambda v: v / 4, "its own rate enters with 4"),
    "a rate a month taken for a year": ("deposits", lambda v: v / 12, "its own rate enters with 12"),
}


@pytest.mark.parametrize("what", list(MISTAKES))
def test_covered_parity_fails_on_one_currency(tmp_path: Path, what: str) -> None:
    role, change, said = MISTAKES[what]
    files = market()
    wrong = files[role]["currency"] == "CCC"
    files[role].loc[wrong, "value"] = change(files[role].loc[wrong, "value"])
    errors = [one for one in seen(tmp_path, files) if one.level == "error"]
    assert [(one.id, one.series) for one in errors] == [("P1", "CCC")]
    assert said in errors[0].line()


def test_an_offshore_currency_is_only_a_warning(tmp_path: Path) -> None:
    files = market()
    wrong = files["deposits"]["currency"] == "CCC"
    files["deposits"].loc[wrong, "value"] = 6.0 - files["deposits"].loc[wrong, "value"]
    found = seen(tmp_path, files, STUDY.replace("[market.data]", 'offshore = ["CCC"]\n[market.data]'))
    assert ids(found, "error") == []
    assert ("P1", "CCC") in ids(found, "warning")


def test_forwards_of_another_length(tmp_path: Path) -> None:
    files = market()
    spot, forward = files["spot"]["value"], files["forwards"]["value"]
    files["forwards"]["value"] = np.where(files["spot"]["currency"] == "CCC", spot * (forward / spot) ** 3, forward)
    (found,) = [one for one in seen(tmp_path, files) if one.level == "error"]
    assert (found.id, found.file, found.series) == ("P1", "forwards.csv", "CCC")
    assert "three times the declared length" in found.advice


@pytest.mark.parametrize(("factor", "said"), [(100.0, "percent"), (10_000.0, "basis points")])
def test_rates_in_another_unit_everywhere(tmp_path: Path, factor: float, said: str) -> None:
    files = market()
    rates = files["deposits"]["value"] / 100
    files["deposits"]["value"] = rates * factor
    found = seen(tmp_path, files, STUDY.replace('unit = "percent"', 'unit = "decimal"'))
    parity = [one for one in found if one.id == "P1"]
    assert [(one.level, one.series) for one in parity] == [("error", "")]
    assert said in parity[0].advice


def test_quotes_turned_round(tmp_path: Path) -> None:
    files = market()
    turned = STUDY.replace('quote = "home per foreign"', 'quote = "foreign per home"')
    (found,) = [one for one in seen(tmp_path, files, turned) if one.level == "error"]
    assert (found.id, found.file, found.series) == ("P1", "spot.csv", "")
    assert "turned round" in found.advice


def crosses(files: dict[str, pd.DataFrame], change: float = 1.0, *, turned: bool = False) -> dict[str, pd.DataFrame]:
    """The market quoted in pairs, with the cross BBBCCC: units of CCC for one BBB."""
    spot = files["spot"].pivot_table(index="date", columns="currency", values="value")
    cross = change * spot["BBB"] / spot["CCC"]
    both = [files["spot"].assign(pair=files["spot"]["currency"] + "AAA").drop(columns="currency")]
    both.append(pd.DataFrame({"date": spot.index, "pair": "BBBCCC", "value": 1 / cross if turned else cross}))
    return {name: frame for name, frame in files.items() if name != "forwards"} | {"spot": pd.concat(both)}


PAIRS = STUDY.replace('spot.csv", quote = "home per foreign"', 'spot.csv", quote = "pair"')
PAIRS = "\n".join(line for line in PAIRS.splitlines() if not line.startswith("forwards"))


def test_a_closed_triangle_is_quiet(tmp_path: Path) -> None:
    assert ids(seen(tmp_path, crosses(market()), PAIRS), "error") == []


def test_an_open_triangle_and_a_cross_turned_round(tmp_path: Path) -> None:
    (one,) = [c for c in seen(tmp_path, crosses(market(), 1.01), PAIRS) if c.level == "error"]
    assert (one.id, one.series) == ("P2", "BBBCCC")
    assert "which of the three" in one.advice
    (other,) = [c for c in seen(tmp_path, crosses(market(), turned=True), PAIRS) if c.level == "error"]
    assert "BBBCCC looks turned round" in other.advice


def test_a_bid_above_its_ask(tmp_path: Path) -> None:
    files = market()
    files["spot"] = files["spot"].assign(bid=files["spot"]["value"] * 0.999, ask=files["spot"]["value"] * 1.001)
    files["spot"] = files["spot"].drop(columns="value").reset_index(drop=True)
    assert ids(seen(tmp_path, files), "error") == []
    files["spot"].loc[7, ["bid", "ask"]] = files["spot"].loc[7, ["ask", "bid"]].to_numpy()
    (one,) = [c for c in seen(tmp_path, files) if c.level == "error"]
    assert (one.id, one.series, one.first) == ("P3", "BBB", "2000-08")


def test_points_taken_for_prices(tmp_path: Path) -> None:
    files = market()
    files["forwards"]["value"] = (files["forwards"]["value"] - files["spot"]["value"]).abs() + 1e-4
    found = ids(seen(tmp_path, files), "error")
    assert ("P4", "") in found


def test_a_peg_is_a_note(tmp_path: Path) -> None:
    files = market()
    pegged = files["spot"]["currency"] == "CCC"
    rng = np.random.default_rng(1)
    files["spot"].loc[pegged, "value"] = 4 * np.exp(0.0005 * rng.standard_normal(int(pegged.sum())))
    files["deposits"].loc[files["deposits"]["currency"] == "CCC", "value"] += 4.0
    found = seen(
        tmp_path,
        {name: frame for name, frame in files.items() if name != "forwards"},
        PAIRS.replace('"pair"', '"home per foreign"'),
    )
    assert ("S2", "CCC") in ids(found, "note")


def test_spot_unchanged_while_its_forward_moves(tmp_path: Path) -> None:
    # Two months: one short of what is stale by itself.
    files = market()
    files["spot"] = files["spot"].reset_index(drop=True)
    files["forwards"] = files["forwards"].reset_index(drop=True)
    files["spot"].loc[[41, 42], "value"] = files["spot"].loc[40, "value"]
    (one,) = [one for one in seen(tmp_path, files) if one.id == "D3"]
    assert (one.level, one.series, one.first, one.last) == ("warning", "BBB", "2003-06", "2003-07")
    files["forwards"].loc[[41, 42], "value"] = files["forwards"].loc[40, "value"]
    assert [one for one in seen(tmp_path, files) if one.id == "D3"] == []


def all_crosses() -> pd.DataFrame:
    """The six pairs of AAA, BBB, CCC and DDD, all consistent."""
    spot = market(("BBB", "CCC", "DDD"))["spot"].pivot_table(index="date", columns="currency", values="value")
    spot["AAA"] = 1.0
    pairs = ("BBBAAA", "CCCAAA", "DDDAAA", "BBBCCC", "BBBDDD", "CCCDDD")
    return pd.concat(
        pd.DataFrame({"date": spot.index, "pair": pair, "value": spot[pair[:3]] / spot[pair[3:]]}) for pair in pairs
    )


def triangles(folder: Path, spot: pd.DataFrame) -> list[Check]:
    files = {"deposits": market(("BBB", "CCC", "DDD"))["deposits"], "spot": spot}
    return [one for one in seen(folder, files, PAIRS) if one.id == "P2"]


def test_every_triangle_is_tried_and_the_one_wrong_pair_named(tmp_path: Path) -> None:
    spot = all_crosses()
    assert triangles(tmp_path, spot) == []
    # CCCDDD is in two triangles, one of them without home; BBBAAA in two with home.
    for pair in ("CCCDDD", "BBBAAA"):
        (one,) = triangles(tmp_path, spot.assign(value=spot["value"].where(spot["pair"] != pair, 1 / spot["value"])))
        assert (one.level, one.series) == ("error", pair)
        assert one.advice == f"{pair} looks turned round"


def test_a_triangle_without_home(tmp_path: Path) -> None:
    spot = all_crosses()
    spot = spot[spot["pair"].isin(["BBBAAA", "BBBCCC", "BBBDDD", "CCCDDD"])]
    wrong = spot["value"].where((spot["pair"] != "CCCDDD") | (spot["date"] != "2004-03-31"), 1.2 * spot["value"])
    (one,) = triangles(tmp_path, spot.assign(value=wrong))
    assert (one.level, one.first, one.last) == ("error", "2004-03", "2004-03")
    # ln 1.2 = .1823
    assert "open by up to 18.23% in 1 periods" in one.seen


def test_rounding_opens_a_triangle_a_little(tmp_path: Path) -> None:
    spot = all_crosses()
    wrong = spot["value"].where(spot["pair"] != "CCCDDD", 1.002 * spot["value"])
    (one,) = triangles(tmp_path, spot.assign(value=wrong))
    assert (one.level, one.series) == ("warning", "CCCDDD")


def test_half_spreads_leave_a_triangle_room(tmp_path: Path) -> None:
    spot = all_crosses()
    value = spot["value"].where(spot["pair"] != "CCCDDD", 1.002 * spot["value"])
    wide = spot.assign(bid=0.9992 * value, ask=1.0008 * value).drop(columns="value")
    # Half spreads of 8bp each, and 10bp: 34bp in all against a gap of 20bp.
    assert triangles(tmp_path, wide) == []


def test_new_money_moves_every_pair_of_a_currency(tmp_path: Path) -> None:
    spot = all_crosses()
    late = spot["date"] >= "2005-01"
    reform = spot["value"].where(~late | (spot["pair"] != "CCCAAA"), 1000 * spot["value"])
    reform = reform.where(~late | (spot["pair"] != "CCCDDD"), 1000 * spot["value"])
    reform = reform.where(~late | (spot["pair"] != "BBBCCC"), spot["value"] / 1000)
    files = {"deposits": market(("BBB", "CCC", "DDD"))["deposits"], "spot": spot.assign(value=reform)}
    found = [one for one in seen(tmp_path, files, PAIRS) if one.id in ("D6", "D7")]
    assert {(one.id, one.series, one.first) for one in found} == {
        ("D7", pair, "2005-01") for pair in ("BBBCCC", "CCCAAA", "CCCDDD")
    }
    alone = spot["value"].where(~late | (spot["pair"] != "CCCDDD"), 1000 * spot["value"])
    files["spot"] = spot.assign(value=alone)
    found = [one for one in seen(tmp_path, files, PAIRS) if one.id in ("D6", "D7")]
    assert [(one.id, one.series) for one in found] == [("D6", "CCCDDD")]


def test_a_wide_quote(tmp_path: Path) -> None:
    files = market()
    quoted = files["spot"].assign(bid=files["spot"]["value"] * 0.999, ask=files["spot"]["value"] * 1.001)
    files["spot"] = quoted.drop(columns="value").reset_index(drop=True)
    files["spot"].loc[7, "ask"] = files["spot"].loc[7, "bid"] * 1.03
    (one,) = [one for one in seen(tmp_path, files) if one.id == "P3"]
    assert (one.level, one.series, one.first, one.last) == ("warning", "BBB", "2000-08", "2000-08")


def test_a_float_is_no_peg(tmp_path: Path) -> None:
    assert "S2" not in {one.id for one in seen(tmp_path, market())}
