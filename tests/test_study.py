"""Study files: what is read, what is refused, and the line a user sees."""

from pathlib import Path

import pytest

from carrylab.data.calendar import Tenor
from carrylab.errors import StudyError
from carrylab.study import read_study

BASE = """
title = "A study"
home = "QMT"
interval = "month"
from = "1996-01"
until = "2025-12"
horizons = ["12m"]

[economies]
QM = "QMT"
QN = "QNK"

[inference]
errors = "bartlett"
lags = 12

[[market]]
name = "Bonds"
kind = "bonds"
parities = ["forward-spot", "yield-spread"]
maturities = ["2y", "36m"]
by = "maturity"
effects = "entity"
[market.data]
zero_yields = { file = "zero.csv", unit = "percent", compounding = "annual", timing = "end" }
missing_maturity = "exact"

[[market]]
name = "Currencies"
kind = "currencies"
parities = ["uncovered-interest", "forward-discount"]
horizons = ["1m", "3m"]
errors = "auto"
[market.data]
spot = { file = "spot.csv", quote = "home per foreign" }
forwards = { file = "forwards.csv", quote = "points", scale = { QNK = 100, others = 10000 } }
deposits = [ { file = "a.csv", unit = "percent", compounding = "simple", day_count = "act/360", tenor = "1m" },
  { file = "b.csv", unit = "percent", compounding = "simple", day_count = { QNK = "act/365f", others = "act/360" } } ]
controls = [ { name = "growth gap", file = "growth.csv", known_after = "2m" } ]

[[market]]
name = "Equity"
kind = "equities"
parities = ["dividend-price", "carry"]
horizons = ["12m", "5y"]
rho = 0.96
[market.data]
prices = { file = "prices.csv" }
dividends = { file = "dividends.csv", basis = "trailing 12 months" }
deposits = { file = "b.csv", unit = "percent", compounding = "simple", day_count = "act/360" }

[[market]]
name = "Own"
kind = "columns"
by = "entity"
[market.data]
panel = { file = "panel.csv", entity = "country", signal = "spread", controls = ["growth"], legs = [
  { name = "excess return", column = "rx", weight = 1, null = 0, role = "return" },
  { name = "rate rise", column = "dy", weight = 1, null = 1, role = "fundamental" } ] }
"""


def study_file(folder: Path, text: str) -> Path:
    path = folder / "study.toml"
    path.write_text(text, encoding="utf-8")
    return path


def test_reads_the_whole_study(tmp_path: Path) -> None:
    study = read_study(study_file(tmp_path, BASE))
    bonds, currencies, equity, own = study.markets
    assert (study.title, study.home, study.economies["QN"]) == ("A study", "QMT", "QNK")
    assert bonds.maturities == (Tenor(months=24), Tenor(months=36))
    assert [str(maturity) for maturity in bonds.maturities] == ["2y", "36m"]
    assert (bonds.first, bonds.last, bonds.by, bonds.missing_maturity) == ("1996-01", "2025-12", "maturity", "exact")
    assert (bonds.inference.errors, bonds.inference.lags) == ("bartlett", 12)
    assert currencies.inference.errors == "auto"
    assert currencies.horizons == (Tenor(months=1), Tenor(months=3))
    assert [source.file for source in currencies.sources["deposits"]] == ["a.csv", "b.csv"]
    assert currencies.sources["deposits"][1].day_count == {"QNK": "act/365f", "others": "act/360"}
    assert currencies.sources["deposits"][0].path == tmp_path / "a.csv"
    assert currencies.sources["forwards"][0].scale == {"QNK": 100.0, "others": 10000.0}
    assert currencies.controls[0].role == "growth gap"
    assert currencies.controls[0].known_after == Tenor(months=2)
    assert (equity.rho, equity.effects, equity.by) == (0.96, "entity", "pooled")
    assert own.parities == ("columns",)
    assert own.panel is not None
    assert [(leg.column, leg.weight, leg.null, leg.role) for leg in own.panel.legs] == [
        ("rx", 1.0, 0.0, "return"),
        ("dy", 1.0, 1.0, "fundamental"),
    ]


