"""`carrylab start`: what a file gives away is filled in, what it cannot tell is a question, nothing is guessed."""

import math
import os
import re
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
from click.testing import CliRunner

from carrylab.cli import main
from carrylab.data.calendar import parse_tenor
from carrylab.data.read import read_market
from carrylab.errors import DataError, StudyError
from carrylab.markets import MARKETS
from carrylab.markets.parity import Entity, Parity
from carrylab.start import start
from carrylab.start_guess import read_head
from carrylab.study import read_study

DEMO = Path(__file__).resolve().parent.parent / "datasets_demo" / "clean"
FILES = (
    "zero_yields.csv",
    "deposit_rates.csv",
    "fx_spot.csv",
    "fx_crosses.csv",
    "fx_forwards.csv",
    "equity_price.csv",
    "equity_dividend.csv",
    "equity_total_return.csv",
    "growth.csv",
)
# What the makers of the demo files know and no file says.
DEMO_ANSWERS = {
    "deposits": {
        "compounding": 'compounding = "simple"',
        "day_count": 'day_count = { QPD = "act/365f", QVP = "act/365f", QYR = "act/365f", others = "act/360" }',
    },
    "forwards": {"quote": 'quote = "points"', "scale": "scale = { QNK = 100, others = 10000 }"},
}
QUESTION = re.compile(r"^# (?=.* # question: )", re.MULTILINE)


def write(folder: Path, name: str, text: str) -> Path:
    path = folder / name
    path.write_text(text, encoding="utf-8")
    return path


def begun(folder: Path, *files: Path) -> str:
    """The text of a study for these files, also written into the folder."""
    text = start(files, folder / "study.toml")
    write(folder, "study.toml", text)
    return text


def answered(folder: Path, text: str, answers: dict[str, str]) -> Path:
    """The study with every question answered: as suggested, but for the lines to replace."""
    for line, answer in answers.items():
        assert line in text
        text = text.replace(line, answer)
    return write(folder, "study.toml", QUESTION.sub("", text))


def refusals(folder: Path) -> str:
    with pytest.raises(StudyError) as refused:
        read_study(folder / "study.toml")
    return str(refused.value)


def question(text: str, key: str) -> str:
    """The one question line of a key."""
    (line,) = (line for line in text.splitlines() if re.match(rf"# {key} = .* # question: ", line))
    return line


def months(rows: int, cells: str) -> str:
    return "".join(f"20{10 + at // 12}-{at % 12 + 1:02d}-28,{cells}\n" for at in range(rows))


def test_the_demo_files_make_three_markets(tmp_path: Path) -> None:
    text = begun(tmp_path, *(DEMO / name for name in FILES))
    study = read_study(answered(tmp_path, text, {}))
    assert [(market.kind, market.interval) for market in study.markets] == [
        ("bonds", "month"),
        ("currencies", "month"),
        ("equities", "month"),
    ]
    bonds, currencies, equities = study.markets
    assert bonds.sources["zero_yields"][0].spread == "maturity"
    assert currencies.parities == ("uncovered-interest", "forward-discount")
    assert [source.path.name for source in currencies.sources["spot"]] == ["fx_spot.csv", "fx_crosses.csv"]
    assert set(equities.sources) == {"prices", "dividends", "total_return", "deposits"}
    assert study.home == "QMT"
    assert study.economies["QN"] == "QNK"


def told(text: str) -> str:
    """The demo's questions answered by those who made its files, table by table."""
    tables = re.split(r"(?=^\[\[)", text, flags=re.MULTILINE)
    for at, table in enumerate(tables):
        role = re.match(r"\[\[market\.data\.(\w+)", table)
        for key, answer in DEMO_ANSWERS.get(role[1] if role else "", {}).items():
            tables[at] = tables[at].replace(question(table, key), answer)
    return "".join(tables)


def parities(study: Path) -> dict[tuple[str, str, str], Parity]:
    """Every parity of a study by market kind, name and horizon."""
    read = read_study(study)
    return {
        (market.kind, parity.name, str(parity.horizon)): parity
        for market in read.markets
        for parity in MARKETS[market.kind](read_market(market), read.economies)
    }


def what(entity: Entity) -> tuple[str, str, str]:
    return entity.economy, entity.currency, entity.maturity and parse_tenor(entity.maturity).canonical


def test_right_answers_give_the_arrays_of_the_demo_study(tmp_path: Path) -> None:
    text = told(begun(tmp_path, *(DEMO / name for name in FILES)))
    mine, demo = parities(answered(tmp_path, text, {})), parities(DEMO / "study.toml")
    shared = set(mine) & set(demo)
    assert {(kind, name) for kind, name, _ in shared} == {
        ("bonds", "forward-spot"),
        ("bonds", "yield-spread"),
        ("currencies", "uncovered-interest"),
        ("currencies", "forward-discount"),
        ("equities", "dividend-price"),
        ("equities", "carry"),
    }
    for key in shared:
        at = {what(entity): i for i, entity in enumerate(demo[key].entities)}
        both = [(i, at[what(entity)]) for i, entity in enumerate(mine[key].entities) if what(entity) in at]
        assert len(both) >= 6
        for i, j in both:
            np.testing.assert_allclose(mine[key].signal[:, i], demo[key].signal[:, j], rtol=0, atol=1e-14)


def test_every_unanswered_key_is_named(tmp_path: Path) -> None:
    begun(tmp_path, *(DEMO / name for name in FILES))
    lines = refusals(tmp_path).splitlines()
    for place, key in (
        ("'Bonds', data.zero_yields", "unit"),
        ("'Bonds', data.zero_yields", "compounding"),
        ("'Bonds'", "horizons"),
        ("'Currencies', data.spot", "quote"),
        ("'Currencies', data.forwards", "quote"),
        ("'Currencies'", "home"),
        ("'Equity indices', data.dividends", "basis"),
    ):
        assert any(f"market {place}: the key {key} is missing" in line for line in lines)


def test_no_unit_and_no_direction_is_ever_filled_in(tmp_path: Path) -> None:
    text = begun(tmp_path, *(DEMO / name for name in FILES))
    deciding = r"(unit|compounding|day_count|quote|scale|timing|basis|home|tenor|signal|legs|horizons) ="
    assert not re.findall(f"^{deciding}", text, re.MULTILINE)
    assert re.findall(f"^# {deciding}.* # question: ", text, re.MULTILINE)


def test_a_file_of_unknown_content_is_reported_not_placed(tmp_path: Path) -> None:
    text = begun(tmp_path, DEMO / "zero_yields.csv", DEMO / "growth.csv")
    assert "growth.csv: its name and its columns" in text
    assert "growth.csv" not in "".join(re.findall("^file = .*", text, re.MULTILINE))


def test_one_country_without_codes_can_be_built_once_it_is_answered(tmp_path: Path) -> None:
    rows = "".join(f"{2000 + at // 12}-{at % 12 + 1:02d},{100 + at},{3 + at % 5},4\n" for at in range(36))
    stocks = write(tmp_path, "stocks.csv", "date,price,dividend,bill\n" + rows)
    text = begun(tmp_path, stocks)
    answers = {question(text, "tenor"): 'tenor = "12m"', question(text, "day_count"): ""}
    ratio = parities(answered(tmp_path, text, answers))["equities", "dividend-price", "12m"]
    # 2000-01: dividends of 3 on a price of 100.
    assert ratio.signal[0, 0] == pytest.approx(math.log(0.03), abs=1e-15)
    assert ratio.entities[0].currency == "USD"


def test_answers_go_in_by_replacing_the_question(tmp_path: Path) -> None:
    rates = write(tmp_path, "deposits.csv", "date,currency,tenor,value\n" + months(24, "QNK,3m,4.5"))
    spot = write(tmp_path, "spot.csv", "date,currency,value\n" + months(24, "QNK,1.25"))
    text = begun(tmp_path, rates, spot)
    answers = {
        question(text, "home"): 'home = "QMT"',
        question(text, "horizons"): 'horizons = ["3m"]',
        question(text, "unit"): 'unit = "basis points"',
        question(text, "compounding"): 'compounding = "simple"',
        question(text, "day_count"): 'day_count = "act/365f"',
        question(text, "quote"): 'quote = "foreign per home"',
    }
    (market,) = read_study(answered(tmp_path, text, answers)).markets
    deposits, quotes = market.sources["deposits"][0], market.sources["spot"][0]
    assert (deposits.unit, deposits.compounding) == ("basis points", "simple")
    assert deposits.day_count == {"others": "act/365f"}
    assert quotes.quote == "foreign per home"
    assert (market.home, str(market.horizons[0])) == ("QMT", "3m")


def test_a_simple_rate_without_its_day_count_is_still_missing(tmp_path: Path) -> None:
    rates = write(tmp_path, "deposits.csv", "date,currency,tenor,value\n" + months(24, "QNK,3m,4.5"))
    spot = write(tmp_path, "spot.csv", "date,currency,value\n" + months(24, "QNK,1.25"))
    text = begun(tmp_path, rates, spot)
    text = text.replace(question(text, "compounding"), 'compounding = "simple"')
    write(tmp_path, "study.toml", text)
    assert "the key day_count is missing" in refusals(tmp_path)