REFUSED = [
    ('errors = "bartlett"', 'erors = "bartlett"', "[inference], key erors: unknown key; did you mean 'errors'?"),
    ('by = "maturity"', 'by = "maturities"', "key by: 'maturities' is not allowed; allowed: 'pooled', 'maturity'"),
    ('kind = "bonds"', 'kind = "bond"', "key kind: 'bond' is not allowed; allowed: 'bonds'"),
    ('effects = "entity"', "effects = 3", "key effects: 3 is not allowed; allowed: 'none', 'entity', 'time', 'both'"),
    ("lags = 12", "lags = 1.5", "key lags: 1.5 is not allowed; allowed is a whole number from 0"),
    ("lags = 12", "lags = -1", "key lags: -1 is not allowed"),
    ("lags = 12", "confidence = 95", "key confidence: 95 is not allowed; allowed is a number above 0 and below 1"),
    ('from = "1996-01"', 'from = "1996-13"', "key from: '1996-13' is not allowed; allowed is a date or period"),
    ('from = "1996-01"', 'from = "1996-02-30"', "key from: '1996-02-30' is not allowed"),
    ('until = "2025-12"', 'until = "1995-12"', "key until: '1995-12' lies before from = '1996-01'"),
    ('horizons = ["1m", "3m"]', 'horizons = ["2w"]', "key horizons: '2w' is no whole number of months"),
    ('horizons = ["1m", "3m"]', 'horizons = ["x"]', 'key horizons: ["x"] is not allowed'.replace('"', "'")),
    ('horizons = ["1m", "3m"]', 'horizons = ["1q", "3m"]', "a value stands twice in this list"),
    ('horizons = ["12m", "5y"]', 'horizons = ["6m"]', "'6m' is not allowed with dividend-price"),
    ('interval = "month"', "", "the key interval is missing here and at the top"),
    ('home = "QMT"', "", "the key home is missing here and at the top; name the home currency"),
    ('"forward-discount"]', '"forward-discont"]', "did you mean 'forward-discount'?"),
    ('["forward-spot", ', '["forward-spot-far", ', "the key short is missing"),
    ('unit = "percent", compounding = "annual", ', "", "the key unit is missing; allowed: percent, decimal, basis"),
    (', day_count = "act/360", tenor', ", tenor", "the key day_count is missing; a simple rate needs one of"),
    (', quote = "home per foreign"', ', quote = "points"', "'points' is not allowed for spot"),
    (", scale = { QNK = 100, others = 10000 }", "", "the key scale is missing; points need it"),
    ("spot = { file", "sport = { file", "data, key sport: unknown key; did you mean 'spot'?"),
    ('prices = { file = "prices.csv" }', "", "equities need prices; declare the file"),
    ("rho = 0.96", "rho = 1.2", 'key rho: 1.2 is not allowed; allowed: "sample"'),
    ('name = "Equity"', 'name = "Bonds"', "two markets have this name"),
    ('name = "Equity"\n', "", "[[market]] number 3: the key name is missing"),
    ('column = "dy"', 'column = "rx"', "two legs have the column 'rx'"),
    ('role = "fundamental"', 'role = "return"', "two legs have the role 'return'; allowed is one"),
    ('signal = "spread", ', "", "data.panel: the key signal is missing"),
    ('missing_maturity = "exact"', 'missing_maturity = "nearest"', "key missing_maturity: 'nearest' is not allowed"),
    ('name = "growth gap", ', "", "controls: the key name is missing"),
    ('title = "A study"', 'title = "A study', "is no valid TOML"),
]


@pytest.mark.parametrize(("old", "new", "line"), REFUSED, ids=[case[2][:50] for case in REFUSED])
def test_refuses_with_one_line(tmp_path: Path, old: str, new: str, line: str) -> None:
    assert BASE.count(old) >= 1
    with pytest.raises(StudyError) as wrong:
        read_study(study_file(tmp_path, BASE.replace(old, new, 1)))
    assert line in str(wrong.value)
    assert all("study.toml" in one for one in str(wrong.value).splitlines())


def test_names_every_problem_at_once(tmp_path: Path) -> None:
    text = BASE.replace('by = "maturity"', 'by = "x"').replace("rho = 0.96", "rho = 2")
    with pytest.raises(StudyError) as wrong:
        read_study(study_file(tmp_path, text))
    assert len(str(wrong.value).splitlines()) == 2


def test_a_missing_file_a_folder_and_another_encoding(tmp_path: Path) -> None:
    with pytest.raises(StudyError, match="no such study file"):
        read_study(tmp_path / "none.toml")
    with pytest.raises(StudyError, match="is a folder"):
        read_study(tmp_path)
    (tmp_path / "latin.toml").write_bytes('title = "Zür"'.encode("latin-1"))
    with pytest.raises(StudyError, match="byte 10 is no UTF-8"):
        read_study(tmp_path / "latin.toml")