def test_a_panel_of_own_columns_asks_for_signal_and_legs(tmp_path: Path) -> None:
    panel = write(tmp_path, "panel.csv", "month,country,spread,rx,dy\n" + months(24, "QM,0.1,0.2,0.3"))
    text = begun(tmp_path, panel)
    said = refusals(tmp_path)
    assert "the key signal is missing" in said
    assert "the key legs is missing" in said
    legs = (
        'legs = [ { name = "return", column = "rx", weight = 1, null = 0, role = "return" }, '
        '{ name = "rise", column = "dy", weight = 1, null = 1, role = "fundamental" } ]'
    )
    (market,) = read_study(answered(tmp_path, text, {question(text, "legs"): legs})).markets
    assert market.panel is not None
    assert (market.panel.entity, market.panel.signal) == ("country", "spread")
    assert [leg.role for leg in market.panel.legs] == ["return", "fundamental"]
    assert market.sources["panel"][0].columns == {"month": "date"}


def test_numbers_in_column_names_are_no_lengths_until_the_user_says_so(tmp_path: Path) -> None:
    path = write(tmp_path, "zero_yields.csv", "date,y1,y2,y10\n" + months(24, "1,2,3"))
    text = begun(tmp_path, path)
    line = question(text, "columns")
    answer = 'columns = { y1 = "1y", y2 = "2y", y10 = "10y" }'
    (market,) = read_study(answered(tmp_path, text, {line: answer})).markets
    source = market.sources["zero_yields"][0]
    assert (source.spread, source.columns["y10"]) == ("maturity", "10y")
    assert source.constants == {"economy": "US"}


@pytest.mark.parametrize(
    ("dates", "interval"),
    [
        (["2024-01-02", "2024-01-03", "2024-01-04", "2024-01-05", "2024-01-08"], "day"),
        (["2024-W01", "2024-W02", "2024-W03"], "week"),
        (["2024-01-31", "2024-02-29", "2024-03-31"], "month"),
        (["2024-Q1", "2024-Q2", "2024-Q3"], "quarter"),
        (["2021", "2022", "2023"], "year"),
        (["2024-01"], None),
    ],
)
def test_interval_from_the_spacing_of_dates(tmp_path: Path, dates: list[str], interval: str | None) -> None:
    rows = "".join(f"{date},QN,100\n" for date in dates)
    assert read_head(write(tmp_path, "price.csv", "date,economy,value\n" + rows)).dates.interval == interval


def test_one_date_leaves_the_interval_a_question(tmp_path: Path) -> None:
    text = begun(tmp_path, write(tmp_path, "zero.csv", "date,economy,1y,2y\n2024-01,QN,1,2\n"))
    assert '"month", "quarter", "year"' in question(text, "interval")
    assert "the key interval is missing" in refusals(tmp_path)


@pytest.mark.parametrize(
    ("dates", "order"),
    [(("31/01/2024", "29/02/2024"), "dmy"), (("01/31/2024", "02/29/2024"), "mdy"), (("01/02/2024", "03/04/2024"), "?")],
)
def test_order_of_day_and_month(tmp_path: Path, dates: tuple[str, str], order: str) -> None:
    rows = "".join(f"{date},QN,1,2\n" for date in dates)
    path = write(tmp_path, "zero.csv", "date,economy,1y,2y\n" + rows)
    assert read_head(path).dates.order == order
    text = begun(tmp_path, path)
    if order == "?":
        assert question(text, "date_order")
    else:
        assert f'\ndate_order = "{order}"' in text


def test_decimal_commas_and_marks_for_missing_are_filled_in(tmp_path: Path) -> None:
    path = write(tmp_path, "price.csv", "date;economy;value\n2024-01;QN;1,25\n2024-02;QN;n/a\n2024-03;QN;1,5\n")
    text = begun(tmp_path, path)
    assert '\ndecimal = ","' in text
    assert '\nmissing = ["n/a"]' in text
    assert read_head(path).span("value") == (1.25, 1.5)


@pytest.mark.parametrize(
    ("name", "header", "cells", "roles"),
    [
        ("curve.csv", "date,economy,maturity,value", "QN,5y,1", {"zero_yields": "value"}),
        ("a.csv", "date,economy,maturity,value", "QN,5y,1", {"zero_yields": "value"}),
        ("a.csv", "date,currency,tenor,value", "QNK,3m,1", {"deposits": "value"}),
        ("a.csv", "date,pair,bid,ask", "QNKQMT,1,1.1", {"spot": ""}),
        ("a.csv", "date,pair,tenor,bid,ask", "QNKQMT,1m,1,1.1", {"forwards": ""}),
        ("fwd_points.csv", "date,QNK,QPD", "1,2", {"forwards": ""}),
        (
            "stocks.csv",
            "date,price,dividend,bill",
            "1,2,3",
            {"prices": "price", "dividends": "dividend", "deposits": "bill"},
        ),
        ("tr.csv", "date,economy,value", "QN,1", {"total_return": "value"}),
        ("a.csv", "date,economy,value", "QN,1", {}),
        ("a.csv", "date,economy,x,y", "QN,1,2", {"panel": ""}),
    ],
)
def test_probable_role(tmp_path: Path, name: str, header: str, cells: str, roles: dict[str, str]) -> None:
    path = write(tmp_path, name, f"{header}\n{months(3, cells)}")
    assert read_head(path).roles == roles


def test_share_prices_bring_their_own_bill_rate(tmp_path: Path) -> None:
    stocks = write(tmp_path, "stocks.csv", "date,price,dividend,bill\n" + months(24, "100,4,3"))
    rates = write(tmp_path, "deposits.csv", "date,currency,tenor,value\n" + months(24, "QNK,3m,4.5"))
    spot = write(tmp_path, "spot.csv", "date,currency,value\n" + months(24, "QNK,1.25"))
    currencies, equities = read_study(answered(tmp_path, begun(tmp_path, stocks, rates, spot), {})).markets
    assert [source.path.name for source in currencies.sources["deposits"]] == ["deposits.csv"]
    assert [source.path.name for source in equities.sources["deposits"]] == ["stocks.csv"]
    assert equities.sources["deposits"][0].columns == {"bill": "value"}


def test_other_names_are_mapped(tmp_path: Path) -> None:
    path = write(tmp_path, "spot.csv", "obs_date,ccy,rate\n" + months(12, "JPY,147.2"))
    assert '\ncolumns = { obs_date = "date", ccy = "currency" }\n' in begun(tmp_path, path)
    path = write(tmp_path, "fx.csv", "Date,Pair,Bid,Ask\n" + months(12, "EUR/USD,1.5,1.6"))
    mapped = '\ncolumns = { Date = "date", Pair = "pair", Bid = "bid", Ask = "ask" }\n'
    assert mapped in begun(tmp_path, path)


def test_home_is_asked_only_where_there_are_currencies(tmp_path: Path) -> None:
    assert "home" not in begun(tmp_path, DEMO / "zero_yields_sparse.csv")
    assert question(begun(tmp_path, DEMO / "fx_spot.csv"), "home").startswith('# home = "QMT"')


def test_paths_are_relative_to_the_study(tmp_path: Path) -> None:
    (tmp_path / "data").mkdir()
    path = write(tmp_path / "data", "zero yields.csv", "date,economy,1y,2y\n" + months(12, "QN,1,2"))
    assert 'file = "data/zero yields.csv"' in begun(tmp_path, path)


@pytest.mark.parametrize(
    ("name", "content", "said"),
    [
        ("none.csv", None, "none.csv"),
        ("empty.csv", b"", "is empty"),
        ("head.csv", b"date,economy,value\n", "no data row"),
        ("words.csv", b"date,economy,value\n2024-01,QN,high\n2024-02,QN,low\n", "no column of numbers"),
        ("dates.csv", b"when,economy,value\nsoon,QN,1\nlater,QN,2\n", "no column of dates"),
        ("uneven.csv", b"date,a\n2024-01,1,2\n", "row 2 has 3 cells"),
        ("book.csv", b"PK\x03\x04 and more", "not the text its name says"),
        ("latin.csv", b"date,land,value\n2024-01,\xd6st,1\n", "latin-1"),
        ("folder.csv", "folder", "folder"),
    ],
)
def test_bad_files_are_one_line(tmp_path: Path, name: str, content: bytes | str | None, said: str) -> None:
    path = tmp_path / name
    if content == "folder":
        path.mkdir()
    elif isinstance(content, bytes):
        path.write_bytes(content)
    with pytest.raises(DataError) as refused:
        start([path], tmp_path / "study.toml")
    assert said in str(refused.value)
    assert name in str(refused.value)
    assert "\n" not in str(refused.value)


def test_the_command_writes_once_and_never_over_a_study(tmp_path: Path) -> None:
    study = tmp_path / "study.toml"
    first = CliRunner().invoke(main, ["start", str(DEMO / "zero_yields.csv"), "--study", str(study)])
    assert first.exit_code == 0, first.output
    written = study.read_text(encoding="utf-8")
    assert 'kind = "bonds"' in written
    again = CliRunner().invoke(main, ["start", str(DEMO / "fx_spot.csv"), "--study", str(study)])
    assert again.exit_code == 2
    assert "exists already" in again.stderr
    assert study.read_text(encoding="utf-8") == written


def test_pandas_waits_for_the_first_file() -> None:
    code = "import sys, carrylab.start; sys.exit('pandas' in sys.modules)"
    assert subprocess.run([sys.executable, "-c", code], env=os.environ, check=False).returncode == 0
